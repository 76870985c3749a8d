package synth

import (
	"math"
	"math/cmplx"
	"testing"
)

func TestFaddeevaAgainstTable(t *testing.T) {
	// Voigt profiles of unit area, computed to 16 digits by an independent library.
	for _, test := range []struct{ x, s, gamma, want float64 }{
		{0, 1, 1, 2.087092805203677e-01},
		{1, 1, 1, 1.657956626891665e-01},
		{2, 1, 0.5, 8.242408278858693e-02},
		{5, 1, 0.5, 7.245622595174429e-03},
		{10, 2, 3, 9.763420274561818e-03},
		{12, 2.5, 6, 1.147818580336203e-02},
		{3, 1, 0.001, 4.488967507957449e-03},
	} {
		got := faddeeva(complex(test.x, test.gamma)/complex(test.s*math.Sqrt2, 0)) / (test.s * math.Sqrt(2*math.Pi))
		if !(math.Abs(got/test.want-1) <= 1e-8) { // the expansion is good to 1e-10 of the largest value, 3 s out 1e-8
			t.Errorf("V(%g; %g, %g) = %.12g, want %.12g", test.x, test.s, test.gamma, got, test.want)
		}
	}
}

func TestLorentzianValuesAndArea(t *testing.T) {
	x := make([]float64, 400001)
	for i := range x {
		x[i] = -20000 + 0.1*float64(i)
	}
	for _, s := range []float64{0, 0.85, 1.3, 3} {
		y := make([]float64, len(x))
		addLorentzian(y, x, 7, 0, 14, s)
		area := 0.0
		for _, v := range y {
			area += v * 0.1
		}
		// The tails beyond ±20000 hold 7 h γ²/20000 * 2 = 0.034 of 153.9.
		if want := 7*math.Pi*7 - 2*7*49/20000.; !(math.Abs(area-want) <= 1e-3) {
			t.Errorf("s=%g: area %.5f, want %.5f: folding must keep it", s, area, want)
		}
	}
	y := make([]float64, len(x))
	addLorentzian(y, x, 7, 0, 14, 0)
	if half := y[200000+70]; !(math.Abs(half-3.5) <= 1e-9) {
		t.Errorf("half a width away: %g, want half the height", half)
	}
}

// The folded Lorentzian against the convolution integral, through all three ways of computing it.
func TestFoldingAgainstIntegral(t *testing.T) {
	for _, test := range []struct{ w, s float64 }{{6, 0.4}, {6, 1.3}, {16, 0.85}, {16, 3}, {27, 1}, {70, 1.3}} {
		var x []float64
		for v := -300.0; v <= 300; v += 1.7 {
			x = append(x, v)
		}
		y := make([]float64, len(x))
		addLorentzian(y, x, 1, 0.3, test.w, test.s)
		for i, v := range x {
			// Trapezoidal rule over ±10 s: exponentially accurate for such integrands as long as the step is small against w.
			want, norm := 0.0, 0.0
			for k := -2000; k <= 2000; k++ {
				u := float64(k) / 200
				g := math.Exp(-u * u / 2)
				d := 2 * (v - 0.3 - u*test.s) / test.w
				want += g / (1 + d*d)
				norm += g
			}
			if want /= norm; !(math.Abs(y[i]-want) <= 4e-6) {
				t.Fatalf("w=%g s=%g at %g: %.8f, the integral gives %.8f", test.w, test.s, v, y[i], want)
			}
		}
	}
}

func TestFaddeevaLargeArgument(t *testing.T) {
	// w(z) -> i/(√π z) (1 + 1/(2z²) + 3/(4z⁴)); the next term is 15/(8 z⁶), 2e-9 at |z| = 30.
	for _, z := range []complex128{complex(30, 0.1), complex(0.5, 40), complex(-25, 25)} {
		want := real(complex(0, 1/math.Sqrt(math.Pi)) / z * (1 + 1/(2*z*z) + 3/(4*z*z*z*z)))
		if got := faddeeva(z); !(math.Abs(got-want) <= 1e-8/cmplx.Abs(z)) {
			t.Errorf("w(%v) = %g, want %g", z, got, want)
		}
	}
}
