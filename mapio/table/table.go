// Package table reads and writes runs as delimited text, in two forms:
//
//   - wide: a row per pixel, the shift axis in a header row after the cells of x and y
//   - long: a row per channel with x, y, shift and counts, in any order of columns; a pixel's rows follow each other
//
// [Open] finds out separators, decimal sign, columns and units from the first rows, and accepts a guess only where these rows
// agree with it. Positions are in um and the axis in cm-1 unless a header says otherwise: values never decide about a unit.
package table

import (
	"fmt"
	"io"
	"math"

	"bandgrid/mapio/scan"
)

// Options say what a run does not say of itself. The zero value works for runs that do.
type Options struct {
	File    string   // name for messages
	Laser   float64  // laser line, nm; 0: as the header says
	Columns []string // names of the columns from the left, where guessing fails: see mapio.Options
}

// Bounds on what is held in memory, whatever a run holds.
const (
	maxPixel    = 64 << 20 // bytes of text of one pixel
	maxChannels = 1 << 20
)

// A layout says where in a row to find what.
type layout struct {
	dialect
	file    string
	wide    bool
	columns []column  // wide: those before the channels
	axis    []float64 // as written: cm-1 or nm
	tol     []float64 // half-width within which a value means that channel
	texts   [][]byte  // long: each channel's value as the first pixel spells it
	down    bool      // the axis descends
}

// Open reads the head of a run from r, which is text already unpacked, and returns a scan without its Input. Each refusal is a
// *scan.InputError.
func Open(r io.Reader, opt Options) (*scan.Scan, error) {
	h := &head{r: r, file: opt.File}
	if err := h.fill(headLen); err != nil {
		return nil, err
	}
	if err := h.check(); err != nil {
		return nil, err
	}
	asked, err := parseColumns(opt.Columns)
	if err != nil {
		return nil, h.refuse(0, "the columns given do not make sense", "correct --columns, for instance --columns x,y,shift,counts", err)
	}
	if err := h.sample(); err != nil {
		return nil, err
	}
	g, err := h.guess(asked)
	if err != nil {
		return nil, err
	}
	laser := opt.Laser
	if laser == 0 {
		laser = g.header.laser
	}
	axis := scan.Axis(g.axis)
	if g.nm {
		if laser == 0 {
			return nil, h.refuse(g.axisLine, "the axis is in nm, so the laser line is needed to make Raman shifts of it", "give it with --laser, for instance --laser 532", nil)
		}
		axis = scan.ShiftFromWavelength(g.axis, laser)
		if err := axis.Check(); err != nil {
			return nil, h.refuse(g.axisLine, "the axis cannot be converted from nm", "check the axis and its unit (--columns)", err)
		}
	}
	name := "long text"
	if g.wide {
		name = "wide text"
	}
	return &scan.Scan{File: opt.File, Format: name, Axis: axis, Laser: laser, Notes: g.header.notes,
		Source: &source{layout: &g.layout, r: r, head: h.data[h.lines[g.first].from:], err: h.err, open: h.open, line: h.lines[g.first].no}}, nil
}

// setAxis checks an axis and prepares for looking channels up.
func (l *layout) setAxis(axis []float64) error {
	if len(axis) > maxChannels {
		return fmt.Errorf("it has %d channels, and at most %d are accepted", len(axis), maxChannels)
	}
	if err := scan.Axis(axis).Check(); err != nil {
		return err
	}
	l.axis, l.down = axis, scan.Axis(axis).Descending()
	l.tol = make([]float64, len(axis))
	for i := range axis {
		near := math.Inf(1)
		if i > 0 {
			near = math.Abs(axis[i] - axis[i-1])
		}
		if i+1 < len(axis) {
			near = min(near, math.Abs(axis[i+1]-axis[i]))
		}
		l.tol[i] = near / 100 // far below a step, far above what rounding in another spelling does
	}
	return nil
}

// channel returns the channel of an axis value, or -1.
func (l *layout) channel(v float64) int {
	lo, hi := 0, len(l.axis) // the first channel at or beyond v
	for lo < hi {
		mid := (lo + hi) / 2
		if a := l.axis[mid]; l.down && a <= v || !l.down && a >= v {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	for k := max(0, lo-1); k <= lo && k < len(l.axis); k++ {
		if math.Abs(l.axis[k]-v) <= l.tol[k] {
			return k
		}
	}
	return -1
}
