package calib

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/mapio/scan"
)

// TestGlassAgainstCertificate compares the curves with values of the certificates: 2242a at 150 and 160 cm-1 as in the workbook
// of NIST SRM 2242a, the others computed apart from the certified coefficients.
func TestGlassAgainstCertificate(t *testing.T) {
	for _, test := range []struct {
		name        string
		shift, rate float64
	}{
		{"SRM 2242a", 150, 0.0559064636413}, {"2242a", 160, 0.0570151509082}, {"srm 2242a", 1582, 0.530237465266}, {"2242a", 2669, 0.973386627399},
		{"2241", 1582, 0.669336650201}, {"2241", 2669, 1.00275977472}, {"2245", 1582, 0.86731492819}, {"2245", 2633, 0.65214268897},
	} {
		g, err := GlassNamed(test.name)
		if err != nil {
			t.Fatal(err)
		}
		if rate, se := g.Rate(test.shift); !(math.Abs(rate-test.rate) <= 1e-10) || !(se > 0 && se < 1) {
			t.Errorf("%s at %g: %.12f ± %.2f, certified %.12f", test.name, test.shift, rate, se, test.rate)
		}
	}
	g, _ := GlassNamed("2242a")
	if rate, _ := g.Rate(100); !math.IsNaN(rate) {
		t.Errorf("outside its range the glass has the rate %g", rate)
	}
	if _, err := GlassNamed("2240"); err == nil {
		t.Error("SRM 2240 passes")
	}
}

// TestResponseIsRecovered measures a glass with a spectrometer whose response falls by 35 % from G to 2D, and bends.
func TestResponseIsRecovered(t *testing.T) {
	g, _ := GlassNamed("2242a")
	truth := func(s float64) float64 {
		u := (s - 1580) / 1090
		return 1 - 0.35*u - 0.03*u*(u-1)
	}
	r := rand.New(rand.NewPCG(1, 1))
	var axis scan.Axis
	var counts []float32
	for i := range 1400 {
		s := 300 + 1.9*float64(i)
		rate, _ := g.Rate(s)
		m := 2e4 * rate * truth(s)
		axis, counts = append(axis, s), append(counts, float32(m+math.Sqrt(m)*r.NormFloat64()))
	}
	response, err := FromGlass(g, axis, counts, 532.1)
	if err != nil {
		t.Fatal(err)
	}
	for _, pair := range [][2]float64{{1580, 2670}, {1345, 1580}, {520, 2900}} {
		a, _, err1 := response.At(pair[0])
		b, _, err2 := response.At(pair[1])
		se, err3 := response.RatioSE(pair[0], pair[1])
		if err := errors.Join(err1, err2, err3); err != nil {
			t.Fatal(err)
		}
		got, want := b/a, truth(pair[1])/truth(pair[0])
		// Here the glass is as certified, so only noise and smoothing count: half a per cent.
		if !(math.Abs(got/want-1) <= 0.005) || !(se < 0.15) {
			t.Errorf("response at %.0f over %.0f: %.4f ± %.1f %%, truth %.4f", pair[1], pair[0], got, 100*se, want)
		}
	}
	on := response.On(scan.Axis{100, 1580, 2670})
	if !math.IsNaN(on[0]) || math.IsNaN(on[1]) {
		t.Errorf("on an axis: %v", on)
	}
	if _, _, err := response.At(100); !errors.Is(err, ErrRange) {
		t.Error(err)
	}
	if _, err := FromGlass(g, axis, counts, 633); err == nil {
		t.Error("the glass for 532 nm passes at 633 nm")
	}
	if _, err := FromGlass(g, axis, make([]float32, len(axis)), 532); err == nil {
		t.Error("a spectrum of zeros passes")
	}
	response.Values[3] = math.NaN()
	if response.Check() == nil {
		t.Error("a response of NaN passes")
	}
}
