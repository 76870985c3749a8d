package lsq

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestGeneralHoldsBounds(t *testing.T) {
	f := twoBands(true)
	inf := math.Inf(1)
	f.Lower = []float64{0, -inf, 1, 0, -inf, 12} // the second width is 9
	f.Upper = []float64{inf, 39, 20, inf, inf, 30}
	residuals := f.Residuals
	f.Residuals = func(r, p []float64) {
		for j, v := range p {
			if v < f.Lower[j] || v > f.Upper[j] {
				t.Fatalf("asked at %v, outside the bounds", p)
			}
		}
		residuals(r, p)
	}
	for _, numeric := range []bool{false, true} {
		g := f
		if numeric {
			g.Jacobian = nil
		}
		p := append([]float64(nil), twoBandsStart...)
		s := NewGeneral(f.Rows, 6)
		res := s.Minimize(g, p, GeneralSettings{})
		if res.End != Converged || p[5] != 12 || p[1] != 39 || res.Free != 4 {
			t.Fatalf("numeric %v: %v after %d steps, %d free, at %v; want position 39 and width 12", numeric, res.Reason(), res.Iterations, res.Free, p)
		}
		cov := make([]float64, 36)
		if !s.Covariance(cov) || cov[5*6+5] != 0 || cov[5*6] != 0 || !(cov[0] > 0) {
			t.Errorf("covariance with held parameters: %v", cov)
		}
		// With both fixed, the others are at the optimum of the reduced model.
		fixed := Linear{Params: 6, Free: 4, P0: []float64{0, 39, 0, 0, 0, 12}, C: make([]float64, 24)}
		for k, j := range []int{0, 2, 3, 4} {
			fixed.C[4*j+k] = 1
		}
		q := []float64{100, 9, 60, 75}
		NewGeneral(f.Rows, 4).Minimize(fixed.Reduce(twoBands(true)), q, GeneralSettings{})
		for k, j := range []int{0, 2, 3, 4} {
			if se := math.Sqrt(cov[j*6+j]); !(math.Abs(p[j]-q[k]) <= 1e-8*se) {
				t.Errorf("parameter %d: %.12g with bounds, %.12g with the others fixed", j, p[j], q[k])
			}
		}
	}
}

func TestGeneralLeavesBounds(t *testing.T) {
	// The start is on a bound, and outside another, that the optimum has nothing to do with.
	f := twoBands(true)
	want := append([]float64(nil), twoBandsStart...)
	NewGeneral(f.Rows, 6).Minimize(f, want, GeneralSettings{})
	f.Lower = []float64{-100, 0, 2, -100, 0, 2}
	f.Upper = []float64{300, 120, 12, 300, 76, 40}
	p := []float64{80, 45, 12, 80, 99, 2}
	res := NewGeneral(f.Rows, 6).Minimize(f, p, GeneralSettings{})
	if res.End != Converged || res.Free != 6 {
		t.Fatalf("%v, %d free at %v", res.Reason(), res.Free, p)
	}
	for j, v := range p {
		if !(math.Abs(v-want[j]) <= 1e-8) { // standard errors here are 0.1 to 1
			t.Errorf("parameter %d: %.12g, without bounds %.12g", j, v, want[j])
		}
	}
}

// A linear problem with bounds has one optimum, told by its gradient: zero where a parameter is free, outward at a bound.
func TestGeneralBoundedLinear(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 1))
	const rows, n = 20, 6
	atBound := 0
	for range 200 {
		a, y := make([]float64, rows*n), make([]float64, rows)
		for i := range a {
			a[i] = r.NormFloat64()
			if i%n > 0 {
				a[i] += 2 * a[i-1] // columns that lean on each other
			}
		}
		lo, hi, p := make([]float64, n), make([]float64, n), make([]float64, n)
		for j := range p {
			lo[j], hi[j] = -r.Float64(), r.Float64()
			p[j] = lo[j] + (hi[j]-lo[j])*r.Float64()
		}
		for i := range y {
			y[i] = 5 * r.NormFloat64()
		}
		f := Squares{Rows: rows, Params: n, Lower: lo, Upper: hi,
			Residuals: func(r, p []float64) {
				for i := range r {
					r[i] = -y[i]
					for j, v := range p {
						r[i] += a[i*n+j] * v
					}
				}
			},
			Jacobian: func(j, p []float64) { copy(j, a) },
		}
		res := NewGeneral(rows, n).Minimize(f, p, GeneralSettings{})
		if res.End != Converged {
			t.Errorf("%v after %d steps", res.Reason(), res.Iterations)
		}
		resid := make([]float64, rows)
		f.Residuals(resid, p)
		for j, v := range p {
			g, size := 0.0, 0.0
			for i, e := range resid {
				g += a[i*n+j] * e
				size = math.Hypot(size, a[i*n+j])
			}
			g /= size * norm(resid) // cosine of the column with the residuals
			ok := math.Abs(g) <= 1e-8
			if v == lo[j] || v == hi[j] {
				atBound++
				ok = ok || v == lo[j] && g > 0 || v == hi[j] && g < 0
			}
			if !ok {
				t.Errorf("parameter %d at %g in [%g, %g] has gradient %g", j, v, lo[j], hi[j], g)
			}
		}
	}
	if atBound < 200 {
		t.Errorf("only %d parameters ended at a bound: the test asks nothing", atBound)
	}
}

// The first step of a linear problem with room to go: one parameter stops at its bound, the other is the best that goes with it.
func TestGeneralStepAtABound(t *testing.T) {
	f := Squares{Rows: 3, Params: 2, Upper: []float64{1, 10},
		Residuals: func(r, p []float64) { r[0], r[1], r[2] = p[0]+p[1]-6, p[1]-1, p[0]-4 },
		Jacobian:  func(j, p []float64) { copy(j, []float64{1, 1, 0, 1, 1, 0}) },
	}
	p := []float64{0.5, 0.5}
	NewGeneral(3, 2).Minimize(f, p, GeneralSettings{Reach: 1e6, Limit: 1, Searches: 1})
	if p[0] != 1 || !(math.Abs(p[1]-3) <= 1e-14) { // (1 + p1 - 6)² + (p1 - 1)² is least at 3
		t.Errorf("stepped to %v, want [1 3]", p)
	}
}

func TestGeneralAllFixed(t *testing.T) {
	f := twoBands(true)
	f.Lower, f.Upper = twoBandsStart, twoBandsStart
	p := make([]float64, 6)
	s := NewGeneral(f.Rows, 6)
	res := s.Minimize(f, p, GeneralSettings{})
	cov := make([]float64, 36)
	if res.End != Converged || res.Free != 0 || p[3] != twoBandsStart[3] || !s.Covariance(cov) || cov[0] != 0 {
		t.Errorf("%v, %d free at %v", res.Reason(), res.Free, p)
	}
}
