package fit_test

import (
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
)

// makeupsOf simulates some flakes of one material, whose 2D widths scatter as published, with n pixels each, and returns how often
// 1, 2 and 4 lines are chosen, in per cent of all pixels.
func makeupsOf(t *testing.T, flakes, n int, material synth.Object, signal synth.Signal, seed uint64) (share [3]float64) {
	t.Helper()
	for k := range flakes {
		scene := synth.Uniform(n, material, synth.Instrument{Background: 300, ReadNoise: 4, From: 2500, To: 2900, Channels: 300}, seed+uint64(1000*k))
		scene.Signal = signal
		s := learned(t, scene, fit.Graphene(), nil)
		for _, v := range s.Map("2d_components").Values {
			switch v {
			case 1, 2:
				share[int(v)-1] += 100 / float64(n*flakes)
			case 4:
				share[2] += 100 / float64(n*flakes)
			}
		}
	}
	return share
}

// TestMakeup prints how often each make-up is chosen. The bilayer's four lines are those of its published make-up; three layers
// have six lines, graphite two.
func TestMakeup(t *testing.T) {
	t.Parallel()
	for _, layers := range []int{1, 2, 3, 10} {
		for _, g := range []float64{50, 100, 200, 400, 1000} {
			s := makeupsOf(t, 16, 40, synth.Object{Layers: layers}, synth.Signal{G: g}, uint64(layers))
			t.Logf("%2d layers, G height of one layer %4.0f counts: one line %5.1f %%, two %5.1f %%, four %5.1f %%", layers, g, s[0], s[1], s[2])
			switch {
			case layers == 1 && !(s[0] >= 99):
				t.Errorf("a single layer at G %.0f has one line in only %.1f %%", g, s[0])
			case layers == 2 && g >= 400 && !(s[2] >= 95):
				t.Errorf("two layers at G %.0f have four lines in only %.1f %%", g, s[2])
			case layers == 10 && g >= 200 && !(s[1] >= 90):
				t.Errorf("graphite at G %.0f has two lines in only %.1f %%", g, s[1])
			}
		}
	}
}

// TestSingleLayersHaveOneLine has single layers whose 2D band is slightly skewed: up to a tenth of it lies 12 cm-1 above the rest.
// With two tenths, narrow bands are of two lines by any measure: that is printed only.
func TestSingleLayersHaveOneLine(t *testing.T) {
	t.Parallel()
	for _, skew := range []float64{0, 0.05, 0.1, 0.2} {
		for _, height := range []float64{300, 1000, 3000, 10000} {
			s := makeupsOf(t, 16, 40, synth.Object{Layers: 1, TwoDSkew: skew}, synth.Signal{G: height / 3}, 7)
			t.Logf("2D %5.0f counts, skew %.2f: one line %5.1f %%, two %5.1f %%, four %5.1f %%", height, skew, s[0], s[1], s[2])
			if skew <= 0.1 && !(s[0] >= 99) {
				t.Errorf("2D %.0f counts, skew %.2f: one line in only %.1f %%", height, skew, s[0])
			}
		}
	}
}
