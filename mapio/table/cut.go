package table

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"iter"
	"sync/atomic"

	"bandgrid/mapio/scan"
)

// blockLen is the usual size of a block: long enough that handing it over costs nothing beside decoding it, short enough that
// many workers' blocks fit in a processor's cache.
const blockLen = 1 << 20

// A source cuts a run into blocks of whole pixels. It is a scan.Source.
type source struct {
	*layout
	r    io.Reader
	head []byte // what was read of the data while the layout was found
	err  error  // what ended that reading, nil if there is more
	open bool   // a '\n' was added to head where the run ends without one
	line int    // of the first byte of head
	used atomic.Bool
	idle chan *work
}

// A cut is a block, or what ended the stream.
type cut struct {
	block *block
	err   error
}

// Blocks reads, unpacks and cuts in a goroutine of its own. It goes no further ahead than two blocks.
func (s *source) Blocks(ctx context.Context) iter.Seq2[scan.Block, error] {
	return func(yield func(scan.Block, error) bool) {
		if s.used.Swap(true) {
			yield(nil, &scan.InputError{File: s.file, Pixel: -1, What: "its pixels were read already", Remedy: "open it again"})
			return
		}
		inner, cancel := context.WithCancel(ctx)
		defer cancel()
		s.idle = make(chan *work, 16)
		cuts := make(chan cut)
		go s.read(inner, cuts)
		for {
			select {
			case <-ctx.Done():
			case c, more := <-cuts:
				if !more {
					return
				}
				if ctx.Err() == nil {
					if c.err != nil {
						yield(nil, c.err)
						return
					}
					if !yield(c.block, nil) {
						return
					}
				}
			}
			if err := ctx.Err(); err != nil {
				yield(nil, err)
				return
			}
		}
	}
}

// take returns an unused workspace, or a new one.
func (s *source) take() *work {
	select {
	case w := <-s.idle:
		return w
	default:
		return &work{source: s, rows: rowReader{layout: s.layout}}
	}
}

// give takes a workspace back.
func (s *source) give(w *work) {
	select {
	case s.idle <- w:
	default:
	}
}

// read sends the blocks, and at the end an error unless the run ends well.
func (s *source) read(ctx context.Context, cuts chan<- cut) {
	defer close(cuts)
	send := func(c cut) bool {
		select {
		case cuts <- c:
			return true
		case <-ctx.Done():
			return false
		}
	}
	finder := rowReader{layout: s.layout}
	w := s.take()
	w.text = append(w.text[:0], s.head...)
	s.head = nil
	err, line := s.err, s.line
	for seq := 0; ; seq++ {
		size, end, searched := blockLen, 0, 0
		for end == 0 {
			if ctx.Err() != nil {
				return
			}
			if err == nil && len(w.text) < size {
				if cap(w.text) < size+1 {
					w.text = append(make([]byte, 0, size+1), w.text...)
				}
				n := len(w.text)
				var k int
				k, err = readFull(s.r, w.text[n:size])
				w.text = w.text[:n+k]
			}
			switch {
			case err != nil:
				end = len(w.text)
			case s.wide:
				end = bytes.LastIndexByte(w.text[searched:], '\n') + 1
				if end > 0 {
					end += searched
				}
				searched = len(w.text)
			default:
				end, searched = finder.lastStart(w.text, searched)
			}
			if err != nil {
				break
			}
			if size = 2 * max(size, len(w.text)); end == 0 && size > maxPixel {
				send(cut{err: &scan.InputError{File: s.file, Line: line, Pixel: -1, What: fmt.Sprintf("more than %d MiB of text without the end of a pixel", maxPixel>>21),
					Remedy: "check the columns (--columns); what came before can be used"}})
				return
			}
		}
		next := s.take()
		next.text = append(next.text[:0], w.text[end:]...)
		w.text, w.seq, w.line, w.open = w.text[:end], seq, line, false
		if err != nil {
			if end > 0 && w.text[end-1] != '\n' {
				w.text, w.open = append(w.text, '\n'), true
			}
			w.open = w.open || s.open
		}
		line += bytes.Count(w.text, []byte{'\n'})
		if end > 0 && !send(cut{block: &block{work: w, seq: seq}}) {
			return
		}
		if err != nil {
			if err != io.EOF {
				send(cut{err: readError(s.file, err)})
			}
			return
		}
		w = next
	}
}

// lastStart returns where the last pixel begins that begins beyond the first row of text, or 0 if none is seen to, and how far
// up to search next time. It trusts only a readable row after a readable row: there, the decoder begins a pixel whatever came
// before.
func (r *rowReader) lastStart(text []byte, searched int) (start, low int) {
	r.reset()
	end := bytes.LastIndexByte(text, '\n') + 1
	var row, above place
	known := false // row holds the row that begins at from
	from := 0
	for end > 0 {
		begin := bytes.LastIndexByte(text[:end-1], '\n') + 1
		line := text[begin:end]
		end = begin
		if r.empty(line) {
			continue
		}
		if low == 0 {
			low = begin
		}
		ok := r.read(line, 0, &above)
		if ok && known && row.starts(&above) {
			return from, low
		}
		if begin < searched {
			break
		}
		row, known, from = above, ok, begin
	}
	return 0, max(low, searched)
}

// A block is a stretch of text that holds whole pixels. It is a scan.Block.
type block struct {
	*work // nil once decoded
	seq   int
}

// Seq returns the block's place in the run.
func (b *block) Seq() int { return b.seq }

// Pixels decodes the block, once.
func (b *block) Pixels() iter.Seq2[*scan.Pixel, error] {
	return func(yield func(*scan.Pixel, error) bool) {
		w := b.work
		if w == nil {
			return
		}
		b.work = nil
		defer w.give(w)
		if cap(w.counts) == 0 {
			w.counts = make([]float32, len(w.axis))
		}
		if w.wide {
			w.decodeWide(yield)
		} else {
			w.decodeLong(yield)
		}
	}
}

// A work is the memory of a block, used again and again.
type work struct {
	*source
	text   []byte
	seq    int
	line   int  // of the first byte of text
	open   bool // a '\n' was added to text where the run ends without one
	counts []float32
	pixel  scan.Pixel
	rows   rowReader
}

// bad makes the error of a pixel that cannot be read.
func (w *work) bad(line int, what string) *scan.InputError {
	return &scan.InputError{File: w.file, Line: line, Pixel: w.pixel.Index, What: what, Remedy: "the pixel is left out"}
}
