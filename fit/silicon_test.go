package fit_test

import (
	"math"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
)

// TestSiliconLineIsNeverASpike has a silicon line 3 cm-1 wide and 50 times the noise, at three channel spacings, with film and
// without, and cosmic rays. No channel of the line is left out unless a ray hit it, and its position is right.
func TestSiliconLineIsNeverASpike(t *testing.T) {
	t.Parallel()
	for _, spacing := range []float64{0.6, 1, 2} {
		scene := &synth.Scene{Seed: 17}
		scene.Stage = synth.Stage{Cols: 40, Rows: 25, DX: 0.5}
		scene.Instrument = synth.Instrument{Spot: 0.6, ReadNoise: 4, Background: 300, From: 450, To: 2850, Channels: int(2400/spacing) + 1}
		scene.Signal = synth.Signal{G: 300, Lines: []synth.Line{{Band: synth.Band{Name: "silicon", Position: 520.5, Width: 3, Height: 50 * math.Sqrt(316)}, PerLayer: 0.93}}}
		scene.Spikes.Rate = 0.06 * 2400 / 40 // in 6 to 15 % of the pixels a ray near the line
		scene.Objects = []synth.Object{{Layers: 1, Shape: synth.Shape{Disc: &synth.Disc{X: 8, Y: 6, Radius: 5}}}}
		s := learned(t, scene, fit.Graphene(), nil)
		if n := s.plan.Learned.Bare; n < 100 {
			t.Errorf("spacing %g: %d bare pixels", spacing, n)
		}
		position, width := s.Map("si_position"), s.Map("si_width")
		g := scene.NewGenerator()
		counts := make([]float32, len(s.axis))
		var n, lost, touched, hit, misled, sum, sum2, wide float64
		for i := range scene.Len() {
			_, _, tr := g.Pixel(i, counts)
			c := tr.Row*s.Grid.Cols + tr.Col
			near := false
			for _, channel := range tr.Spikes {
				near = near || math.Abs(s.axis[channel]-520.5) < 40
			}
			if near {
				hit++
				if v := float64(position.Values[c]); !(math.Abs(v-520.5) <= 6*float64(position.SE[c])) {
					misled++
				}
				continue
			}
			if s.Map("spikes").Values[c] > 0 && len(tr.Spikes) == 0 {
				touched++
			}
			v := float64(position.Values[c])
			if v != v {
				lost++
				continue
			}
			n++
			z := (v - 520.5) / float64(position.SE[c])
			sum += z
			sum2 += z * z
			wide += float64(width.Values[c])
		}
		t.Logf("%.1f cm-1 per channel: %.0f pixels, line lost in %.0f, false spikes in %.0f, rays near it in %.0f, by which %.0f were misled; pulls of the position %+.3f, %.3f wide; mean width %.3f", spacing, n, lost, touched, hit, misled, sum/n, math.Sqrt(sum2/n-sum*sum/n/n), wide/n)
		if lost > 0 || touched > 0 || n < 800 {
			t.Errorf("spacing %g: line lost in %.0f of %.0f pixels, channels left out without a ray in %.0f", spacing, lost, n+lost, touched)
		}
		// What the other pixels show tells a ray on the line from the line. Over ten other seeds 12 of 1131 rays misled at 2 cm-1 per
		// channel, none at the others; so one is due in some hundred, and five are four deviations more. (Without the other pixels
		// one in twelve misleads.)
		if !(misled <= 5) || hit < 50 {
			t.Errorf("spacing %g: %.0f of %.0f rays near the line mislead the fit", spacing, misled, hit)
		}
		// The model is the profile at the middle of a channel, as the simulation's: real channels integrate.
		if !(math.Abs(sum/n) <= 4/math.Sqrt(n)) || !(math.Abs(wide/n-3) <= 0.03) {
			t.Errorf("spacing %g: pulls of the position %+.3f; mean width %.3f", spacing, sum/n, wide/n)
		}
	}
}
