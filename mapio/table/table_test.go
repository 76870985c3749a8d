package table

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"
	"testing"
	"testing/iotest"

	"bandgrid/mapio/scan"
)

// A got is everything that came out of a run.
type got struct {
	*scan.Scan
	pixels []scan.Pixel
	errs   []error // of each pixel
	blocks int
	err    error // that ended the stream
}

func readAll(t testing.TB, r io.Reader, opt Options) (*got, error) {
	t.Helper()
	if opt.File == "" {
		opt.File = "night.txt"
	}
	sc, err := Open(r, opt)
	if err != nil {
		return nil, err
	}
	g := &got{Scan: sc}
	for b, err := range sc.Blocks(t.Context()) {
		if g.err = err; err != nil {
			break
		}
		if b.Seq() != g.blocks {
			t.Errorf("block %d has number %d", g.blocks, b.Seq())
		}
		g.blocks++
		n := 0
		for p, err := range b.Pixels() {
			if p.Index != n {
				t.Errorf("pixel %d of its block has index %d", n, p.Index)
			}
			n++
			q := *p
			q.Counts = slices.Clone(p.Counts)
			if err != nil {
				q.Counts = nil
			}
			q.Index = len(g.pixels)
			g.pixels, g.errs = append(g.pixels, q), append(g.errs, err)
		}
	}
	return g, nil
}

