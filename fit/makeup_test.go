package fit_test

import (
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
)

// makeupsOf simulates n pixels of one material and returns how often 1, 2 and 4 lines are chosen, in per cent.
func makeupsOf(t *testing.T, n int, material synth.Object, signal synth.Signal, seed uint64) (share [3]float64) {
	t.Helper()
	scene := synth.Uniform(n, material, synth.Instrument{Background: 300, ReadNoise: 4, From: 2500, To: 2900, Channels: 300}, seed)
	scene.Signal = signal
	s := learned(t, scene, fit.Graphene(), nil)
	counts := map[float32]float64{}
	for _, v := range s.Map("2d_components").Values {
		counts[v] += 100 / float64(n)
	}
	return [3]float64{counts[1], counts[2], counts[4]}
}

// TestMakeup prints how often each make-up is chosen. The bilayer's four lines are those of its published make-up; three layers
// have six lines, graphite two.
func TestMakeup(t *testing.T) {
	t.Parallel()
	for _, layers := range []int{1, 2, 3, 10} {
		for _, g := range []float64{50, 100, 200, 400, 1000} {
			s := makeupsOf(t, 300, synth.Object{Layers: layers}, synth.Signal{G: g}, uint64(layers))
			t.Logf("%2d layers, G height of one layer %4.0f counts: one line %5.1f %%, two %5.1f %%, four %5.1f %%", layers, g, s[0], s[1], s[2])
			switch {
			case layers == 1 && !(s[0] >= 99):
				t.Errorf("a single layer at G %.0f has one line in only %.1f %%", g, s[0])
			case layers == 2 && g >= 200 && !(s[2] >= 95):
				t.Errorf("two layers at G %.0f have four lines in only %.1f %%", g, s[2])
			case layers == 10 && g >= 200 && !(s[1] >= 95):
				t.Errorf("graphite at G %.0f has two lines in only %.1f %%", g, s[1])
			}
		}
	}
}

// TestSingleLayersHaveOneLine has single layers whose 2D band is skewed: up to three tenths of it lie 12 cm-1 above the rest,
// half a half width. Beyond, at half and half, the shape is no longer one line's.
func TestSingleLayersHaveOneLine(t *testing.T) {
	t.Parallel()
	for _, skew := range []float64{0, 0.1, 0.2, 0.3} {
		for _, height := range []float64{300, 1000, 3000, 10000} {
			s := makeupsOf(t, 500, synth.Object{Layers: 1, TwoDSkew: skew}, synth.Signal{G: height / 3}, 7)
			t.Logf("2D %5.0f counts, skew %.2f: one line %5.1f %%, two %5.1f %%, four %5.1f %%", height, skew, s[0], s[1], s[2])
			if !(s[0] >= 99) {
				t.Errorf("2D %.0f counts, skew %.2f: one line in only %.1f %%", height, skew, s[0])
			}
		}
	}
}
