package fit_test

import (
	"math"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
)

// TestSubstrateLines has silicon's third-order band beside D, a fifth as high as G. Taken from the bare pixels, or from a spectrum
// of the substrate, it leaves D/G of a pristine film at zero; without, it does not.
func TestSubstrateLines(t *testing.T) {
	t.Parallel()
	mean := map[string]float64{}
	for _, way := range []string{"bare pixels", "spectrum", "none"} {
		use := way != "none"
		scene := &synth.Scene{Seed: 5}
		scene.Stage = synth.Stage{Cols: 50, Rows: 30, DX: 0.5}
		scene.Instrument = synth.Instrument{Spot: 0.6, ReadNoise: 4, Background: 300, Channels: 800}
		scene.Signal = synth.Signal{G: 300, Lines: []synth.Line{{Band: synth.Band{Name: "silicon, third order", Position: 1440, Width: 70, Height: 60}, PerLayer: 0.93}}}
		scene.Objects = []synth.Object{{Layers: 1, Shape: synth.Shape{Disc: &synth.Disc{X: 8, Y: 7, Radius: 6}}}}
		recipe := fit.Graphene()
		recipe.Substrate = way == "bare pixels"
		s := learned(t, scene, recipe, func(plan *fit.Plan) {
			for _, x := range plan.Axis { // measured elsewhere: another background, twice the light
				if u := 2 * (x - 1440) / 70; way == "spectrum" {
					plan.Preparation.Substrate = append(plan.Preparation.Substrate, 800-0.1*x+120/(1+u*u))
				}
			}
		})
		if (len(s.plan.Learned.Substrate) > 0) != use {
			t.Errorf("%s: lines seen in windows %v", way, s.plan.Learned.Substrate)
		}
		g := scene.NewGenerator()
		counts := make([]float32, len(s.axis))
		ratio, se := s.Map("d_g_ratio").Values, s.Map("d_g_ratio").SE
		var n, sum, sum2, z2 float64
		for i := range scene.Len() {
			_, _, tr := g.Pixel(i, counts)
			if v := float64(ratio[tr.Row*s.Grid.Cols+tr.Col]); tr.LayerNumber == 1 && tr.PureFraction > 0.98 && v == v {
				e := float64(se[tr.Row*s.Grid.Cols+tr.Col])
				n++
				sum += v
				sum2 += v * v
				z2 += v * v / (e * e)
			}
		}
		mean[way] = sum / n
		error := math.Sqrt(sum2/n-mean[way]*mean[way]) / math.Sqrt(n)
		t.Logf("%s: mean D/G of %.0f pristine pixels %+.5f ± %.5f, pulls %.3f", way, n, mean[way], error, math.Sqrt(z2/n))
		// The term is known to a twentieth of a pixel's noise, common to all pixels: its own error adds to that of the mean.
		if use && !(math.Abs(mean[way]) <= 4*error+0.05*error*math.Sqrt(n)) {
			t.Errorf("mean D/G %+.5f, its standard error is %.5f", mean[way], error)
		}
	}
	if !(math.Abs(mean["none"]) > 10*math.Abs(mean["bare pixels"])) {
		t.Errorf("without the term the mean is %+.5f, with it %+.5f: it makes no difference here", mean["none"], mean["bare pixels"])
	}
}
