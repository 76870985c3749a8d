package scan

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// A layoutCase describes a run whose raster is known.
type layoutCase struct {
	name       string
	cols, rows int
	x0, y0     float64
	dx, dy     float64
	jitter     float64 // half width of the uniform jitter, steps
	gauss      float64 // standard deviation of a normal jitter, steps
	backlash   float64 // offset of every second line along it, steps, either way
	missing    float64 // share of pixels that are missing
	lostRows   []int
	repeated   int // pixels measured again
	keep       int // pixels measured before the run was cut off; 0 all
}

// generate returns the coordinates and true cells in raster order.
func (c layoutCase) generate(r *rand.Rand) (x, y []float64, cell []int32) {
	add := func(col, row int) {
		off := c.backlash
		if row%2 == 1 {
			off = -off
		}
		jx := c.jitter*(2*r.Float64()-1) + c.gauss*r.NormFloat64() + off
		jy := c.jitter*(2*r.Float64()-1) + c.gauss*r.NormFloat64()
		x = append(x, c.x0+(float64(col)+jx)*c.dx)
		y = append(y, c.y0+(float64(row)+jy)*c.dy)
		cell = append(cell, int32(row*c.cols+col))
	}
	for row := range c.rows {
		for col := range c.cols {
			if c.keep > 0 && row*c.cols+col >= c.keep || slices.Contains(c.lostRows, row) {
				continue
			}
			corner := (row == 0 || row == c.rows-1) && (col == 0 || col == c.cols-1) // hold the raster
			if r.Float64() < c.missing && !corner {
				continue
			}
			add(col, row)
		}
	}
	for range c.repeated {
		k := cell[r.IntN(len(cell))]
		add(int(k)%c.cols, int(k)/c.cols)
	}
	return x, y, cell
}

func TestRastersAreFound(t *testing.T) {
	t.Parallel()
	cases := []layoutCase{
		{name: "exact", cols: 60, rows: 45, x0: -12, y0: 3.5, dx: 0.5, dy: 0.5},
		{name: "steps differ", cols: 31, rows: 17, x0: 1000.25, y0: -3000.5, dx: 0.3, dy: 1.25},
		{name: "thirds", cols: 10, rows: 12, dx: 1. / 3, dy: 2. / 3},
		{name: "jitter", cols: 50, rows: 40, x0: 5, y0: 7, dx: 0.5, dy: 0.4, jitter: 0.25},
		{name: "normal jitter", cols: 80, rows: 60, dx: 1, dy: 1, gauss: 0.1},
		{name: "backlash", cols: 40, rows: 30, dx: 0.5, dy: 0.5, backlash: 0.125, jitter: 0.05},
		{name: "backlash of a third of a step in all", cols: 40, rows: 30, dx: 0.5, dy: 0.5, backlash: 0.17, jitter: 0.005},
		{name: "missing pixels", cols: 40, rows: 30, dx: 0.5, dy: 0.5, missing: 0.3, jitter: 0.1},
		{name: "most pixels missing", cols: 40, rows: 40, dx: 0.5, dy: 0.5, missing: 0.8, jitter: 0.05},
		{name: "missing rows", cols: 40, rows: 30, dx: 0.5, dy: 0.5, lostRows: []int{3, 4, 5, 17, 20}, jitter: 0.2},
		{name: "repeated pixels", cols: 25, rows: 20, dx: 0.5, dy: 0.5, repeated: 300, jitter: 0.1},
		{name: "small", cols: 3, rows: 3, dx: 1, dy: 1, gauss: 0.02},
		{name: "two by two", cols: 2, rows: 2, x0: 10, y0: 20, dx: 0.5, dy: 2},
		{name: "two rows", cols: 200, rows: 2, dx: 0.5, dy: 0.05},
		{name: "two columns", cols: 2, rows: 90, dx: 3, dy: 0.5, jitter: 0.1},
		{name: "wide", cols: 3000, rows: 4, dx: 0.1, dy: 5, jitter: 0.2},
		{name: "cut off", cols: 30, rows: 9, dx: 0.5, dy: 0.5, keep: 30*8 + 11, jitter: 0.1},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			for seed := range uint64(8) {
				r := rand.New(rand.NewPCG(seed, 7))
				x, y, want := c.generate(r)
				g, cell, err := FindGrid(x, y)
				if err != nil {
					t.Fatal(err)
				}
				if g.Layout != Raster || g.Cols != c.cols || g.Rows != c.rows {
					t.Fatalf("seed %d: %s %d x %d, want %d x %d: %+v", seed, g.Layout, g.Cols, g.Rows, c.cols, c.rows, g)
				}
				if !slices.Equal(cell, want) {
					wrong := 0
					for i := range cell {
						if cell[i] != want[i] {
							wrong++
						}
					}
					// A normal jitter of 0.1 steps exceeds half a step once in a million times: none in 9600 coordinates.
					t.Fatalf("seed %d: %d of %d pixels on the wrong cell", seed, wrong, len(cell))
				}
				// The corner is a mean over at least one row; the step over many columns is better known.
				tolerance := 1e-6 + 2*(c.jitter+c.gauss+c.backlash)/math.Sqrt(float64(min(c.cols, c.rows)))
				if !(math.Abs(g.X0-c.x0) <= tolerance*c.dx) || !(math.Abs(g.Y0-c.y0) <= tolerance*c.dy) ||
					!(math.Abs(g.DX-c.dx) <= tolerance*c.dx) || !(math.Abs(g.DY-c.dy) <= tolerance*c.dy) {
					t.Errorf("seed %d: %+v", seed, g)
				}
			}
		})
	}
}

