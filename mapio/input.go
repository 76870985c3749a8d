package mapio

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"hash"
	"io"
	"io/fs"
	"os"
	"sync"
	"sync/atomic"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"bandgrid/mapio/scan"
)

// maxWindow bounds the memory that a zstd frame may ask for. It is what the format's own command uses at most unless told
// otherwise (--ultra -22, and --long without a number).
const maxWindow = 128 << 20

// An input is the file behind a scan: it counts and digests the file's bytes and unpacks them. Read is called by one goroutine
// at a time; the other methods may be called beside it.
type input struct {
	name   string
	file   io.Closer // nil for a reader that is the caller's
	raw    *meter
	plain  io.Reader // unpacked
	packed string    // "gzip", "zstd" or empty

	reading sync.Mutex // held while plain is in use
	free    func()     // releases the unpacker; nil once done
	closed  atomic.Bool
}

// openInput opens path, or standard input for "-".
func openInput(path string, stdin io.Reader) (*input, error) {
	in := &input{name: path}
	var r io.Reader
	if path == "-" {
		in.name = "standard input"
		if r = stdin; r == nil {
			r = os.Stdin
		}
	} else {
		f, err := os.Open(path)
		if err != nil {
			return nil, in.refuse("it cannot be opened", "", cause(err))
		}
		r, in.file = f, f
	}
	in.raw = &meter{r: r, size: -1, sum: sha256.New(), in: in}
	if f, ok := r.(*os.File); ok {
		if info, err := f.Stat(); err == nil && info.IsDir() {
			in.Close()
			return nil, in.refuse("it is a folder", "name the file that holds the run", nil)
		} else if err == nil && info.Mode().IsRegular() {
			in.raw.size = info.Size()
		}
	}
	if err := in.unpack(); err != nil {
		in.Close()
		return nil, err
	}
	return in, nil
}

func (in *input) refuse(what, remedy string, err error) *scan.InputError {
	return &scan.InputError{File: in.name, Pixel: -1, What: what, Remedy: remedy, Err: err}
}

// cause leaves out the file's name, which the message has already.
func cause(err error) error {
	if e, ok := errors.AsType[*fs.PathError](err); ok {
		return e.Err
	}
	return err
}

// unpack tells from the first bytes whether the file is compressed.
func (in *input) unpack() error {
	buffered := bufio.NewReaderSize(in.raw, 1<<16)
	magic, err := buffered.Peek(6)
	if err != nil && err != io.EOF {
		return in.refuse("it cannot be read", "", cause(err))
	}
	in.plain = buffered
	switch {
	case bytes.HasPrefix(magic, []byte{0x1f, 0x8b}):
		z, err := gzip.NewReader(buffered)
		if err != nil {
			return in.broken("gzip", err)
		}
		in.plain, in.packed, in.free = z, "gzip", func() { z.Close() }
	case isZstd(magic):
		z, err := zstd.NewReader(buffered, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxWindow(maxWindow), zstd.WithDecoderLowmem(true))
		if err != nil {
			return in.broken("zstd", err)
		}
		in.plain, in.packed, in.free = z, "zstd", z.Close
	case bytes.HasPrefix(magic, []byte("PK\x03\x04")):
		return in.refuse("it is a zip archive", "unpack it and name the file that holds the run", nil)
	case bytes.HasPrefix(magic, []byte("\xfd7zXZ")):
		return in.refuse("it is compressed with xz", "unpack it, or use gzip or zstd", nil)
	case bytes.HasPrefix(magic, []byte("BZh")):
		return in.refuse("it is compressed with bzip2", "unpack it, or use gzip or zstd", nil)
	}
	return nil
}

// isZstd knows frames and skippable frames (RFC 8878, section 3.1).
func isZstd(b []byte) bool {
	return len(b) >= 4 && (bytes.Equal(b[:4], []byte{0x28, 0xb5, 0x2f, 0xfd}) || b[0]&0xf0 == 0x50 && bytes.Equal(b[1:4], []byte{0x2a, 0x4d, 0x18}))
}

// broken says what is wrong with compressed data.
func (in *input) broken(packed string, err error) error {
	switch {
	case errors.Is(err, io.ErrUnexpectedEOF), errors.Is(err, io.EOF):
		return in.refuse("the file is cut off: its "+packed+" data end too early", "copy it again; what came before the cut can be used", io.ErrUnexpectedEOF)
	case errors.Is(err, zstd.ErrWindowSizeExceeded), errors.Is(err, zstd.ErrDecoderSizeExceeded):
		return in.refuse("unpacking it takes more than 128 MiB of memory", "compress it again with a smaller window", err)
	}
	return in.refuse("its "+packed+" data are damaged", "copy it again; what came before the damage can be used", err)
}

// Read returns unpacked bytes. At the end, good or bad, the rest of the file is read too, for the digest.
func (in *input) Read(p []byte) (int, error) {
	in.reading.Lock()
	if in.closed.Load() {
		in.reading.Unlock()
		return 0, in.refuse("it was closed while it was being read", "", fs.ErrClosed)
	}
	n, err := in.plain.Read(p)
	if err != nil {
		failed := in.raw.failed
		in.raw.drain()
		switch {
		case failed != nil:
			err = in.refuse("it cannot be read further", "what came before can be used", cause(failed))
		case err != io.EOF && in.packed != "":
			err = in.broken(in.packed, err)
		}
	}
	in.reading.Unlock()
	if in.closed.Load() {
		in.release()
	}
	return n, err
}

// release gives the unpacker's memory and goroutines back, unless a read is going on: then that read does so.
func (in *input) release() {
	if in.reading.TryLock() {
		if in.free != nil {
			in.free()
			in.free = nil
		}
		in.reading.Unlock()
	}
}

// Progress returns how many bytes of the file, compressed as it is, have been read, and its size or -1.
func (in *input) Progress() (read, size int64) { return in.raw.read.Load(), in.raw.size }

// Digest returns the SHA-256 of the file's bytes in hexadecimal, or "" if the file was not read to its end.
func (in *input) Digest() string {
	if sum := in.raw.digest.Load(); sum != nil {
		return *sum
	}
	return ""
}

// Close gives the file back. A read that is going on ends as soon as its reader lets it.
func (in *input) Close() error {
	if in.closed.Swap(true) {
		return nil
	}
	var err error
	if in.file != nil {
		err = in.file.Close()
	}
	in.release()
	return err
}

// A meter counts and digests what passes through.
type meter struct {
	r      io.Reader
	in     *input
	size   int64 // -1 if unknown
	read   atomic.Int64
	sum    hash.Hash
	failed error // other than io.EOF
	digest atomic.Pointer[string]
}

func (m *meter) Read(p []byte) (int, error) {
	n, err := m.r.Read(p)
	m.sum.Write(p[:n])
	m.read.Add(int64(n))
	switch {
	case err == io.EOF && m.digest.Load() == nil:
		sum := hex.EncodeToString(m.sum.Sum(nil))
		m.digest.Store(&sum)
	case err != nil && err != io.EOF:
		m.failed = err
	}
	return n, err
}

// drain reads the rest of the file.
func (m *meter) drain() {
	if m.digest.Load() != nil || m.failed != nil {
		return
	}
	buffer := make([]byte, 1<<16)
	for !m.in.closed.Load() {
		if _, err := m.Read(buffer); err != nil {
			return
		}
	}
}