func read(t testing.TB, run string, opt Options) *got {
	t.Helper()
	g, err := readAll(t, strings.NewReader(run), opt)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// sameFloat takes NaN for the same as NaN.
func sameFloat[F float32 | float64](a, b F) bool { return a == b || a != a && b != b }

func (g *got) check(t *testing.T, s *sample) {
	t.Helper()
	if g.err != nil {
		t.Errorf("the stream ends with %v", g.err)
	}
	if !slices.Equal(g.Axis, s.axis) {
		t.Errorf("axis %v, want %v", g.Axis, s.axis)
	}
	if len(g.pixels) != len(s.counts) {
		t.Fatalf("%d pixels, want %d", len(g.pixels), len(s.counts))
	}
	for i, p := range g.pixels {
		if g.errs[i] != nil {
			t.Fatalf("pixel %d: %v", i, g.errs[i])
		}
		if p.X != s.x[i] || p.Y != s.y[i] || !slices.EqualFunc(p.Counts, s.counts[i], sameFloat[float32]) {
			t.Fatalf("pixel %d differs: at %g, %g, want %g, %g", i, p.X, p.Y, s.x[i], s.y[i])
		}
	}
}

func TestAllFormsGiveTheSamePixels(t *testing.T) {
	small, large := newSample(4, 3, 20), newSample(30, 40, 300)
	for name, f := range forms {
		t.Run(name, func(t *testing.T) {
			text := small.text(f)
			g, err := readAll(t, bytes.NewReader(text), Options{})
			if err != nil {
				t.Fatalf("%v\n%.300s", err, text)
			}
			g.check(t, small)
			if want := map[bool]string{true: "wide text", false: "long text"}[f.wide]; g.Format != want {
				t.Errorf("recognised as %q, want %q", g.Format, want)
			}
			slow, err := readAll(t, iotest.OneByteReader(bytes.NewReader(text)), Options{})
			if err != nil {
				t.Fatal(err)
			}
			slow.check(t, small)
			g, err = readAll(t, bytes.NewReader(large.text(f)), Options{})
			if err != nil {
				t.Fatal(err)
			}
			g.check(t, large)
			if g.blocks < 2 {
				t.Errorf("%d block: the cuts were not tested", g.blocks)
			}
			last := g.pixels[len(g.pixels)-1]
			perPixel := 1
			if !f.wide {
				perPixel = 300
			}
			lines := bytes.Count(large.text(f), []byte("\n"))
			if want := lines - perPixel + 1; last.Line != want {
				t.Errorf("the last pixel begins in line %d, want %d", last.Line, want)
			}
			if last.Open {
				t.Error("the last line is whole, but the pixel is called open")
			}
		})
	}
}

func TestHeaderWords(t *testing.T) {
	wide := "\n0\t0\t1\t2\t3\n1\t0\t4\t5\t6\n"
	for _, c := range []struct {
		name, run string
		opt       Options
		laser     float64
		axis      []float64
		x, y      float64 // of the second pixel
	}{
		{"no words", "\t\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"descending", "\t\t1203\t1201\t1200" + wide, Options{}, 0, []float64{1203, 1201, 1200}, 1, 0},
		{"comment laser", "# laser 532 nm\n\t\t1200\t1201\t1203" + wide, Options{}, 532, []float64{1200, 1201, 1203}, 1, 0},
		{"named laser", "# laser_nm: 532.0\n\t\t1200\t1201\t1203" + wide, Options{}, 532, []float64{1200, 1201, 1203}, 1, 0},
		{"excitation", "% excitation = 632,8 nm\n\t\t1200\t1201\t1203" + wide, Options{}, 632.8, []float64{1200, 1201, 1203}, 1, 0},
		{"no comment", "Laser: 785 nm\n\t\t1200\t1201\t1203" + wide, Options{}, 785, []float64{1200, 1201, 1203}, 1, 0},
		{"not the power", "# laser power: 500 uW\n\t\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"asked laser wins", "# laser 532 nm\n\t\t1200\t1201\t1203" + wide, Options{Laser: 488}, 488, []float64{1200, 1201, 1203}, 1, 0},
		{"mm", "x (mm)\ty [mm]\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1000, 0},
		{"nm, swapped", "stage_y_nm\tstage_x_nm\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 0, 0.001},
		{"micro sign", "X (\u00b5m)\tY (\u03bcm)\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"Latin-1", "X (\xb5m)\tY (\xb5m)\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"units in the axis", "x\ty\t1200 cm⁻¹\t1201 cm⁻¹\t1203 cm⁻¹" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"header in a comment", "# x\ty\t1200\t1201\t1203" + wide, Options{}, 0, []float64{1200, 1201, 1203}, 1, 0},
		{"asked", "a\tb\t1200\t1201\t1203" + wide, Options{Columns: []string{"y", "x:mm"}}, 0, []float64{1200, 1201, 1203}, 0, 1},
		{"more columns", "point\tx\ty\t1200\t1201" + wide, Options{}, 0, []float64{1200, 1201}, 0, 4},
		{"asked more columns", "a\tb\tc\t1200\t1201" + wide, Options{Columns: []string{"-", "x", "y"}}, 0, []float64{1200, 1201}, 0, 4},
		{"nm axis", "# wavelength (nm)\nx\ty\t580\t581\t582" + wide, Options{Laser: 532}, 532, scan.ShiftFromWavelength([]float64{580, 581, 582}, 532), 1, 0},
		{"nm in the cells", "x\ty\t580nm\t581nm\t582nm" + wide, Options{Laser: 532}, 532, scan.ShiftFromWavelength([]float64{580, 581, 582}, 532), 1, 0},
		{"asked nm", "x\ty\t580\t581\t582" + wide, Options{Laser: 532, Columns: []string{"x", "y", "wavelength"}}, 532, scan.ShiftFromWavelength([]float64{580, 581, 582}, 532), 1, 0},
		{"long", "counts,extra,shift,y,x\n5,a,1200,0,0\n6,b,1201,0,0\n7,c,1200,0,1\n8,d,1201,0,1\n", Options{}, 0, []float64{1200, 1201}, 1, 0},
		{"long wavelength", "x,y,wavelength,intensity\n0,0,580,7\n0,0,581,7\n1,0,580,7\n1,0,581,7\n", Options{Laser: 532}, 532, scan.ShiftFromWavelength([]float64{580, 581}, 532), 1, 0},
		{"long asked", "0,9,580,0,7\n0,9,581,0,7\n1,9,580,0,7\n1,9,581,0,7\n", Options{Laser: 532, Columns: []string{"x:mm", "-", "wavelength", "y", "counts"}}, 532, scan.ShiftFromWavelength([]float64{580, 581}, 532), 1000, 0},
		{"long blanks, two words", "x y Raman shift Counts\n0 0 1200 7\n0 0 1201 7\n1 0 1200 7\n1 0 1201 7\n", Options{}, 0, []float64{1200, 1201}, 1, 0},
		{"blank line between pixels", "0 0 1200 7\n0 0 1201 7\n\n1 0 1200 7\n1 0 1201 7\n", Options{}, 0, []float64{1200, 1201}, 1, 0},
		{"same place again", "0 0 1200 7\n0 0 1201 7\n0 0 1200 7\n0 0 1201 7\n", Options{}, 0, []float64{1200, 1201}, 0, 0},
	} {
		t.Run(c.name, func(t *testing.T) {
			g := read(t, c.run, c.opt)
			if g.Laser != c.laser || !slices.Equal(g.Axis, c.axis) {
				t.Errorf("laser %g, axis %v; want %g, %v", g.Laser, g.Axis, c.laser, c.axis)
			}
			if len(g.pixels) != 2 || g.errs[0] != nil || g.errs[1] != nil {
				t.Fatalf("%d pixels, %v; want 2", len(g.pixels), g.errs)
			}
			if p := g.pixels[1]; p.X != c.x || p.Y != c.y {
				t.Errorf("the second pixel is at %g, %g, want %g, %g", p.X, p.Y, c.x, c.y)
			}
		})
	}
}

func TestNotes(t *testing.T) {
	g := read(t, "# sample: flake 7\n# exposure = 0.5 s\n#\nOperator: night shift\n# a line of words\nx\ty\t1200\t1201\n0\t0\t1\t2\n", Options{})
	want := map[string]string{"sample": "flake 7", "exposure": "0.5 s", "Operator": "night shift"}
	if fmt.Sprint(g.Notes) != fmt.Sprint(want) {
		t.Errorf("notes %v, want %v", g.Notes, want)
	}
}

func TestMissingCounts(t *testing.T) {
	g := read(t, "x;y;1200;1201;1202;1203\n0;0;;nan;NaN;4\n", Options{})
	p := g.pixels[0]
	if g.errs[0] != nil || len(p.Counts) != 4 || !(math.IsNaN(float64(p.Counts[0])) && math.IsNaN(float64(p.Counts[1])) && math.IsNaN(float64(p.Counts[2]))) || p.Counts[3] != 4 {
		t.Errorf("%v %v", p.Counts, g.errs)
	}
}
