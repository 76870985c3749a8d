package region

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

var nan32 = float32(math.NaN())

// drawn returns a survey from rows of digits, the top one first: layer numbers, . for undetermined, blank for missing.
func drawn(dx, dy float64, rows ...string) *survey.Survey {
	s := &survey.Survey{}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: len(rows[0]), Rows: len(rows), DX: dx, DY: dy}
	n := s.Grid.Cells()
	number, status := make([]float32, n), make([]float32, n)
	s.X, s.Y = make([]float32, n), make([]float32, n)
	for i := range n {
		col, row := i%s.Grid.Cols, i/s.Grid.Cols
		x, y := s.Grid.Center(col, row)
		s.X[i], s.Y[i] = float32(x), float32(y)
		switch c := rows[len(rows)-1-row][col]; c {
		case '.':
			number[i] = nan32
		case ' ':
			number[i], status[i] = nan32, nan32
		default:
			number[i] = float32(c - '0')
		}
	}
	s.Maps = []survey.Quantity{{Name: "layer_number", Values: number}, {Name: "status", Values: status}}
	return s
}

func find(t *testing.T, s *survey.Survey, opt Options) []string {
	t.Helper()
	if err := Find(s, opt); err != nil {
		t.Fatal(err)
	}
	var list []string
	for _, r := range s.Regions {
		list = append(list, fmt.Sprintf("%s: %g layers, %d pixels, %g um2", r.ID, r.Layer, r.Pixels, r.Area))
	}
	return list
}

func TestFind(t *testing.T) {
	s := drawn(0.5, 2,
		"0000000000",
		"0111100220",
		"0121100220",
		"01111.022 ",
		"0000000000",
		"0000000003")
	want := []string{
		"all: NaN layers, 59 pixels, 59 um2",
		"1: 0 layers, 40 pixels, 40 um2", // with the speck of three layers; the undetermined pixel lies on a boundary
		"2: 1 layers, 12 pixels, 12 um2", // its hole of two layers absorbed
		"3: 2 layers, 6 pixels, 6 um2",
	}
	if got := find(t, s, Options{}); !reflect.DeepEqual(got, want) {
		t.Errorf("found\n%q, want\n%q", got, want)
	}
	r := s.Regions[2]
	if r.MinX != 0.25 || r.MaxX != 2.25 || r.MinY != 3 || r.MaxY != 9 || r.CX != 1.25 || r.CY != 6 || r.Perimeter != 2*(2+6) {
		t.Errorf("single layer: box %g %g %g %g, centroid %g %g, perimeter %g", r.MinX, r.MaxX, r.MinY, r.MaxY, r.CX, r.CY, r.Perimeter)
	}
	if s.Maps[0].Values[9] != 3 {
		t.Error("the map itself was changed")
	}
	if got := find(t, s, Options{MinArea: 1}); len(got) != 6 { // specks of one cell are regions now
		t.Errorf("smallest area one cell: %q", got)
	}
}

// disc returns a survey with a disc of one layer on bare substrate.
func disc(n int, radius float64) *survey.Survey {
	s := &survey.Survey{}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: n, Rows: n, X0: 0.37, Y0: 0.11, DX: 0.5, DY: 0.5}
	number := make([]float32, n*n)
	for i := range number {
		x, y := s.Grid.Center(i%n, i/n)
		mid := float64(n) / 4
		if math.Hypot(x-mid, y-mid) < radius {
			number[i] = 1
		}
	}
	s.X, s.Y = make([]float32, n*n), make([]float32, n*n)
	s.Maps = []survey.Quantity{{Name: "layer_number", Values: number}}
	return s
}

func TestDisc(t *testing.T) {
	for _, radius := range []float64{5, 9, 14} {
		s := disc(64, radius)
		if err := Find(s, Options{}); err != nil {
			t.Fatal(err)
		}
		r := s.Regions[slices.IndexFunc(s.Regions, func(r survey.Region) bool { return r.Layer == 1 })]
		area := math.Pi * radius * radius
		if r.Layer != 1 || !(math.Abs(r.Area-area) <= 4*r.AreaSE) || !(r.AreaSE < 0.05*area) {
			t.Errorf("disc of radius %g: area %g ± %g, want %g", radius, r.Area, r.AreaSE, area)
		}
		// Neither centre nor boundary is known to better than a step.
		if !(math.Abs(r.Inscribed-radius) <= 0.5) {
			t.Errorf("disc of radius %g: largest inscribed circle has radius %g", radius, r.Inscribed)
		}
	}
}

