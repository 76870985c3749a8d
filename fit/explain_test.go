package fit_test

import (
	"math"
	"testing"

	"bandgrid/fit"
)

func TestExamples(t *testing.T) {
	t.Parallel()
	scene := flakes(31)
	scene.Stage.Cols, scene.Stage.Rows, scene.Stage.DX = 60, 45, 0.8
	r := learned(t, scene, fit.Graphene(), nil).interpreted(t)
	titles := map[string]bool{}
	for _, trace := range fit.Examples(r.Survey, r.plan, r.sample, fit.RunOptions{}) {
		titles[trace.Title] = true
		if len(trace.Windows) != 2 {
			t.Errorf("%s: %d windows", trace.Title, len(trace.Windows))
		}
		for _, w := range trace.Windows {
			var chi, n float64
			for i, v := range w.Counts {
				if !w.Left[i] && v == v {
					d := v - w.Curve[i]
					chi += d * d / (w.Curve[i] + 16) // gain 1, read noise 4
					n++
				}
			}
			// Bilayers are not one line; the others fit to within the noise, whose scatter over 250 channels is 9 %.
			if chi /= n; !(chi < 1.5) && trace.Title != "Two layers" || math.IsNaN(chi) {
				t.Errorf("%s, window %s: chi-square %.2f of what is shown", trace.Title, w.Name, chi)
			}
		}
	}
	for _, want := range []string{"Bare substrate", "Single layer", "Two layers", "Damaged film", "With a cosmic ray"} {
		if !titles[want] {
			t.Errorf("%s is not among the examples %v", want, titles)
		}
	}
}