func TestExactDecimalsStayExact(t *testing.T) {
	t.Parallel()
	for _, step := range []float64{0.5, 0.1, 0.3, 0.25, 1, 2.5, 0.05, 1.2345} {
		c := layoutCase{cols: 61, rows: 47, x0: -7.3, y0: 1234.56, dx: step, dy: 2 * step}
		x, y, _ := c.generate(rand.New(rand.NewPCG(1, 1)))
		g, _, _ := FindGrid(x, y)
		if g.DX != step || g.DY != 2*step || g.X0 != -7.3 || g.Y0 != 1234.56 {
			t.Errorf("step %v: got %v %v, corner %v %v", step, g.DX, g.DY, g.X0, g.Y0)
		}
		if !(g.Jitter <= 1e-12*1234.56) {
			t.Errorf("step %v: jitter %g of an exact raster", step, g.Jitter)
		}
	}
}

// The same pixels in any order, from any corner, give the same grid and the same cells.
func TestOrderOfAcquisitionDoesNotMatter(t *testing.T) {
	t.Parallel()
	r := rand.New(rand.NewPCG(3, 4))
	for _, c := range []layoutCase{
		{cols: 37, rows: 23, dx: 0.5, dy: 0.7, jitter: 0.2, missing: 0.1, repeated: 20},
		{cols: 50, rows: 1, dx: 0.5, dy: 0.7, jitter: 0.1},
	} {
		x, y, _ := c.generate(r)
		for _, slant := range []float64{0, 0.7} {
			ys := slices.Clone(y)
			for i := range ys {
				if c.rows == 1 {
					ys[i] += slant * x[i]
				}
			}
			want, cells, _ := FindGrid(x, ys)
			for range 5 {
				order := r.Perm(len(x))
				px, py := make([]float64, len(x)), make([]float64, len(x))
				for i, k := range order {
					px[i], py[i] = x[k], ys[k]
				}
				g, cell, _ := FindGrid(px, py)
				if g != want {
					t.Fatalf("grid depends on the order: %+v, %+v", g, want)
				}
				for i, k := range order {
					if cell[i] != cells[k] {
						t.Fatalf("the cell of a pixel depends on the order")
					}
				}
			}
		}
	}
}

