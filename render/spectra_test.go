package render

import (
	"math"
	"strings"
	"testing"

	"bandgrid/mapio/survey"
)

// traces are two pixels with two windows each, one of them with a hole and a cosmic ray.
func traces() []survey.Trace {
	window := func(name string, low, high, at, level, height float64) survey.TraceWindow {
		w := survey.TraceWindow{Name: name, Found: []survey.Peak{{Name: strings.ToLower(name), Position: at}}}
		for x := low; x <= high; x += 2 {
			u := (x - at) / 10
			w.Shift = append(w.Shift, x)
			w.Base = append(w.Base, level)
			w.Curve = append(w.Curve, level+height/(1+u*u))
			w.Counts = append(w.Counts, level+height/(1+u*u)+0.02*height*math.Sin(x*x))
			w.Left = append(w.Left, false)
		}
		return w
	}
	a := survey.Trace{Title: "Single layer", X: 10.25, Y: -3.5, Windows: []survey.TraceWindow{window("G", 1200, 1750, 1582, 300, 400), window("2D", 2550, 2850, 2670, 250, 1200)}}
	b := survey.Trace{Title: "With a cosmic ray", X: 1234.5, Y: 999, Windows: []survey.TraceWindow{window("G", 1200, 1750, 1582, 30000, 40000), window("2D", 2550, 2850, 2670, 250, 1200)}}
	b.Windows[0].Counts[20], b.Windows[0].Left[20] = 1e6, true
	b.Windows[0].Counts[30] = math.NaN()
	return []survey.Trace{a, b}
}

func TestSpectra(t *testing.T) {
	for _, width := range []float64{80, 160} {
		f, err := Spectra(traces(), Options{WidthMM: width})
		if err != nil {
			t.Fatal(err)
		}
		var all strings.Builder
		texts := f.Texts()
		for i, a := range texts {
			all.WriteString(a.String + "\n")
			box := a.Box()
			if box.X < 0 || box.Y < 0 || box.X+box.W > f.W || box.Y+box.H > f.H {
				t.Errorf("%g mm: %q lies outside the figure", width, a.String)
			}
			for _, b := range texts[:i] {
				if box.Overlaps(b.Box()) {
					t.Errorf("%g mm: %q and %q overlap", width, a.String, b.String)
				}
			}
		}
		for _, want := range []string{"Single layer, x 10.25", "With a cosmic ray, x 1234.50", "Raman shift", "Counts", "G", "2D"} {
			if !strings.Contains(all.String(), want) {
				t.Errorf("%g mm: %q is missing", width, want)
			}
		}
	}
	if _, err := Spectra(nil, Options{}); err == nil {
		t.Error("a figure of nothing")
	}
}
