package line

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/diff/fd"
	"gonum.org/v1/gonum/integrate/quad"
)

var shapes = []struct {
	Shape
	p []float64
}{
	{Lorentzian{}, []float64{400, 1582, 14}},
	{Gaussian{}, []float64{400, 1582, 14}},
	{PseudoVoigt{}, []float64{400, 1582, 14, 0.3}},
	{PseudoVoigt{}, []float64{-40, 1582, 14, 1}},
	{BreitWignerFano{}, []float64{400, 1582, 14, 0}},
	{BreitWignerFano{}, []float64{400, 1582, 14, 0.15}},
	{BreitWignerFano{}, []float64{400, 1582, 14, -0.6}},
	{Voigt{}, []float64{400, 1582, 14}},
	{Voigt{Instrument: 1.8}, []float64{400, 1582, 14}},
	{Voigt{Instrument: 10}, []float64{-400, 1582, 3}},
	{FreeVoigt{}, []float64{400, 1582, 14, 5}},
	{FreeVoigt{}, []float64{400, 1582, 0.5, 12}},
	{FreeVoigt{}, []float64{400, 1582, 60, 0.5}},
}

func TestShapeDerivatives(t *testing.T) {
	x := []float64{1200, 1500, 1560, 1575, 1581.9, 1582, 1585, 1590, 1600, 1700, 2000}
	for _, s := range shapes {
		name := fmt.Sprintf("%T%+v %g", s.Shape, s.Shape, s.p)
		n := s.Len()
		if n != len(s.p) {
			t.Fatalf("%s: %d parameters", name, n)
		}
		y, d := columns(1, len(x))[0], columns(n, len(x))
		s.Eval(y, d, x, s.p)
		// Differences in units of about the size of each parameter's effect; a step of 1e-4 of them is off by 1e-8 of it.
		units := []float64{math.Abs(s.p[Height]), s.p[Width], s.p[Width], 1}
		if n > 3 && s.p[3] > 1 {
			units[3] = s.p[3]
		}
		differences := func(f func(p []float64) float64) []float64 {
			g := fd.Gradient(nil, func(q []float64) float64 {
				p := make([]float64, n)
				for k := range p {
					p[k] = s.p[k] + q[k]*units[k]
				}
				return f(p)
			}, make([]float64, n), &fd.Settings{Formula: fd.Central, Step: 1e-4})
			for k := range g {
				g[k] /= units[k]
			}
			return g
		}
		for i, at := range x {
			want := differences(func(p []float64) float64 { return one(s, at, p...) })
			for k := range want {
				if !(math.Abs(d[k][i]-want[k])*units[k] <= 1e-6*math.Abs(s.p[Height])) {
					t.Errorf("%s at %g: derivative %d is %g, by differences %g", name, at, k, d[k][i], want[k])
				}
			}
			if v := one(s, at, s.p...); y[i] != v {
				t.Errorf("%s at %g: %g with derivatives, %g without", name, at, y[i], v)
			}
		}
		g := columns(1, n)[0]
		for _, of := range []struct {
			what     string
			gradient func(g, p []float64)
			f        func(p []float64) float64
		}{{"area", s.AreaGradient, s.Area}, {"FWHM", s.FWHMGradient, s.FWHM}} {
			of.gradient(g, s.p)
			want := differences(of.f)
			for k := range want {
				if !(math.Abs(g[k]-want[k])*units[k] <= 1e-6*math.Abs(of.f(s.p))) {
					t.Errorf("%s: %s by parameter %d: %g, by differences %g", name, of.what, k, g[k], want[k])
				}
			}
		}
	}
}

func TestMaximumAndHalfHeight(t *testing.T) {
	for _, s := range shapes {
		name := fmt.Sprintf("%T%+v %g", s.Shape, s.Shape, s.p)
		at, height := s.Maximum(s.p)
		if at != s.p[Position] || height != s.p[Height] || !(math.Abs(one(s, at, s.p...)/height-1) <= 0x1p-51) { // w times 1/w: two roundings
			t.Errorf("%s: maximum %g at %g, the profile there %g", name, height, at, one(s, at, s.p...))
		}
		for off := 1e-3; off < 3000; off *= 1.5 {
			if !(one(s, at+off, s.p...)/height < 1) || !(one(s, at-off, s.p...)/height < 1) {
				t.Errorf("%s: higher than its maximum %g away", name, off)
			}
		}
		// Half the height on both sides by bisection, to the last bit of x: 2e-13 of 1582 over 10.
		cross := func(sign float64) float64 {
			lo, hi := 0.0, 200.0
			for range 60 {
				if mid := (lo + hi) / 2; one(s, at+sign*mid, s.p...)/height > 0.5 {
					lo = mid
				} else {
					hi = mid
				}
			}
			return lo
		}
		if got, want := s.FWHM(s.p), cross(1)+cross(-1); !(math.Abs(got/want-1) <= 1e-12) {
			t.Errorf("%s: FWHM %.15g, by bisection %.15g", name, got, want)
		}
	}
}

func TestAreaIsTheIntegral(t *testing.T) {
	for _, s := range shapes {
		at, _ := s.Maximum(s.p)
		level, scale := 0.0, s.FWHM(s.p)/2
		if f, ok := s.Shape.(BreitWignerFano); ok {
			level = f.Level(s.p)
		}
		// Both sides together, so that the odd part of a Fano profile cancels; x = scale tan φ makes the range finite.
		want := quad.Fixed(func(phi float64) float64 {
			c, off := math.Cos(phi), scale*math.Tan(phi)
			return (one(s, at+off, s.p...) + one(s, at-off, s.p...) - 2*level) * scale / (c * c)
		}, 0, math.Pi/2, 300, nil, 0)
		if got := s.Area(s.p); !(math.Abs(got/want-1) <= 1e-8) {
			t.Errorf("%T%+v %g: area %.12g, integral %.12g", s.Shape, s.Shape, s.p, got, want)
		}
	}
}

func TestFanoIsTheCustomaryForm(t *testing.T) {
	for _, q := range []float64{-0.9, -0.2, 0, 0.05, 0.5} {
		p := []float64{400, 1582, 14, q}
		i0, xr, gamma := BreitWignerFano{}.Resonance(p)
		if want := 14 * math.Abs(1-q*q) / (1 + q*q); !(math.Abs(gamma-want) <= 1e-13) {
			t.Errorf("q = %g: width of the resonance %g, want %g", q, gamma, want)
		}
		for _, x := range []float64{0, 1500, 1575, 1582, 1583, 1600, 1e6} {
			s := 2 * (x - xr) / gamma
			want := i0 * (1 + q*s) * (1 + q*s) / (1 + s*s)
			if got := one(BreitWignerFano{}, x, p...); !(math.Abs(got-want) <= 1e-11*400) {
				t.Errorf("q = %g at %g: %g, want %g", q, x, got, want)
			}
		}
		// The level is approached as q·Γ/x.
		if got, want := one(BreitWignerFano{}, 1e9, p...), (BreitWignerFano{}).Level(p); !(math.Abs(got-want) <= 1e-4) {
			t.Errorf("q = %g: %g far away, level %g", q, got, want)
		}
	}
	if v := one(BreitWignerFano{}, 1582, 1, 1582, 14, 1); v == v {
		t.Errorf("q = 1 gives %g, but has no FWHM", v)
	}
}
