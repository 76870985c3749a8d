package table

import (
	"bytes"
	"fmt"
	"math"

	"bandgrid/mapio/scan"
)

// decodeWide decodes a block of wide text.
func (w *work) decodeWide(yield func(*scan.Pixel, error) bool) {
	p := &w.pixel
	text, no := w.text, w.line
	for index := 0; len(text) > 0; no++ {
		n := bytes.IndexByte(text, '\n') + 1
		line := text[:n]
		text = text[n:]
		if w.empty(line) {
			continue
		}
		*p = scan.Pixel{Index: index, X: math.NaN(), Y: math.NaN(), Counts: w.counts, Line: no, Open: w.open && len(text) == 0}
		index++
		var err error
		if what := w.wideRow(line); what != "" {
			if p.Open {
				what = "the run ends in the middle of this line; " + what
			}
			err = w.bad(no, what)
		}
		if !yield(p, err) {
			return
		}
	}
}

// wideRow decodes a row into the pixel, or says what is wrong with it.
func (w *work) wideRow(line []byte) (what string) {
	d := w.dialect
	p := &w.pixel
	i := d.start(line)
	for k, c := range w.columns {
		stop := 0
		if c.role == xRole || c.role == yRole {
			v, s, ok := d.number(line, i)
			if !ok || v-v != 0 {
				what = fmt.Sprintf("the coordinate in field %d is %s", k+1, quote(line[i:d.find(line, i)]))
				s = d.find(line, i)
			} else if mul, div := c.scale(); c.role == xRole {
				p.X = v * mul / div
			} else {
				p.Y = v * mul / div
			}
			stop = s
		} else {
			stop = d.find(line, i)
		}
		if i = d.next(line, stop); i < 0 {
			return w.wrongFields(line)
		}
	}
	if what != "" {
		return what
	}
	counts := w.counts
	for k := range counts {
		if i < 0 {
			return w.wrongFields(line)
		}
		// Most counts are whole numbers of a few digits with a separator behind.
		j := i
		m := uint32(0)
		for c := line[j] - '0'; c <= 9; c = line[j] - '0' {
			m = m*10 + uint32(c)
			j++
		}
		if line[j] == d.sep && uint(j-i-1) < 9 {
			counts[k] = float32(m)
			if i = j + 1; line[i] <= ' ' {
				i = d.next(line, j)
			}
			continue
		}
		v, stop, ok := d.number(line, i)
		if !ok {
			if n := d.fields(line); n != len(w.columns)+len(counts) {
				return w.wrongFields(line)
			}
			return fmt.Sprintf("the value of channel %d is %s", k, quote(line[i:d.find(line, i)]))
		}
		counts[k] = count(v)
		i = d.next(line, stop)
	}
	if i >= 0 && line[i] != '\n' {
		return w.wrongFields(line)
	}
	return ""
}

func (w *work) wrongFields(line []byte) string {
	return fmt.Sprintf("%d values, the axis has %d", max(0, w.fields(line)-len(w.columns)), len(w.axis))
}

// quote shows a field, shortened.
func quote(field []byte) string {
	field = bytes.TrimSpace(field)
	if len(field) == 0 {
		return "missing"
	}
	if len(field) > 20 {
		field = append(bytes.Clone(field[:20]), "..."...)
	}
	return fmt.Sprintf("%q, no number", text(field))
}
