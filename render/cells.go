package render

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render/palette"
	"bandgrid/render/plot"
)

// Options is how figures are drawn; its zero value works.
type Options struct {
	WidthMM  float64    // of the figure; default 120
	DPI      float64    // default 200
	FontPt   float64    // body text in points; default 8.5
	Range    [2]float64 // values at the ends of the colours; NaN, or both 0, means the 2nd and 98th percentile
	Outlines bool       // draw the outlines of regions
	Workers  int        // of Standard; default 1
}

func (o Options) width() float64 {
	if o.WidthMM > 0 {
		return o.WidthMM
	}
	return 120
}

func (o Options) dpi() float64 {
	if o.DPI > 0 {
		return o.DPI
	}
	return 200
}

// A state says what a cell of the grid holds.
type state uint8

const (
	missing state = iota // not measured
	empty                // measured, but the quantity has no value
	valued
)

// cells are the values of one quantity made ready for drawing.
type cells struct {
	s         *survey.Survey
	q         *survey.Quantity
	title     string
	state     []state
	count     [3]int // of each state
	low, high float64
	below     int // cells with a value under low
	above     int
	classes   [6]int // cells of each layer number, where discrete
	ramp      *palette.Ramp
}

// measured tells which cells have a spectrum: those with a status; without that quantity, those with any value at all.
func measured(s *survey.Survey) []bool {
	out := make([]bool, s.Grid.Cells())
	maps := s.Maps
	if status := s.Map("status"); status != nil {
		maps = []survey.Quantity{*status}
	}
	for _, q := range maps {
		for i, v := range q.Values {
			if v == v {
				out[i] = true
			}
		}
	}
	return out
}

func newCells(s *survey.Survey, name string, opt Options) (*cells, error) {
	q := s.Map(name)
	if q == nil {
		return nil, fmt.Errorf("the survey has no quantity %q", name)
	}
	n := s.Grid.Cells()
	if n == 0 || len(q.Values) != n {
		return nil, fmt.Errorf("%s has %d values, the grid %d cells", name, len(q.Values), n)
	}
	if s.Grid.Layout == scan.Points && (len(s.X) != n || len(s.Y) != n) {
		return nil, fmt.Errorf("%d points have %d and %d coordinates", n, len(s.X), len(s.Y))
	}
	c := &cells{s: s, q: q, title: Title(q), state: make([]state, n), ramp: ramp(name)}
	has := measured(s)
	values := make([]float64, 0, n)
	for i, v := range q.Values {
		switch f := float64(v); {
		case !math.IsNaN(f) && !math.IsInf(f, 0):
			c.state[i] = valued
			values = append(values, f)
			if discrete(name) {
				c.classes[class(v)]++
			}
		case has[i]:
			c.state[i] = empty
		}
		c.count[c.state[i]]++
	}
	slices.Sort(values)
	c.low, c.high = span(values, opt.Range, name)
	for _, v := range values {
		if v < c.low {
			c.below++
		} else if v > c.high {
			c.above++
		}
	}
	return c, nil
}

// class is the class of a layer number, 0 to 5.
func class(v float32) int { return int(math.Round(float64(min(5, max(0, v))))) }

// span is the range of colours: as asked, or robust; never empty.
func span(sorted []float64, asked [2]float64, name string) (low, high float64) {
	low, high = asked[0], asked[1]
	if given := (low != 0 || high != 0) && low < high; !given {
		switch {
		case name == "layer_probability":
			return 0, 1
		case len(sorted) == 0:
			return 0, 1
		}
		low, high = percentile(sorted, 0.02), percentile(sorted, 0.98)
		if low == high { // most cells are equal: the few others count
			low, high = sorted[0], sorted[len(sorted)-1]
		}
	}
	// Values are float32: below some units of their last place a range shows rounding only.
	if least := 32 * 1.2e-7 * max(math.Abs(low), math.Abs(high)); !(high-low > least) {
		middle := (low + high) / 2
		half := math.Abs(middle) / 100
		if half == 0 {
			half = 1
		}
		low, high = middle-half, middle+half
	}
	return low, high
}

// percentile interpolates between order statistics.
func percentile(sorted []float64, p float64) float64 {
	at := p * float64(len(sorted)-1)
	i := int(at)
	if i+1 >= len(sorted) {
		return sorted[len(sorted)-1]
	}
	return sorted[i] + (at-float64(i))*(sorted[i+1]-sorted[i])
}

// color of a cell; transparent where it was not measured.
func (c *cells) color(i int) color.NRGBA {
	switch c.state[i] {
	case missing:
		return color.NRGBA{}
	case empty:
		return palette.Undetermined
	}
	if v := c.q.Values[i]; !discrete(c.q.Name) {
		return c.ramp.At((float64(v) - c.low) / (c.high - c.low))
	}
	return palette.Layers[class(c.q.Values[i])]
}

// colors of all cells. A table of colours is cheap to look up; nothing is allocated per cell.
func (c *cells) colors() []color.NRGBA {
	list := make([]color.NRGBA, len(c.state))
	for i := range list {
		list[i] = c.color(i)
	}
	return list
}

// meta is the provenance written into the figure's file.
func (c *cells) meta(kind string) [][2]string {
	m := [][2]string{{"Software", c.s.Program}, {"Title", kind + " of " + c.title}, {"Quantity", c.q.Name}}
	if c.q.Unit != "" {
		m = append(m, [2]string{"Unit", c.q.Unit})
	}
	if !discrete(c.q.Name) {
		m = append(m, [2]string{"Range", fmt.Sprintf("%.7g to %.7g", c.low, c.high)})
	}
	return append(m, runMeta(c.s)...)
}

func runMeta(s *survey.Survey) [][2]string {
	var m [][2]string
	for _, r := range s.Runs {
		m = append(m, [2]string{"Source", r.Name + " SHA-256 " + r.SHA256})
	}
	return m
}

// A key is an entry of a legend.
type key struct {
	name, amount string
	fill         color.NRGBA
	hatched      bool
}

// keys are the entries of the legend: the classes that occur, then cells without a value.
func (c *cells) keys() []key {
	var list []key
	if discrete(c.q.Name) {
		for n, count := range c.classes {
			if count > 0 {
				list = append(list, key{LayerName(n), c.amount(count), palette.Layers[n], false})
			}
		}
	}
	if n := c.count[empty]; n > 0 {
		list = append(list, key{noValue(c.q.Name), c.amount(n), palette.Undetermined, false})
	}
	if n := c.count[missing]; n > 0 {
		list = append(list, key{"not measured", c.amount(n), palette.Missing, true})
	}
	return list
}

// amount is the area of that many cells, or their number where cells have no area worth the name.
func (c *cells) amount(count int) string {
	area := c.s.Grid.CellArea() * float64(count)
	if c.s.Grid.Layout != scan.Raster || !(area > 0) {
		if count == 1 {
			return "1 point"
		}
		return fmt.Sprint(count, " points")
	}
	return Significant(area, 3) + " µm²"
}

// Significant writes v with about that many significant digits and no exponent where four or fewer zeros do.
func Significant(v float64, digits int) string {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return plot.Number(v, 0)
	}
	exp := int(math.Floor(math.Log10(math.Abs(v)) + 1e-12))
	if exp < -4 || exp > 6 {
		return plot.Number(v/math.Pow10(exp), digits-1) + "×10" + plot.Superscript(fmt.Sprint(exp))
	}
	return plot.Number(v, max(0, digits-1-exp))
}