func TestLines(t *testing.T) {
	t.Parallel()
	for seed := range uint64(30) {
		r := rand.New(rand.NewPCG(seed, 9))
		n := 10 + r.IntN(200)
		for _, test := range []struct {
			name       string
			dx, dy     float64
			cols, rows int
			area       float64
		}{
			{"horizontal", 0.5, 0, n, 1, 0.25},
			{"vertical", 0, 0.3, 1, n, 0.09},
			{"oblique", 0.4, 0.3, n, 1, 0.25},
			{"falling", 0.5, -1.2, n, 1, 1.69},
			{"diagonal", 1, 1, n, 1, 2},
		} {
			for _, jitter := range []float64{0, 0.05} {
				var x, y []float64
				step := math.Hypot(test.dx, test.dy)
				for i := range n {
					if jitter > 0 && i%7 == 3 && i < n-1 {
						continue // missing
					}
					x = append(x, 10+float64(i)*test.dx+jitter*step*r.NormFloat64())
					y = append(y, -4+float64(i)*test.dy+jitter*step*r.NormFloat64())
				}
				g, cell, _ := FindGrid(x, y)
				if g.Layout != Line || g.Cols != test.cols || g.Rows != test.rows {
					t.Fatalf("%s, seed %d, %d pixels, jitter %g: %+v", test.name, seed, n, jitter, g)
				}
				for i, c := range cell {
					cx, cy := g.Center(int(c)%g.Cols, int(c)/g.Cols)
					// Two positions off by 0.05 steps each, along and across: five standard deviations are 0.35 steps.
					if !(math.Hypot(cx-x[i], cy-y[i]) <= (1e-6+7*jitter)*step) {
						t.Fatalf("%s: pixel %d at %g, %g on a cell at %g, %g; %+v", test.name, i, x[i], y[i], cx, cy, g)
					}
				}
				if jitter == 0 && !(math.Abs(g.CellArea()-test.area) <= 1e-9) {
					t.Errorf("%s: cell of %g um2, want %g", test.name, g.CellArea(), test.area)
				}
			}
		}
	}
}

func TestFewPixels(t *testing.T) {
	t.Parallel()
	nan := math.NaN()
	for _, test := range []struct {
		name string
		x, y []float64
		want Grid
		cell []int32
	}{
		{"one", []float64{3}, []float64{-2}, Grid{Layout: Raster, Cols: 1, Rows: 1, X0: 3, Y0: -2, DX: 1, DY: 1}, []int32{0}},
		{"one again and again", []float64{3, 3, nan}, []float64{-2, -2, 1}, Grid{Layout: Raster, Cols: 1, Rows: 1, X0: 3, Y0: -2, DX: 1, DY: 1}, []int32{0, 0, -1}},
		{"two", []float64{3, 1}, []float64{2, 2}, Grid{Layout: Line, Cols: 2, Rows: 1, X0: 1, Y0: 2, DX: 2, DY: 2}, []int32{1, 0}},
		{"two, upright", []float64{3, 3}, []float64{2, 2.5}, Grid{Layout: Line, Cols: 1, Rows: 2, X0: 3, Y0: 2, DX: 0.5, DY: 0.5}, []int32{0, 1}},
		{"two, oblique", []float64{0, 4}, []float64{3, 0}, Grid{Layout: Line, Cols: 2, Rows: 1, X0: 0, Y0: 3, DX: 4, DY: 5, Rise: -3}, []int32{0, 1}},
		{"corner of a raster", []float64{0, 1, 0}, []float64{0, 0, 2}, Grid{Layout: Raster, Cols: 2, Rows: 2, X0: 0, Y0: 0, DX: 1, DY: 2}, []int32{0, 1, 2}},
		{"infinite", []float64{math.Inf(1), 5}, []float64{0, 1}, Grid{Layout: Raster, Cols: 1, Rows: 1, X0: 5, Y0: 1, DX: 1, DY: 1}, []int32{-1, 0}},
	} {
		g, cell, err := FindGrid(test.x, test.y)
		if err != nil || !(g.Jitter <= 1e-12) {
			t.Errorf("%s: %v, jitter %g", test.name, err, g.Jitter)
		}
		g.Jitter = 0
		if g != test.want || !slices.Equal(cell, test.cell) {
			t.Errorf("%s: %+v %v, want %+v %v", test.name, g, cell, test.want, test.cell)
		}
	}
	if _, cell, err := FindGrid([]float64{nan, 1}, []float64{1, nan}); !errors.Is(err, ErrNoPlace) || !slices.Equal(cell, []int32{-1, -1}) {
		t.Errorf("no coordinates: %v %v", err, cell)
	}
}

