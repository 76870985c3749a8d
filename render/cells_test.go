package render

import (
	"bytes"
	"math"
	"testing"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render/palette"
	"bandgrid/render/plot"
)

func TestCellsAreCounted(t *testing.T) {
	s := flake(60, 45)
	c, err := newCells(s, "d_position", Options{})
	if err != nil {
		t.Fatal(err)
	}
	if c.count[missing] != s.Pixels.Missing || c.count[missing] == 0 {
		t.Errorf("%d cells missing, want %d", c.count[missing], s.Pixels.Missing)
	}
	if n := c.count[missing] + c.count[empty] + c.count[valued]; n != 60*45 {
		t.Errorf("states add up to %d", n)
	}
	values := 0
	for _, v := range s.Map("d_position").Values {
		if v == v {
			values++
		}
	}
	if c.count[valued] != values {
		t.Errorf("%d values counted, there are %d", c.count[valued], values)
	}
	// Two per cent lie beyond each end, to within one pixel.
	for _, n := range []int{c.below, c.above} {
		if !(math.Abs(float64(n)-0.02*float64(values)) <= 1) {
			t.Errorf("%d of %d values lie beyond one end of the robust range", n, values)
		}
	}
}

func TestGivenRange(t *testing.T) {
	c, err := newCells(flake(60, 45), "g_position", Options{Range: [2]float64{1500, 1600}})
	if err != nil || c.low != 1500 || c.high != 1600 || c.below+c.above != 0 {
		t.Errorf("range %g to %g, %d beyond, %v", c.low, c.high, c.below+c.above, err)
	}
	c, err = newCells(flake(60, 45), "g_position", Options{Range: [2]float64{nan, nan}})
	if err != nil || !(c.low > 1579 && c.high < 1590) {
		t.Errorf("NaN should mean the robust range, not %g to %g (%v)", c.low, c.high, err)
	}
}

func TestRangeIsNeverEmpty(t *testing.T) {
	for _, v := range []float64{0, 3, -3, 1e-30, 1e30, -1582} {
		if low, high := span([]float64{v, v, v}, [2]float64{}, ""); !(low < v && v < high) {
			t.Errorf("all values %g: range %g to %g", v, low, high)
		}
	}
}

