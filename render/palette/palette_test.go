package palette

import (
	"fmt"
	"image/color"
	"math"
	"testing"
)

var sequentials = []*Ramp{Water, Copper, Moss}

func TestOKLabReference(t *testing.T) {
	// Conversions of the sRGB primaries, printed with the definition of OKLab to three decimals (from memory); white must be 1, 0, 0.
	for _, test := range []struct {
		in   color.NRGBA
		want Lab
	}{
		{color.NRGBA{255, 255, 255, 255}, Lab{1, 0, 0}},
		{color.NRGBA{255, 0, 0, 255}, Lab{0.628, 0.225, 0.126}},
		{color.NRGBA{0, 255, 0, 255}, Lab{0.866, -0.234, 0.179}},
		{color.NRGBA{0, 0, 255, 255}, Lab{0.452, -0.032, -0.312}},
	} {
		if d := FromRGB(test.in).Distance(test.want); !(d <= 1e-3) {
			t.Errorf("%v: %.4f, want %.4f", test.in, FromRGB(test.in), test.want)
		}
	}
}

func TestRoundTrip(t *testing.T) {
	for i := range 512 {
		c := color.NRGBA{uint8(i * 37), uint8(i * 101), uint8(i * 11), 255}
		if got := FromRGB(c).RGB(); got != c {
			t.Errorf("%v comes back as %v", c, got)
		}
	}
}

func TestSequentialLightness(t *testing.T) {
	for _, r := range sequentials {
		for _, v := range []Vision{Normal, Protan, Deutan, Tritan} {
			// Eight-bit rounding moves lightness by up to 0.002: single steps are compared eight entries apart.
			for i := 8; i < 256; i++ {
				if !(v.See(r.table[i]).L > v.See(r.table[i-8]).L) {
					t.Errorf("%s, %s vision: not lighter at %d than at %d", r.Name, v, i, i-8)
				}
			}
		}
		for i := 2; i < 256; i++ { // rounding to eight bits moves lightness by almost one step
			if !(FromRGB(r.table[i]).L > FromRGB(r.table[i-2]).L) {
				t.Errorf("%s: lightness does not rise at %d", r.Name, i)
			}
		}
		for i := 1; i <= 1000; i++ {
			if !(r.path(float64(i)/1000).L > r.path(float64(i-1)/1000).L) {
				t.Errorf("%s: lightness of the path does not rise at %d/1000", r.Name, i)
			}
		}
		if span := FromRGB(r.table[255]).L - FromRGB(r.table[0]).L; !(span >= 0.65) {
			t.Errorf("%s: lightness spans only %.2f", r.Name, span)
		}
	}
}

func TestSteps(t *testing.T) {
	for _, r := range append(sequentials, Tide) {
		// Sixteenths of the ramp: rounding to eight bits is below 2 % of such a step.
		least, most := math.Inf(1), 0.0
		for i := 0; i+16 < 256; i += 16 {
			d := FromRGB(r.table[i]).Distance(FromRGB(r.table[i+16]))
			least, most = min(least, d), max(most, d)
		}
		t.Logf("%s: steps of a sixteenth %.3f to %.3f", r.Name, least, most)
		if !(most <= 1.15*least) {
			t.Errorf("%s: steps from %.4f to %.4f are not uniform", r.Name, least, most)
		}
	}
}

func TestRampsAreShown(t *testing.T) {
	// A path that left the screen's gamut would be cut, and so bent.
	for _, r := range append(sequentials, Tide) {
		for i := range 1001 {
			if p := r.path(float64(i) / 1000); !p.Shown() {
				t.Errorf("%s: %v at %d/1000 cannot be shown", r.Name, p, i)
				break
			}
		}
	}
	for i, p := range []Lab{LCH(0.80, 0.105, 212)} {
		if !p.Shown() {
			t.Errorf("layer %d cannot be shown", i+1)
		}
	}
}

func TestSequentialNeverGrey(t *testing.T) {
	for _, r := range sequentials {
		for i, c := range r.table {
			if d := FromRGB(c).Distance(FromRGB(Undetermined)); !(d >= 0.07) {
				t.Errorf("%s: entry %d is only %.3f from the grey of cells without a value", r.Name, i, d)
			}
		}
	}
}

func TestDivergingMirrors(t *testing.T) {
	for i := range 128 {
		a, b := FromRGB(Tide.table[i]), FromRGB(Tide.table[255-i])
		if !(math.Abs(a.L-b.L) <= 0.012) { // the two hues differ in length of path by a little, and rounding
			t.Errorf("entry %d and its mirror differ in lightness by %.3f", i, a.L-b.L)
		}
	}
	for _, v := range []Vision{Normal, Protan, Deutan, Tritan} {
		if d := v.See(Tide.table[0]).Distance(v.See(Tide.table[255])); !(d >= 0.12) {
			t.Errorf("%s vision: the ends differ by %.3f only", v, d)
		}
	}
}

func TestLayersToldApart(t *testing.T) {
	list := append(Layers[:], Undetermined)
	for _, v := range []Vision{Normal, Protan, Deutan, Tritan} {
		least, pair := math.Inf(1), ""
		for i := range list {
			for j := range i {
				if d := v.See(list[i]).Distance(v.See(list[j])); !(d >= least) {
					least, pair = d, fmt.Sprint(j, " and ", i)
				}
			}
		}
		t.Logf("%s vision: least distance %.3f (%s)", v, least, pair)
		if !(least >= 0.10) { // five times the least that is seen side by side
			t.Errorf("%s vision: classes %s are %.3f apart", v, pair, least)
		}
	}
	for i := 1; i < len(Layers); i++ {
		if d := FromRGB(Layers[i-1]).L - FromRGB(Layers[i]).L; !(d >= 0.115) {
			t.Errorf("layer %d is darker than %d by %.3f only", i, i-1, d)
		}
	}
}

func TestSimulationKeepsGrey(t *testing.T) {
	// Each row of the matrices sums to one, so that greys stay grey; digits are given to 1e-6.
	for v, m := range simulation {
		for i, row := range m {
			if s := row[0] + row[1] + row[2]; !(math.Abs(s-1) <= 3e-6) {
				t.Errorf("%v, row %d sums to %.6f", Vision(v), i, s)
			}
		}
	}
}