// A boundary that the layer number leaves undetermined makes the area uncertain as a whole, not cell by cell.
func TestUndeterminedRimWidensTheArea(t *testing.T) {
	s := drawn(1, 1,
		"0000000",
		"0.....0",
		"0.111.0",
		"0.111.0",
		"0.....0",
		"0000000")
	find(t, s, Options{})
	r := s.Regions[slices.IndexFunc(s.Regions, func(r survey.Region) bool { return r.Layer == 1 })]
	// Six cells, all on the boundary; ten undetermined cells share an edge with them.
	if want := math.Sqrt((6. + 100) / 12); r.Area != 6 || !(math.Abs(r.AreaSE-want) <= 1e-12) {
		t.Errorf("area %g ± %g, want 6 ± %g", r.Area, r.AreaSE, want)
	}
}

func TestDistanceAgainstBruteForce(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for range 50 {
		b := &box{cols: 1 + r.IntN(20), rows: 1 + r.IntN(20)}
		for range b.cols * b.rows {
			b.inside = append(b.inside, r.IntN(5) > 0)
		}
		const dx, dy = 0.7, 0.3
		b.distance(dx, dy)
		for i, got := range b.d {
			want := math.Inf(1)
			for j, in := range b.inside {
				if !in {
					want = min(want, math.Hypot(float64(i%b.cols-j%b.cols)*dx, float64(i/b.cols-j/b.cols)*dy))
				}
			}
			if !(got == want || math.Abs(got-want) <= 1e-9) {
				t.Fatalf("distance %g, want %g", got, want)
			}
		}
	}
}

func TestRingIsLeftOut(t *testing.T) {
	s := disc(64, 9)
	value := make([]float32, len(s.Maps[0].Values))
	for i, n := range s.Maps[0].Values {
		x, y := s.Grid.Center(i%64, i/64)
		value[i] = 5
		if d := math.Hypot(x-16, y-16); n == 1 && d < 8.2 {
			value[i] = 1 // the ring of 0.8 um, where the spot covers both, has the value of neither
		} else if n == 1 {
			value[i] = 99
		}
	}
	s.Maps = append(s.Maps, survey.Quantity{Name: "q", Values: value})
	if err := Find(s, Options{Ring: 1.2}); err != nil {
		t.Fatal(err)
	}
	if st := s.Regions[2].Stats[0]; st.N == 0 || st.Mean != 1 || st.P95 != 1 {
		t.Errorf("with its ring left out the disc has %+v", st)
	}
	if err := Find(s, Options{Ring: -1}); err != nil {
		t.Fatal(err)
	}
	if st := s.Regions[2].Stats[0]; st.N != s.Regions[2].Pixels || !(st.Mean > 5) {
		t.Errorf("with its ring the disc has %+v", st)
	}
}

func TestStatistics(t *testing.T) {
	s := drawn(1, 1, "11111", "11111")
	s.Maps = append(s.Maps, survey.Quantity{Name: "q", Values: []float32{3, 1, 2, 5, 4, nan32, 7, 6, 9, 8}})
	if err := Find(s, Options{}); err != nil {
		t.Fatal(err)
	}
	// Of 1 to 9: median 5, deviations 0 1 1 2 2 3 3 4 4, percentiles at ranks 0.4 and 7.6.
	st := s.Regions[1].Stats[0]
	for _, c := range []struct {
		name      string
		got, want float64
	}{{"n", float64(st.N), 9}, {"median", st.Median, 5}, {"mean", st.Mean, 5}, {"spread", st.Spread, 2 * 1.4826}, {"P5", st.P5, 1.4}, {"P95", st.P95, 8.6}} {
		if !(math.Abs(c.got-c.want) <= 1e-9) {
			t.Errorf("%s is %g, want %g", c.name, c.got, c.want)
		}
	}
}

// The standard error of a mean must be the scatter of the mean over many maps, for white noise and for noise that neighbours
// share as pixels under one spot do.
func TestMeanSE(t *testing.T) {
	const n, maps = 30, 400
	r := rand.New(rand.NewPCG(2, 1))
	g := scan.Grid{Layout: scan.Raster, Cols: n, Rows: n, DX: 1, DY: 1}
	cells := make([]int32, n*n)
	for i := range cells {
		cells[i] = int32(i)
	}
	for _, rho := range []float64{0, 0.5} {
		var square, claimed float64
		var u summary
		for range maps {
			v := make([]float32, n*n)
			for i := range v { // a first-order process along both axes
				e := r.NormFloat64()
				col, row := i%n, i/n
				at := func(c, r int) float64 {
					if c < 0 || r < 0 {
						return 0
					}
					return float64(v[r*n+c])
				}
				v[i] = float32(rho*at(col-1, row) + rho*at(col, row-1) - rho*rho*at(col-1, row-1) + (1-rho*rho)*e)
			}
			st := u.of(&survey.Quantity{Values: v}, cells, g)
			square += st.Mean * st.Mean / maps
			claimed += st.MeanSE / maps
		}
		// The scatter is known to 1/√(2 maps), 3.5 %; correlations estimated from one map are low where they are strong, and
		// counted as zero where they are negative: a bias of some per cent either way.
		if got := claimed / math.Sqrt(square); !(math.Abs(got-1) <= 0.15) {
			t.Errorf("correlation %g: the claimed standard error is %.3f of the scatter of the mean", rho, got)
		} else {
			t.Logf("correlation %g: claimed over true %.3f", rho, got)
		}
	}
}

