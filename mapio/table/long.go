package table

import (
	"bytes"
	"fmt"
	"math"

	"bandgrid/mapio/scan"
)

// A place is what a row of long text says: where, which channel, how many counts.
type place struct {
	x, y    float64 // in the run's units
	shift   float64 // likewise
	channel int     // -1 if the axis has no such value
	count   float32
	counted bool // false if the counts are no number
}

// starts tells whether a pixel begins with this row, given the row above.
func (p *place) starts(above *place) bool {
	return p.x != above.x || p.y != above.y || p.channel == 0
}

// A rowReader reads rows of long text. Neighbouring rows have the same coordinates, and all pixels the same axis, so it compares
// spellings first and parses only what is new.
type rowReader struct {
	*layout
	x, y   float64
	xs, ys []byte // how x and y were spelt
}

// reset forgets the spellings, which lie in memory that is used again.
func (r *rowReader) reset() { r.xs, r.ys = nil, nil }

// again returns where the field that begins at i stops if it is spelt like that, else -1.
func (l *layout) again(line []byte, i int, spelt []byte) int {
	n := i + len(spelt)
	if len(spelt) == 0 || n >= len(line) || string(line[i:n]) != string(spelt) {
		return -1
	}
	if line[n] == l.sep {
		return n
	}
	return l.stop(line, n)
}

// read reads a row. likely is the channel that comes next in an unspoilt run. ok is false if fields are missing or too many, or
// if position or axis value is no number.
func (r *rowReader) read(line []byte, likely int, p *place) (ok bool) {
	i := r.start(line)
	for k := range r.columns {
		if i < 0 {
			return false
		}
		stop := 0
		switch r.columns[k].role {
		case xRole:
			if stop = r.again(line, i, r.xs); stop < 0 {
				if r.x, stop, ok = r.number(line, i); !ok || r.x-r.x != 0 {
					r.xs = nil
					return false
				}
				r.xs = trim(line[i:stop])
			}
		case yRole:
			if stop = r.again(line, i, r.ys); stop < 0 {
				if r.y, stop, ok = r.number(line, i); !ok || r.y-r.y != 0 {
					r.ys = nil
					return false
				}
				r.ys = trim(line[i:stop])
			}
		case shiftRole:
			if stop = r.again(line, i, r.texts[likely]); stop >= 0 {
				p.channel, p.shift = likely, r.axis[likely]
				break
			}
			if p.shift, stop, ok = r.number(line, i); !ok || p.shift-p.shift != 0 {
				return false
			}
			if p.channel = likely; !(math.Abs(p.shift-r.axis[likely]) <= r.tol[likely]) {
				p.channel = r.channel(p.shift)
			}
		case countsRole:
			var v float64
			v, stop, p.counted = r.number(line, i)
			p.count = count(v)
		default:
			stop = r.find(line, i)
		}
		i = r.next(line, stop)
	}
	p.x, p.y = r.x, r.y
	return i < 0
}

// trim takes blanks off the end.
func trim(b []byte) []byte {
	for len(b) > 0 && blank(b[len(b)-1]) {
		b = b[:len(b)-1]
	}
	return b
}

// A growing pixel is one whose rows are being read.
type growing struct {
	begun  bool
	placed bool  // at holds its place; false as long as only unreadable rows were seen
	at     place // its last readable row
	line   int   // its first
	next   int   // the channel expected next
	gaps   int   // channels passed over
	gap    int   // the first of them
	bad    *scan.InputError
}

// decodeLong decodes a block of long text.
func (w *work) decodeLong(yield func(*scan.Pixel, error) bool) {
	w.rows.reset()
	w.pixel = scan.Pixel{Index: -1}
	var g growing
	var row place
	channels := len(w.axis)
	text, no := w.text, w.line
	for ; len(text) > 0; no++ {
		n := bytes.IndexByte(text, '\n') + 1
		line := text[:n]
		text = text[n:]
		if w.empty(line) {
			continue
		}
		likely := g.next
		if likely == channels {
			likely = 0
		}
		if !w.rows.read(line, likely, &row) {
			// The row belongs to the pixel that still lacks something.
			if g.begun && g.next == channels && g.bad == nil {
				if !w.finish(&g, yield) {
					return
				}
				g = growing{}
			}
			if !g.begun {
				w.begin(&g, no)
			}
			if g.bad == nil {
				g.bad = w.bad(no, w.rows.why(line))
				if w.open && len(text) == 0 {
					g.bad.What = "the run ends in the middle of this line; " + g.bad.What
				}
			}
			continue
		}
		if g.begun && (g.placed && row.starts(&g.at) || row.channel == 0) {
			if !w.finish(&g, yield) {
				return
			}
			g = growing{}
		}
		if !g.begun {
			w.begin(&g, no)
		}
		g.at, g.placed = row, true
		switch {
		case row.channel == g.next:
			w.counts[g.next] = row.count
			g.next++
		case row.channel > g.next:
			if g.gaps == 0 {
				g.gap = g.next
			}
			g.gaps += row.channel - g.next
			g.next = row.channel + 1
		case g.bad != nil:
		case row.channel < 0:
			g.bad = w.bad(no, fmt.Sprintf("the axis has no channel at %g", row.shift))
		default:
			g.bad = w.bad(no, fmt.Sprintf("the channel at %g comes again or too late", row.shift))
		}
		if !row.counted && g.bad == nil {
			g.bad = w.bad(no, w.rows.why(line))
		}
	}
	if g.begun {
		w.pixel.Open = w.open
		w.finish(&g, yield)
	}
}

// begin begins the next pixel.
func (w *work) begin(g *growing, line int) {
	g.begun, g.line = true, line
	w.pixel.Index++
}

// finish hands a pixel over.
func (w *work) finish(g *growing, yield func(*scan.Pixel, error) bool) bool {
	p := &w.pixel
	p.X, p.Y, p.Line, p.Counts = math.NaN(), math.NaN(), g.line, w.counts
	if g.placed {
		for _, c := range w.columns {
			mul, div := c.scale()
			switch c.role {
			case xRole:
				p.X = g.at.x * mul / div
			case yRole:
				p.Y = g.at.y * mul / div
			}
		}
	}
	if g.bad == nil && (g.gaps > 0 || g.next < len(w.axis)) {
		if g.gaps == 0 {
			g.gap = g.next
		}
		g.bad = w.bad(g.line, fmt.Sprintf("%d of %d channels, the first missing is the one at %g",
			g.next-g.gaps, len(w.axis), w.axis[g.gap]))
	}
	if g.bad != nil {
		return yield(p, g.bad)
	}
	return yield(p, nil)
}

// why says what is wrong with a row that read refuses, or whose counts are no number.
func (r *rowReader) why(line []byte) string {
	if n := r.fields(line); n != len(r.columns) {
		return fmt.Sprintf("%d fields, the rows have %d", n, len(r.columns))
	}
	i := r.start(line)
	for _, c := range r.columns {
		v, stop, ok := r.number(line, i)
		name := [...]string{xRole: "x", yRole: "y", shiftRole: "the shift", countsRole: "the counts"}[c.role]
		if c.role == countsRole && !ok || c.role != ignored && c.role != countsRole && (!ok || v-v != 0) {
			return fmt.Sprintf("%s: %s", name, quote(line[i:r.find(line, i)]))
		}
		i = r.next(line, stop)
	}
	return "the row cannot be read"
}
