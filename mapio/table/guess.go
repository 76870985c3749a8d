package table

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strings"
)

// A guess is the layout that the first rows agree with, and what the header says.
type guess struct {
	layout
	h        *head
	header   header
	asked    []column // from --columns
	fields   int      // of most rows
	start    int      // index of the first row that is clean
	first    int      // index of the first line of data
	nm       bool     // the axis is in nm
	axisLine int      // where the axis was found
}

// A shape counts what the fields of a row look like.
type shape struct{ fields, numbers, empty, words, broken int }

// row tells whether it looks like a row of data, perhaps a spoilt one.
func (s shape) row() bool { return s.words == 0 && s.numbers > 0 && s.numbers >= s.broken }

// clean tells whether it is a row of data without a flaw. labels allows a column or two of words beside enough numbers for long
// text; the header of wide text looks like that too, so rows without words go first.
func (s shape) clean(labels bool) bool {
	if labels {
		return s.words > 0 && s.words <= 2 && s.broken == 0 && s.numbers >= 4 && s.fields <= 12
	}
	return s.words == 0 && s.broken == 0 && s.numbers >= 2
}

func (d dialect) shape(line []byte) (s shape) {
	for i := d.start(line); i >= 0; {
		_, stop, ok := d.number(line, i)
		s.fields++
		switch c := line[i]; {
		case ok && stop == i:
			s.empty++
		case ok:
			s.numbers++
		case '0' <= c && c <= '9', strings.IndexByte("+-.,", c) >= 0 && '0' <= line[i+1] && line[i+1] <= '9':
			s.broken++
		default:
			s.words++
		}
		i = d.next(line, stop)
	}
	return s
}

const hintLong = "name the columns from the left, for instance --columns x,y,shift,counts"

// guess finds the layout of the run.
func (h *head) guess(asked []column) (*guess, error) {
	g := &guess{h: h, asked: asked}
	g.file = h.file
	if err := g.dialects(); err != nil {
		return nil, err
	}
	if err := g.regular(); err != nil {
		return nil, err
	}
	var err error
	if slices.ContainsFunc(asked, func(c column) bool { return c.role == countsRole }) {
		err = g.longAsked()
	} else {
		err = g.named()
	}
	if err != nil {
		return nil, err
	}
	for i := range g.first {
		line := h.at(i)
		body, ok := g.comment(line)
		if !ok {
			body = line
		}
		if i+1 < g.first || ok || !g.wide {
			g.header.add(bytes.TrimSpace(body))
		}
	}
	if !g.wide {
		if err := g.firstPixels(); err != nil {
			return nil, err
		}
	}
	g.units()
	return g, nil
}

// units settles the unit of the axis: as asked, as its own header cell says, as another line of the header says, else cm-1.
func (g *guess) units() {
	unit := g.header.unit
	for _, columns := range [][]column{g.columns, g.asked} {
		for _, c := range columns {
			if c.role == shiftRole && c.unit != "" {
				unit = c.unit
			}
		}
	}
	g.nm = unit == "nm"
	if g.wide { // what is left are the columns before the channels
		g.columns = slices.DeleteFunc(g.columns, func(c column) bool { return c.role == shiftRole })
	}
}

// dialects chooses separator and decimal sign: the pair that makes clean rows of equal length out of most lines.
func (g *guess) dialects() error {
	best := g.choose(false)
	if best == 0 {
		if best = g.choose(true); best < 2 {
			best = 0
		}
	}
	if best > 0 && !(len(g.h.lines) == g.start+1 && g.blankLead(g.start)) {
		return nil
	}
	for i := range g.h.lines {
		if best > 0 || g.looksLikeHeader(g.h.at(i)) {
			if err := g.spoilt(i + 1); err != nil {
				return err
			}
			return g.h.refuse(g.h.lines[len(g.h.lines)-1].no, "the run ends in its header: no row of data follows", "measure or copy it again", nil)
		}
	}
	return g.h.refuse(0, "there are no rows of numbers in it", "check that it is a run in delimited text", nil)
}