func TestPointsHaveNoRegions(t *testing.T) {
	s := drawn(1, 1, "111111")
	s.Grid.Layout = scan.Points
	if err := Find(s, Options{}); err != nil {
		t.Fatal(err)
	}
	if len(s.Regions) != 1 || s.Regions[0].Pixels != 6 || !math.IsNaN(s.Regions[0].Area) {
		t.Errorf("%+v", s.Regions)
	}
}

func TestRectangle(t *testing.T) {
	s := drawn(1, 1, "1111", "1 11", "0000")
	r := Rectangle(s, "pad", 0.5, 2.2, 2.4, 0.6)
	if r.ID != "pad" || r.Pixels != 3 || r.Area != 3 {
		t.Errorf("%+v", r)
	}
	if r = Rectangle(s, "nowhere", 10, 10, 11, 11); r.Pixels != 0 || !math.IsNaN(r.CX) {
		t.Errorf("%+v", r)
	}
}

func BenchmarkFind(b *testing.B) {
	r := rand.New(rand.NewPCG(3, 1))
	s := disc(1000, 200)
	for k := range 40 {
		v := make([]float32, 1000*1000)
		for i := range v {
			v[i] = r.Float32()
		}
		s.Maps = append(s.Maps, survey.Quantity{Name: fmt.Sprint("q", k), Values: v})
	}
	for b.Loop() {
		if err := Find(s, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

// TestMeanOfARatio has pixels whose denominator varies: the ratio of the means is right, the mean of the ratios is not, and the
// error covers the scatter.
func TestMeanOfARatio(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	const trials, side, want = 200, 20, 0.3
	var sum, sum2, se, naive float64
	for range trials {
		var rows []string
		for range side {
			rows = append(rows, strings.Repeat("1", side))
		}
		s := drawn(1, 1, rows...)
		n := s.Grid.Cells()
		a, b, q := make([]float32, n), make([]float32, n), make([]float32, n)
		for i := range n {
			strength := 20 + 80*r.Float64()
			a[i], b[i] = float32(want*strength+5*r.NormFloat64()), float32(strength+5*r.NormFloat64())
			q[i] = a[i] / b[i]
		}
		s.Maps = append(s.Maps, survey.Quantity{Name: "d_height", Values: a}, survey.Quantity{Name: "g_height", Values: b},
			survey.Quantity{Name: "d_g_ratio", Values: q, Of: []string{"d_height", "g_height"}})
		if err := Find(s, Options{Ring: -1}); err != nil {
			t.Fatal(err)
		}
		st := s.Regions[1].Stats[2]
		if st.Quantity != "d_g_ratio" || st.N != n {
			t.Fatalf("%+v", st)
		}
		sum += st.Mean / trials
		sum2 += st.Mean * st.Mean / trials
		se += st.MeanSE / trials
		for _, v := range q {
			naive += float64(v) / float64(n) / trials
		}
	}
	scatter := math.Sqrt(sum2 - sum*sum)
	t.Logf("ratio of means %.5f, scatter %.5f, error %.5f; mean of ratios %.5f", sum, scatter, se, naive)
	// The mean of 200 trials is known to scatter/14, the scatter to 5 %; correlation is estimated from 400 pixels and never counted
	// negative, which widens the error by some 4 % more.
	if !(math.Abs(sum-want) <= 4*scatter/math.Sqrt(trials)) || !(se >= 0.85*scatter && se <= 1.25*scatter) {
		t.Errorf("ratio of means %.5f, want %.1f; its scatter is %.5f, the error says %.5f", sum, want, scatter, se)
	}
	if !(naive-want > 10*scatter/math.Sqrt(trials)) {
		t.Errorf("the mean of ratios, %.5f, does not show the bias that this is about", naive)
	}
}
