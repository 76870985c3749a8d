package fit_test

import (
	"math"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/clean"
)

// TestResponse has a spectrometer that sees 2D by 35 % worse than G. Corrected, 2D/G and the layer number are right, and the
// noise is still known.
func TestResponse(t *testing.T) {
	t.Parallel()
	response := func(shift float64) float64 { return 1 - 0.35*(shift-1580)/1090 } // linear, as the scene's
	for _, correct := range []bool{false, true} {
		scene := flakes(21)
		scene.Stage.Cols, scene.Stage.Rows, scene.Stage.DX = 60, 45, 0.8
		scene.Instrument.Response = 0.65
		s := learned(t, scene, fit.Graphene(), func(plan *fit.Plan) {
			for _, x := range plan.Axis {
				if correct {
					plan.Preparation.Response = append(plan.Preparation.Response, response(x))
				}
			}
		}).interpreted(t)
		g := scene.NewGenerator()
		counts := make([]float32, len(s.axis))
		var ratio []float64
		var right, all, z2, n float64
		height := s.Map("2d_height")
		for i := range scene.Len() {
			_, _, tr := g.Pixel(i, counts)
			c := tr.Row*s.Grid.Cols + tr.Col
			if tr.PureFraction < pure || tr.LayerNumber > 2 {
				continue
			}
			all++
			if s.Map("layer_number").Values[c] == float32(tr.LayerNumber) {
				right++
			}
			if tr.LayerNumber != 1 {
				continue
			}
			// The scene's truth is in counts as measured; what an even spectrometer sees is that over the response.
			even := tr.TwoD.Height / response(tr.TwoD.Position)
			ratio = append(ratio, float64(s.Map("2d_g_ratio").Values[c])/(even/(tr.G.Height/response(tr.G.Position))))
			z := (float64(height.Values[c]) - even) / float64(height.SE[c])
			z2 += z * z
			n++
		}
		median := clean.Median(ratio)
		t.Logf("corrected %v: 2D/G %.3f of the truth in the median of %.0f pixels; layer number right in %.2f %% of %.0f; pulls of the 2D height %.2f; gain %.2f",
			correct, median, n, 100*right/all, all, math.Sqrt(z2/n), s.plan.Learned.Gain)
		if !correct {
			if !(math.Abs(median-0.65) <= 0.03) {
				t.Errorf("uncorrected 2D/G is %.3f of the truth, 0.65 is due: the scene has lost its response", median)
			}
			continue
		}
		if !(math.Abs(median-1) <= 0.02) || !(right >= 0.97*all) || !(math.Sqrt(z2/n) <= 1.1) || !(math.Abs(s.plan.Learned.Gain-1) <= 0.1) {
			t.Errorf("2D/G %.3f of the truth, layer number right in %.1f %%, pulls %.2f, gain %.2f", median, 100*right/all, math.Sqrt(z2/n), s.plan.Learned.Gain)
		}
	}
}
