package render

import (
	"strings"
	"testing"

	"bandgrid/mapio/survey"
)

func TestDrift(t *testing.T) {
	s := &survey.Survey{}
	if _, err := Drift(s, Options{}); err == nil {
		t.Error("a survey without a drift gives a figure")
	}
	d := &survey.Drift{Band: "si", Range: 1.5, Error: 0.01, Jumps: []survey.Jump{{Pixel: 150, Size: -1}}}
	for i := range 300 {
		shift := 0.002 * float64(i)
		if i >= 150 {
			shift -= 1
		}
		d.Pixel, d.Shift = append(d.Pixel, i), append(d.Shift, shift)
	}
	s.Drift = d
	for _, width := range []float64{60, 90, 180} {
		f, err := Drift(s, Options{WidthMM: width})
		if err != nil {
			t.Fatal(err)
		}
		found := false
		for _, text := range f.Texts() {
			found = found || strings.Contains(text.String, "order of acquisition")
			if text.At.X < 0 || text.At.X > f.W || text.At.Y < 0 || text.At.Y > f.H {
				t.Errorf("%g mm: %q lies outside the figure", width, text.String)
			}
		}
		if !found || f.W != width {
			t.Errorf("%g mm: the figure is %g mm wide", width, f.W)
		}
	}
}
