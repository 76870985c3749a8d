package plot

import (
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"
)

func TestTicksKnown(t *testing.T) {
	for _, test := range []struct {
		low, high float64
		n         int
		want      string
	}{
		{0, 10, 6, "0 2 4 6 8 10"},
		{1577.3, 1586.2, 6, "1578 1580 1582 1584 1586"},
		{-0.02, 0.31, 6, "0.0 0.1 0.2 0.3"},
		{-3, 3, 4, "−2 0 2"},
		{0, 1.2e12, 6, "0.0 0.5 1.0"},
	} {
		if got := strings.Join(MakeTicks(test.low, test.high, test.n).Label, " "); got != test.want {
			t.Errorf("%g to %g: %s, want %s", test.low, test.high, got, test.want)
		}
	}
}

func TestTicksLaws(t *testing.T) {
	for _, low := range []float64{0, -1e-12, 1582, -98765.4, 1e15, -3} {
		for _, width := range []float64{1e-9, 3e-4, 0.7, 12, 5e6, 1e18} {
			if low+width == low || width < 1e-9*math.Abs(low) {
				continue
			}
			for n := 1; n < 10; n++ {
				ticks := MakeTicks(low, low+width, n)
				if len(ticks.At) > max(n, 2) || n >= 3 && len(ticks.At) == 0 {
					t.Errorf("%g + %g: %d ticks, at most %d wanted", low, width, len(ticks.At), n)
				}
				if len(ticks.Label) != len(slices.Compact(slices.Clone(ticks.Label))) {
					t.Errorf("%g + %g: two ticks say the same: %q", low, width, ticks.Label)
				}
				for i, v := range ticks.At {
					if !(v >= low-1e-6*width && v <= low+width*(1+1e-6)) {
						t.Errorf("%g + %g: tick at %g lies outside", low, width, v)
					}
					said, err := strconv.ParseFloat(strings.Replace(ticks.Label[i], "\u2212", "-", 1), 64)
					if err != nil || !(math.Abs(said*math.Pow10(ticks.Exp)-v) <= 1e-6*width) {
						t.Errorf("%g + %g: the label %q of %g is wrong (%v)", low, width, ticks.Label[i], v, err)
					}
				}
			}
		}
	}
}

func TestUnit(t *testing.T) {
	for in, want := range map[string]string{
		"cm-1": "cm⁻¹", "um": "µm", "um2": "µm²", "10^12 cm-2": "10¹² cm⁻²", "counts": "counts", "": "", "%": "%", "nm": "nm",
	} {
		if got := Unit(in); got != want {
			t.Errorf("%q becomes %q, want %q", in, got, want)
		}
	}
}

func TestAxis(t *testing.T) {
	for _, test := range []struct {
		ticks       Ticks
		title, unit string
		want        string
	}{
		{Ticks{}, "G position", "cm-1", "G position (cm⁻¹)"},
		{Ticks{}, "2D width (FWHM)", "cm-1", "2D width (FWHM), cm⁻¹"},
		{Ticks{}, "D/G height ratio", "", "D/G height ratio"},
		{Ticks{Exp: 11}, "Defect density", "cm-2", "Defect density (10¹¹ cm⁻²)"},
		{Ticks{Exp: -9}, "Ratio", "", "Ratio (10⁻⁹)"},
	} {
		if got := test.ticks.Axis(test.title, test.unit); got != test.want {
			t.Errorf("%q, want %q", got, test.want)
		}
	}
}