func TestRandomPointsAreNoRaster(t *testing.T) {
	t.Parallel()
	for _, n := range []int{20, 50, 300, 3000} {
		const sets = 300
		found := 0
		for seed := range uint64(sets) {
			if n > 100 && seed > 10 {
				break
			}
			r := rand.New(rand.NewPCG(seed, uint64(n)))
			x, y := make([]float64, n), make([]float64, n)
			for i := range x {
				x[i], y[i] = 50*r.Float64(), 80*r.Float64()
			}
			g, cell, _ := FindGrid(x, y)
			if g.Layout != Points {
				found++
				continue
			}
			if g.Cols != n || g.Rows != 1 {
				t.Fatalf("%d points: %+v", n, g)
			}
			for i := range x {
				for j := range x[:min(i, 50)] {
					if (cell[i] < cell[j]) != (y[i] < y[j]) {
						t.Fatalf("points are not in order of y")
					}
				}
			}
		}
		if found > sets/100 { // see evidence
			t.Errorf("%d of %d sets of %d random points passed for a raster", found, sets, n)
		}
	}
}

func TestStrayCoordinatesDoNotStretchTheRaster(t *testing.T) {
	t.Parallel()
	c := layoutCase{cols: 30, rows: 20, dx: 0.5, dy: 0.5, jitter: 0.1}
	x, y, want := c.generate(rand.New(rand.NewPCG(5, 5)))
	x[17], y[17], want[17] = 1e6, -1e6, -1
	x[300], want[300] = -500, -1
	g, cell, _ := FindGrid(x, y)
	if g.Cols != 30 || g.Rows != 20 || !slices.Equal(cell, want) {
		t.Errorf("%+v", g)
	}
}

// large are maps on which the time that the search takes would show.
var large = []layoutCase{
	{name: "exact", cols: 400, rows: 400, dx: 0.5, dy: 0.5},
	{name: "jitter", cols: 500, rows: 320, dx: 0.5, dy: 0.5, gauss: 0.08},
	{name: "line", cols: 160000, rows: 1, dx: 0.5, dy: 0.5},
}

func TestLargeMaps(t *testing.T) {
	t.Parallel()
	for _, c := range large {
		x, y, want := c.generate(rand.New(rand.NewPCG(8, 8)))
		g, cell, _ := FindGrid(x, y)
		if g.Cols != c.cols || g.Rows != c.rows || !slices.Equal(cell, want) {
			t.Errorf("%s: %+v", c.name, g)
		}
	}
}

func BenchmarkFindGrid(b *testing.B) {
	for _, c := range large {
		b.Run("map="+c.name, func(b *testing.B) {
			x, y, _ := c.generate(rand.New(rand.NewPCG(8, 8)))
			for b.Loop() {
				if _, _, err := FindGrid(x, y); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.N*len(x))/b.Elapsed().Seconds(), "pixels/s")
		})
	}
}

func ExampleFindGrid() {
	x := []float64{0, 0.5, 1, 1, 0.5, 0} // there and back
	y := []float64{2, 2, 2, 3, 3, 3}
	g, cell, err := FindGrid(x, y)
	fmt.Println(g.Layout, g.Cols, g.Rows, g.DX, g.DY, cell, err)
	// Output: raster 3 2 0.5 1 [0 1 2 5 4 3] <nil>
}
