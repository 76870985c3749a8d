package table

import (
	"bytes"
	"errors"
	"io"
	"unicode/utf8"

	"bandgrid/mapio/scan"
)

// How much of a run is looked at before its layout is settled.
const (
	headLen     = 64 << 10
	sampleRows  = 60      // rows
	sampleBytes = 1 << 20 // enough once there are some rows
	fewRows     = 8
	maxHeader   = 100_000 // lines
)

// A head is the beginning of a run.
type head struct {
	r     io.Reader
	file  string
	data  []byte // read so far; each full line ends in '\n'
	err   error  // what ended the reading, io.EOF or worse; nil while there is more
	open  bool   // a '\n' was added where the run ends without one
	lines []headLine
	next  int // offset of the first byte not yet in lines
	no    int // lines before next
}

// A headLine is a line that is not blank.
type headLine struct {
	from, to int // in data; to is after the '\n'
	no       int // from 1
}

func (h *head) refuse(line int, what, remedy string, err error) *scan.InputError {
	return &scan.InputError{File: h.file, Line: line, Pixel: -1, What: what, Remedy: remedy, Err: err}
}

// fill reads until data holds n bytes or the run ends. A reading error is returned only if nothing could be read before it.
func (h *head) fill(n int) error {
	if h.err != nil || len(h.data) >= n {
		return nil
	}
	was := len(h.data)
	for len(h.data) < n && h.err == nil { // in steps, so that memory follows the data
		step := min(n, max(2*len(h.data), headLen)) - len(h.data)
		data := make([]byte, len(h.data)+step, len(h.data)+step+1)
		copy(data, h.data)
		var k int
		k, h.err = readFull(h.r, data[len(h.data):])
		h.data = data[:len(h.data)+k]
	}
	if was == 0 {
		h.data = bytes.TrimPrefix(h.data, []byte("\xef\xbb\xbf"))
	}
	if h.err != nil && len(h.data) > 0 && h.data[len(h.data)-1] != '\n' {
		h.data, h.open = append(h.data, '\n'), true
	}
	if h.err != nil && h.err != io.EOF {
		h.err = readError(h.file, h.err)
		if len(h.data) == 0 {
			return h.err
		}
	}
	return nil
}

// readFull reads until b is full or r fails, with its own error.
func readFull(r io.Reader, b []byte) (n int, err error) {
	for idle := 0; n < len(b) && err == nil; {
		var k int
		k, err = r.Read(b[n:])
		n += k
		if idle++; k > 0 {
			idle = 0
		} else if idle > 100 && err == nil {
			err = io.ErrNoProgress
		}
	}
	return n, err
}

func isInput(err error) bool {
	_, ok := errors.AsType[*scan.InputError](err)
	return ok
}

// readError gives an error of the reader below a file and a remedy if it has none.
func readError(file string, err error) error {
	if isInput(err) {
		return err
	}
	return &scan.InputError{File: file, Pixel: -1, What: "it cannot be read further", Remedy: "what came before can be used", Err: err}
}

// check refuses what is no text.
func (h *head) check() error {
	b := h.data[:min(len(h.data), headLen)]
	if len(bytes.TrimSpace(b)) == 0 && h.err != nil {
		return h.refuse(0, "the file is empty", "measure or copy it again", nil)
	}
	if bytes.HasPrefix(b, []byte{0xff, 0xfe}) || bytes.HasPrefix(b, []byte{0xfe, 0xff}) {
		return h.refuse(0, "it is UTF-16 text", "save it as UTF-8 text", nil)
	}
	odd := 0
	for i := 0; i < len(b); {
		r, n := utf8.DecodeRune(b[i:])
		if r == 0 || r < 0x20 && (r < '\t' || r > '\r') || r == utf8.RuneError && n == 1 {
			odd++
		}
		if r == 0 {
			odd = len(b)
		}
		i += n
	}
	if odd > len(b)/10 {
		return h.refuse(0, "it is binary data, not text", "export the run as delimited text", nil)
	}
	return nil
}

// line returns line i of those that are not blank, reading on where needed; false at the end of the run or of what may be
// held in memory.
func (h *head) line(i int) ([]byte, bool) {
	for i >= len(h.lines) {
		if len(h.lines) >= maxHeader {
			return nil, false
		}
		nl := bytes.IndexByte(h.data[h.next:], '\n')
		if nl < 0 {
			if h.err != nil || len(h.data) >= maxPixel {
				return nil, false
			}
			h.fill(min(maxPixel, 2*len(h.data)))
			continue
		}
		h.no++
		l := headLine{h.next, h.next + nl + 1, h.no}
		h.next = l.to
		if !isBlank(h.data[l.from:l.to]) {
			h.lines = append(h.lines, l)
		}
	}
	l := h.lines[i]
	return h.data[l.from:l.to], true
}

// at returns a line that is known to be there.
func (h *head) at(i int) []byte { return h.data[h.lines[i].from:h.lines[i].to] }

// sample reads the lines on which the guess is based.
func (h *head) sample() error {
	rows := 0
	for i := 0; ; i++ {
		line, ok := h.line(i)
		if !ok {
			if h.err == nil && rows == 0 {
				return h.refuse(0, "there is no row of data in its first 100000 lines or 64 MiB", "check that it is a run in delimited text", nil)
			}
			return nil
		}
		if _, comment := (dialect{sep: ';'}).comment(line); !comment {
			rows++
		}
		if rows >= sampleRows || rows >= fewRows && h.next >= sampleBytes {
			return nil
		}
	}
}

func isBlank(line []byte) bool {
	for _, c := range line {
		if !blank(c) && c != '\n' {
			return false
		}
	}
	return true
}

// comment returns the text of a comment line, or false. A semicolon begins a comment where it does not separate.
func (d dialect) comment(line []byte) (body []byte, ok bool) {
	i := 0
	for blank(line[i]) {
		i++
	}
	switch c := line[i]; {
	case c == '#' || c == '%' || c == '/' && line[i+1] == '/' || c == ';' && d.sep != ';':
	default:
		return nil, false
	}
	for c := line[i]; c == '#' || c == '%' || c == '/' || c == ';' && d.sep != ';'; c = line[i] {
		i++
	}
	return line[d.skip(line, i):], true
}

// empty tells whether a line of the body holds no row: it is blank or a comment.
func (d dialect) empty(line []byte) bool {
	if c := line[0]; '0' <= c && c <= '9' || c == '-' {
		return false
	}
	if isBlank(line) {
		return true
	}
	_, ok := d.comment(line)
	return ok
}