// spoilt names the first value that is no number in a line from i on that would else be a row of data.
func (g *guess) spoilt(i int) error {
	for ; i < len(g.h.lines); i++ {
		line := g.h.at(i)
		for _, sep := range []byte("\t;, ") {
			d := dialect{sep, '.'}
			s := d.shape(line)
			if _, ok := d.comment(line); ok || s.numbers < 3 || s.numbers < s.words+s.broken {
				continue
			}
			for n, cell := range d.split(line, nil) {
				if c := append(slices.Clone(cell), '\n'); len(cell) > 0 {
					if _, _, ok := d.number(c, 0); !ok {
						return g.h.refuse(g.h.lines[i].no, fmt.Sprintf("value %d of the row is %.20q, no number, and no row is without such a flaw", n+1, cell), "measure or export it again", nil)
					}
				}
			}
		}
	}
	return nil
}

// choose takes the dialect and number of fields of most clean rows, and returns how many these are.
func (g *guess) choose(labels bool) (best int) {
	for _, d := range []dialect{{'\t', '.'}, {'\t', ','}, {';', '.'}, {';', ','}, {',', '.'}, {' ', '.'}, {' ', ','}} {
		rows := map[int]int{}
		first := map[int]int{}
		for i := range g.h.lines {
			line := g.h.at(i)
			if _, ok := d.comment(line); ok {
				continue
			}
			if s := d.shape(line); s.clean(labels) {
				if rows[s.fields]++; rows[s.fields] == 1 {
					first[s.fields] = i
				}
			}
		}
		for n, count := range rows {
			if count > best || count == best && n > g.fields {
				best, g.dialect, g.fields, g.start = count, d, n, first[n]
			}
		}
	}
	return best
}

// looksLikeHeader tells whether a line names coordinates and goes on with an axis or with names.
func (g *guess) looksLikeHeader(line []byte) bool {
	for _, sep := range []byte("\t;, ") {
		d := dialect{sep, '.'}
		body, ok := d.comment(line)
		if !ok {
			body = line
		}
		seen := map[role]bool{}
		for _, cell := range d.cells(body) {
			if c, ok := parseCell(cell); ok {
				seen[c.role] = true
			}
		}
		if s := d.shape(body); seen[xRole] && seen[yRole] || s.numbers >= 3 && s.words+s.empty > 0 && s.words+s.empty <= 4 {
			return true
		}
	}
	return false
}

// regular checks that the rows agree with the guess by majority.
func (g *guess) regular() error {
	rows, good, other := 0, 0, -1
	for i := g.start; i < len(g.h.lines); i++ {
		line := g.h.at(i)
		if _, ok := g.comment(line); ok || g.h.open && i == len(g.h.lines)-1 && i > g.start {
			continue
		}
		rows++
		if s := g.shape(line); s.fields == g.fields {
			good++
		} else if other < 0 {
			other = i
		}
	}
	if 2*good < rows {
		return g.h.refuse(g.h.lines[other].no, fmt.Sprintf("the rows have different numbers of fields: %d in line %d, %d here",
			g.fields, g.h.lines[g.start].no, g.shape(g.h.at(other)).fields), "each row must have the same columns", nil)
	}
	return nil
}

// back returns the first line of data, going back from the first clean row over spoilt ones.
func (g *guess) back(after int) int {
	first := g.start
	for first > after && g.shape(g.h.at(first-1)).row() {
		if _, ok := g.comment(g.h.at(first - 1)); ok {
			break
		}
		first--
	}
	return first
}

// longAsked takes the columns as given.
func (g *guess) longAsked() error {
	if g.fields < len(g.asked) {
		return g.h.refuse(g.h.lines[g.start].no, fmt.Sprintf("%d columns are named, but the rows have %d", len(g.asked), g.fields), "correct --columns", nil)
	}
	g.columns = slices.Clone(g.asked)
	for len(g.columns) < g.fields {
		g.columns = append(g.columns, column{})
	}
	g.first = g.back(0)
	g.axisLine = g.h.lines[g.first].no
	return nil
}

