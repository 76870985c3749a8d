package table

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"slices"
)

// errNoHeader says that a line has nothing of a header row.
var errNoHeader = errors.New("no header row")

// lead returns the columns that were named before the channels of wide text.
func (g *guess) lead() []column {
	return slices.DeleteFunc(slices.Clone(g.asked), func(c column) bool { return c.role == shiftRole })
}

// wideHeader takes line i as the header row of wide text.
func (g *guess) wideHeader(i int, cells [][]byte) error {
	no := g.h.lines[i].no
	channels := g.numberTail(cells)
	lead := len(cells) - channels
	if len(g.asked) > 0 {
		lead = len(g.lead())
		channels = min(channels, g.fields-lead)
	} else if lead < 2 && channels+2 == g.fields {
		lead = 2 // one cell, or none, for both x and y
	}
	names := cells[:len(cells)-channels]
	switch {
	case lead+channels == g.fields, lead+channels == g.fields-1 && g.emptyTail():
	case lead < 2 && lead+channels == g.fields || channels == g.fields:
		return g.h.refuse(no, fmt.Sprintf("the coordinates are missing: an axis of %d channels above rows of %d numbers", channels, g.fields),
			"export the run with the position of each pixel", nil)
	default:
		return g.h.refuse(no, fmt.Sprintf("the axis has %d channels, but the rows below, from line %d on, have %d values",
			channels, g.h.lines[g.start].no, g.fields-lead), "each row must have x, y and one value for each channel", nil)
	}
	if lead < 2 {
		return g.h.refuse(no, "the coordinates are missing: there are no two columns before the axis",
			"export the run with the position of each pixel", nil)
	}
	axis := make([]float64, channels)
	unit := column{role: shiftRole}
	for k, cell := range cells[len(cells)-channels:] {
		v, u := g.axisCell(cell)
		if axis[k] = v; u != "" {
			unit.unit = u
		}
	}
	if err := g.setAxis(axis); err != nil {
		return g.h.refuse(no, "the header row cannot be the axis", "correct it; a run's axis rises or falls all the way", err)
	}
	columns, err := g.leadColumns(no, names, lead)
	if err != nil {
		return err
	}
	g.wide, g.columns, g.axisLine = true, append(columns, unit), no
	if g.start <= i {
		g.start = i + 1
		for g.start < len(g.h.lines)-1 {
			if _, ok := g.comment(g.h.at(g.start)); !ok {
				break
			}
			g.start++
		}
	}
	g.first = i + 1
	return nil
}

// leadColumns tells which columns before the channels are x and y.
func (g *guess) leadColumns(no int, names [][]byte, lead int) ([]column, error) {
	if len(g.asked) > 0 {
		return g.lead(), nil
	}
	columns := make([]column, lead)
	x, y, taken := 0, 0, 0
	for k, name := range names[:min(lead, len(names))] {
		c, ok := parseCell(name)
		if !ok {
			continue
		}
		switch c.role {
		case xRole:
			x++
		case yRole:
			y++
		default:
			taken++
			continue
		}
		columns[k] = c
	}
	switch {
	case x == 1 && y == 1:
	case lead == 2 && taken == 0 && x+y < 2:
		first, second := xRole, yRole
		if columns[0].role == yRole || columns[1].role == xRole {
			first, second = second, first
		}
		columns[0].role, columns[1].role = first, second
	default:
		return nil, g.h.refuse(no, fmt.Sprintf("which of the %d columns before the axis are x and y is not clear from %q", lead, bytes.Join(names, []byte(", "))),
			"name them from the left, for instance --columns -,x,y", nil)
	}
	return columns, nil
}

// emptyTail tells whether the first row ends with a separator.
func (g *guess) emptyTail() bool {
	line := bytes.TrimRight(g.h.at(g.start), " \r\n")
	return g.sep != ' ' && len(line) > 0 && line[len(line)-1] == g.sep
}

// longHeader takes line i as the header row of long text.
func (g *guess) longHeader(i int, cells [][]byte) error {
	no := g.h.lines[i].no
	var columns []column
	var known []column
	for _, cell := range cells {
		c, ok := parseCell(cell)
		if !ok {
			c = column{}
		}
		columns = append(columns, c)
		if c.role != ignored {
			known = append(known, c)
		}
	}
	seen := map[role]int{}
	for _, c := range known {
		seen[c.role]++
	}
	if seen[xRole]+seen[yRole] == 0 && (seen[shiftRole] == 0 || seen[countsRole] == 0) {
		return errNoHeader
	}
	if len(columns) != g.fields && g.sep == ' ' && len(known) == g.fields {
		columns = known // words of several parts, such as "Raman shift"
	}
	if seen[shiftRole] == 2 { // both shift and wavelength: the shift needs no conversion
		for k, c := range columns {
			if c.role == shiftRole && c.unit == "nm" {
				columns[k] = column{}
				seen[shiftRole]--
			}
		}
	}
	names := map[role]string{xRole: "x", yRole: "y", shiftRole: "shift", countsRole: "counts"}
	for r := xRole; r <= countsRole; r++ {
		switch {
		case seen[r] == 0 && (r == xRole || r == yRole):
			return g.h.refuse(no, fmt.Sprintf("the coordinates are missing: no column is named %s in %q", names[r], bytes.Join(cells, []byte(", "))), hintLong, nil)
		case seen[r] == 0 && g.fields > 8:
			return g.h.refuse(no, fmt.Sprintf("the header row above rows of %d fields gives neither an axis nor a column of %s", g.fields, names[r]), hintLong, nil)
		case seen[r] != 1:
			return g.h.refuse(no, fmt.Sprintf("%d columns are named %s in %q", seen[r], names[r], bytes.Join(cells, []byte(", "))), hintLong, nil)
		}
	}
	if len(columns) == g.fields-1 && g.emptyTail() {
		columns = append(columns, column{})
	}
	if len(columns) != g.fields {
		return g.h.refuse(no, fmt.Sprintf("the header row names %d columns, but the rows below have %d", len(columns), g.fields), hintLong, nil)
	}
	g.columns, g.first, g.axisLine = columns, i+1, no
	return nil
}