func TestColors(t *testing.T) {
	s := flake(60, 45)
	s.Map("layer_number").Values[0] = 1
	s.Map("layer_number").Values[1] = float32(nan)
	s.Map("layer_number").Values[2] = 7
	c, err := newCells(s, "layer_number", Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got := c.color(0); got != palette.Layers[1] {
		t.Errorf("a single layer is %v", got)
	}
	if got := c.color(1); got != palette.Undetermined {
		t.Errorf("an undetermined pixel is %v", got)
	}
	if got := c.color(2); got != palette.Layers[5] {
		t.Errorf("seven layers are %v", got)
	}
	if got := c.color(60*45 - 1); got.A != 0 {
		t.Errorf("a cell that was not measured is %v", got)
	}
}

func TestUnknownQuantity(t *testing.T) {
	s := flake(5, 5)
	if _, err := Map(s, "no_such", Options{}); err == nil {
		t.Error("no error from Map")
	}
	if _, err := Histogram(s, "no_such", Options{}); err == nil {
		t.Error("no error from Histogram")
	}
	if _, err := Overview(s, []string{"no_such"}, Options{}); err == nil {
		t.Error("no error from Overview")
	}
}

func TestAwkwardGrids(t *testing.T) {
	s := scattered(9)
	s.X, s.Y = nil, nil
	if _, err := Map(s, "g_position", Options{}); err == nil {
		t.Error("points without coordinates: no error")
	}
	s = scattered(9)
	for i := range s.X {
		s.X[i], s.Y[i] = float32(nan), 3
	}
	stepless := flake(7, 5)
	stepless.Grid.DX, stepless.Grid.DY = 0, 0
	same := scattered(9)
	for i := range same.X {
		same.X[i], same.Y[i] = 3, 3
	}
	same.Grid.DX, same.Grid.DY = 0, 0
	infinite := flake(7, 5)
	infinite.Map("g_position").Values[17] = float32(math.Inf(1))
	infinite.Map("g_position").Values[18] = math.MaxFloat32
	for name, s := range map[string]*survey.Survey{"no position known": s, "no steps": stepless, "all in one place": same, "infinite": infinite} {
		f, err := Map(s, "g_position", Options{DPI: 40})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if err := clear(f); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if !(f.H > 10 && f.H < 400) {
			t.Errorf("%s: the figure is %g mm high", name, f.H)
		}
		f.Image()
	}
}

func BenchmarkStandard(b *testing.B) { // a map of 500 x 500 with everything that the report shows
	s := flake(500, 500)
	for b.Loop() {
		if _, err := Standard(s, Options{Workers: 2}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkPoints(b *testing.B) { // 100,000 scattered points
	s := scattered(100000)
	for b.Loop() {
		f, err := Map(s, "g_position", Options{})
		if err != nil {
			b.Fatal(err)
		}
		f.Image()
	}
}

func TestBinsHoldAll(t *testing.T) {
	for _, s := range samples() {
		c, err := newCells(s.survey, s.quantity, s.opt)
		if err != nil {
			t.Fatal(err)
		}
		b := c.bin([2]float64{})
		sum := b.outside
		for _, bin := range b.counts {
			for _, n := range bin {
				sum += n
			}
		}
		if sum != c.count[valued] {
			t.Errorf("%s: bins hold %d of %d values", s.name, sum, c.count[valued])
		}
		if c.count[valued] > 0 && !(float64(b.outside) <= 0.011*float64(c.count[valued])+1) {
			t.Errorf("%s: %d of %d values beyond the axis", s.name, b.outside, c.count[valued])
		}
	}
}

func TestOutline(t *testing.T) {
	// An L of three cells: the perimeter is 8 edges, in six lines.
	g := scan.Grid{Layout: scan.Raster, Cols: 4, Rows: 3, DX: 1, DY: 1}
	lines := outline(survey.Region{Cells: []int32{5, 6, 9}}, g, plot.Box{W: 4, H: 3})
	length := 0.0
	for _, l := range lines {
		length += math.Abs(l[0].X-l[1].X) + math.Abs(l[0].Y-l[1].Y)
	}
	if len(lines) != 6 || !(math.Abs(length-8) < 1e-12) {
		t.Errorf("%d lines, %g cells long: %v", len(lines), length, lines)
	}
}

func TestTitle(t *testing.T) {
	for _, test := range []struct {
		q    survey.Quantity
		want string
	}{
		{survey.Quantity{Name: "2d_width"}, "2D width (FWHM)"},
		{survey.Quantity{Name: "dprime_position"}, "D′ position"},
		{survey.Quantity{Name: "d_g_ratio"}, "D/G height ratio"},
		{survey.Quantity{Name: "own_thing", Description: "what it is; and how"}, "What it is"},
		{survey.Quantity{Name: "own_thing", Description: "Ångström exponent"}, "Ångström exponent"},
		{survey.Quantity{Name: "own_thing", Description: "ångström exponent"}, "Ångström exponent"},
		{survey.Quantity{Name: "own_thing"}, "own thing"},
	} {
		if got := Title(&test.q); got != test.want {
			t.Errorf("%s: %q, want %q", test.q.Name, got, test.want)
		}
	}
}

func TestStandardSet(t *testing.T) {
	s := flake(30, 22)
	one, err := Standard(s, Options{DPI: 60, Workers: 1})
	if err != nil {
		t.Fatal(err)
	}
	many, err := Standard(s, Options{DPI: 60, Workers: 8})
	if err != nil {
		t.Fatal(err)
	}
	if len(one) != 9 || len(many) != 9 {
		t.Fatalf("%d and %d figures, want 9", len(one), len(many))
	}
	for i := range one {
		if one[i].Name != many[i].Name || !bytes.Equal(one[i].PNG, many[i].PNG) || len(one[i].PNG) == 0 {
			t.Errorf("%s depends on the number of workers", one[i].Name)
		}
		if one[i].Alt == "" || one[i].Title == "" {
			t.Errorf("%s has no title or no alternative text", one[i].Name)
		}
	}
	s.Maps = s.Maps[:2] // status and G position
	few, err := Standard(s, Options{DPI: 60})
	if err != nil || len(few) != 3 {
		t.Errorf("with G position alone: %d figures, want its map, histogram and the overview (%v)", len(few), err)
	}
}