// named finds the header row, wide or long, near the first clean row.
func (g *guess) named() error {
	if g.blankLead(g.start) && g.start+1 < len(g.h.lines) && !g.blankLead(g.start+1) {
		return g.wideHeader(g.start, g.cells(g.h.at(g.start)))
	}
	var trouble error // with the line that comes closest to a header
	for i := g.start - 1; i >= max(0, g.start-10); i-- {
		line := g.h.at(i)
		body, isComment := g.comment(line)
		if !isComment {
			body = line
			if g.shape(line).row() {
				continue
			}
		}
		cells := g.cells(body)
		if isComment && len(cells) > 0 && len(cells[0]) == 0 && len(cells) == g.fields+1 {
			cells = cells[1:] // "#", separator, first cell
		}
		var err error
		switch numbers := g.numberTail(cells); {
		case numbers >= 2 && (!isComment || numbers+2 >= g.fields-1):
			err = g.wideHeader(i, cells)
		case len(g.asked) == 0:
			err = g.longHeader(i, cells)
		default:
			continue
		}
		if err == nil {
			return nil
		}
		if trouble == nil && err != errNoHeader {
			trouble = err
		}
	}
	if trouble != nil {
		return trouble
	}
	for i := g.start - 1; i >= max(0, g.start-10); i-- { // an axis without cells for x and y
		line := g.h.at(i)
		if s := g.shape(line); s.clean(false) && s.empty == 0 && s.fields == g.fields-2 && s.fields >= 2 {
			return g.wideHeader(i, g.cells(line))
		}
	}
	return g.nameless()
}

// nameless settles on long text without a header row, or says what is missing.
func (g *guess) nameless() error {
	line := g.h.lines[g.start].no
	switch {
	case len(g.asked) > 0:
		return g.h.refuse(line, fmt.Sprintf("no header row gives the axis of %d channels, and no column of counts is named", g.fields-len(g.lead())), hintLong, nil)
	case g.fields == 4:
		g.columns = []column{{role: xRole}, {role: yRole}, {role: shiftRole}, {role: countsRole}}
		g.first = g.back(0)
		g.axisLine = g.h.lines[g.first].no
		return nil
	case g.fields < 4:
		return g.h.refuse(line, fmt.Sprintf("the coordinates are missing: rows of %d fields cannot hold x, y, shift and counts", g.fields),
			"export the run with the position of each pixel; if the columns are others, "+hintLong, nil)
	}
	return g.h.refuse(line, fmt.Sprintf("rows of %d numbers, but no header row above them that gives the shift axis after the cells of x and y", g.fields),
		"export the run with its axis; if each row is one channel, "+hintLong, nil)
}

// blankLead tells whether line i has nothing, or NaN, where x and y belong, and numbers from there on.
func (g *guess) blankLead(i int) bool {
	cells := g.cells(g.h.at(i))
	n := len(cells) - g.numberTail(cells)
	if len(cells)-n < 2 || n < 2 {
		return false
	}
	for _, c := range cells[:n] {
		if !missing(c) {
			return false
		}
	}
	return true
}

// cells splits a header line. A unit in brackets belongs to the word before it, and empty cells at the end to nothing.
func (d dialect) cells(line []byte) [][]byte {
	cells := d.split(line, nil)
	if d.sep == ' ' {
		joined := cells[:0]
		for _, c := range cells {
			if n := len(joined); n > 0 && (c[0] == '(' || c[0] == '[') {
				joined[n-1] = append(append(slices.Clone(joined[n-1]), ' '), c...)
				continue
			}
			joined = append(joined, c)
		}
		cells = joined
	}
	for len(cells) > 0 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	return cells
}

// numberTail counts the cells at the end that are numbers, perhaps with the axis' unit behind.
func (g *guess) numberTail(cells [][]byte) int {
	n := 0
	for n < len(cells) {
		if v, _ := g.axisCell(cells[len(cells)-1-n]); math.IsNaN(v) {
			break
		}
		n++
	}
	return n
}

// axisCell reads "1350.5" or "1350.5 cm-1"; NaN if the cell is neither.
func (g *guess) axisCell(cell []byte) (v float64, u string) {
	cell = bytes.Trim(cell, "\"'")
	number := cell
	if i := bytes.IndexFunc(cell, func(r rune) bool { return !strings.ContainsRune("0123456789+-.,eE", r) }); i >= 0 {
		number = cell[:i]
		if u = unit(strings.TrimSpace(tidy.Replace(strings.ToLower(text(cell[i:]))))); u != "cm-1" && u != "nm" {
			return math.NaN(), ""
		}
	}
	line := append(append(make([]byte, 0, 32), number...), '\n')
	if v, _, ok := g.number(line, 0); ok {
		return v, u
	}
	return math.NaN(), ""
}