// A firstPixel is one of the pixels from which the axis of long text is taken.
type firstPixel struct {
	line  int // the row after which the axis jumps back, else the first
	axis  []float64
	texts [][]byte
	jumps bool
}

// firstPixels takes the axis from the first three pixels: one that two of them share, so that one spoilt pixel does no harm.
func (g *guess) firstPixels() error {
	h := g.h
	var pixels []firstPixel
	var x, y float64
	no := h.lines[g.first].no - 1
	for from := h.lines[g.first].from; ; {
		nl := bytes.IndexByte(h.data[from:], '\n')
		if nl < 0 {
			if h.err == nil && len(h.data) < maxPixel {
				h.fill(min(maxPixel, 2*len(h.data)))
				continue
			}
			if h.err == nil && len(pixels) < 2 {
				return h.refuse(g.axisLine, "the first pixel does not end within 64 MiB", "check the columns; "+hintLong, nil)
			}
			break
		}
		line := h.data[from : from+nl+1]
		from += nl + 1
		no++
		if g.empty(line) {
			continue
		}
		px, py, shift, spelt, ok := g.place(line)
		if !ok {
			continue
		}
		p := len(pixels) - 1
		if p < 0 || px != x || py != y || shift == pixels[p].axis[0] {
			if p == 2 {
				break
			}
			pixels, x, y, p = append(pixels, firstPixel{line: no}), px, py, p+1
		}
		q := &pixels[p]
		if n := len(q.axis); n > 1 && !q.jumps && (shift > q.axis[n-1]) != (q.axis[1] > q.axis[0]) {
			q.jumps, q.line = true, no
		}
		if len(q.axis) > maxChannels {
			return h.refuse(no, fmt.Sprintf("the first pixels have more than %d channels", maxChannels), "check the columns; "+hintLong, nil)
		}
		q.axis, q.texts = append(q.axis, shift), append(q.texts, bytes.Clone(spelt))
	}
	return g.chooseAxis(pixels)
}

func (g *guess) chooseAxis(pixels []firstPixel) error {
	h := g.h
	single := 0
	var failed error
	choice := -1
	for i, p := range pixels {
		if len(p.axis) == 1 {
			single++
		}
		err := g.setAxis(p.axis)
		if err != nil {
			if failed == nil {
				failed = h.refuse(p.line, "the axis of the first pixel is unusable", "correct the run, or check the columns; "+hintLong, err)
			}
			continue
		}
		for _, q := range pixels[i+1:] {
			if g.same(q.axis) {
				g.texts = p.texts
				return nil
			}
		}
		if choice < 0 || len(p.axis) > len(pixels[choice].axis) {
			choice = i
		}
	}
	switch {
	case len(pixels) == 0:
		return h.refuse(h.lines[g.first].no, "no row below has x, y, shift and counts", hintLong, nil)
	case single == len(pixels):
		return h.refuse(pixels[0].line, "each row is a pixel of its own, of one channel", "the rows of a pixel must follow each other; if the columns are others, "+hintLong, nil)
	case choice < 0:
		return failed
	case len(pixels) == 3:
		return h.refuse(pixels[0].line, fmt.Sprintf("the first three pixels have different axes, of %d, %d and %d channels",
			len(pixels[0].axis), len(pixels[1].axis), len(pixels[2].axis)), "all pixels must share one axis; if the columns are others, "+hintLong, nil)
	}
	g.texts = pixels[choice].texts
	return g.setAxis(pixels[choice].axis)
}

// same tells whether an axis is the layout's.
func (l *layout) same(axis []float64) bool {
	if len(axis) != len(l.axis) {
		return false
	}
	for k, v := range axis {
		if !(math.Abs(v-l.axis[k]) <= l.tol[k]) {
			return false
		}
	}
	return true
}

// place reads position and axis value of a row of long text, in the units of the run.
func (l *layout) place(line []byte) (x, y, shift float64, spelt []byte, ok bool) {
	i := l.start(line)
	for _, c := range l.columns {
		if i < 0 {
			return x, y, shift, spelt, false
		}
		v, stop, number := l.number(line, i)
		switch c.role {
		case xRole:
			x = v
		case yRole:
			y = v
		case shiftRole:
			shift, spelt = v, bytes.TrimRight(line[i:stop], " \t\r")
		}
		if c.role != ignored && c.role != countsRole && (!number || math.IsNaN(v) || math.IsInf(v, 0)) {
			return x, y, shift, spelt, false
		}
		i = l.next(line, stop)
	}
	return x, y, shift, spelt, i < 0
}
