package lsq

import (
	"math"
	"testing"
)

// A Lorentzian far from the origin: the scale of its position is its width, not its position. Derivatives in closed form.
func TestDerivatives(t *testing.T) {
	const rows = 300
	f := Squares{Rows: rows, Params: 4, Residuals: func(r, p []float64) {
		for i := range r {
			u := (1200 + 1.5*float64(i) - p[1]) / p[2]
			r[i] = p[0]/(1+4*u*u) + p[3]
		}
	}}
	inf := math.Inf(1)
	free := []float64{-inf, -inf, -inf, -inf}
	for _, test := range []struct {
		name     string
		p, lower []float64
		tol      float64 // relative to the column's length
	}{
		{"band", []float64{400, 1584, 14, 30}, free, 1e-12},
		{"no background", []float64{400, 1584, 14, 0}, free, 1e-12},
		{"narrow", []float64{400, 1350, 0.8, 5}, free, 1e-11}, // position known to rounding over a width of 1/1700 of it
		// One-sided differences lose every second order of the extrapolation.
		{"at bounds", []float64{400, 1584, 14, 0}, []float64{400, -inf, 14, 0}, 1e-11},
	} {
		f.Lower = test.lower
		jac := make([]float64, rows*4)
		for i := range jac {
			jac[i] = math.NaN()
		}
		NewDerivatives(rows, 4).Jacobian(jac, f, test.p)
		for j := range 4 {
			off, size := 0.0, 0.0
			for i := range rows {
				u := (1200 + 1.5*float64(i) - test.p[1]) / test.p[2]
				s := 1 / (1 + 4*u*u)
				want := []float64{s, 8 * test.p[0] * s * s * u / test.p[2], 8 * test.p[0] * s * s * u * u / test.p[2], 1}[j]
				off = math.Hypot(off, jac[i*4+j]-want)
				size = math.Hypot(size, want)
			}
			t.Logf("%s: derivatives by parameter %d off by %.1e", test.name, j, off/size)
			if !(off <= test.tol*size) {
				t.Errorf("%s: derivatives by parameter %d off by %g of their length", test.name, j, off/size)
			}
		}
	}
}

func TestDerivativesStayInsideBounds(t *testing.T) {
	lower, upper := []float64{2, 3, 1}, []float64{2, 3 + 1e-9, 5}
	f := Squares{Rows: 2, Params: 3, Lower: lower, Upper: upper, Residuals: func(r, p []float64) {
		for j, v := range p {
			if !(v >= lower[j] && v <= upper[j]) {
				t.Errorf("asked for %v", p)
			}
		}
		r[0], r[1] = p[1]*p[1], p[0]*math.Sqrt(p[2]-1)
	}}
	jac := make([]float64, 6)
	NewDerivatives(2, 3).Jacobian(jac, f, []float64{2, 3, 5})
	if jac[0] != 0 || jac[3] != 0 {
		t.Errorf("a parameter without room has derivatives %g and %g", jac[0], jac[3])
	}
	if !(math.Abs(jac[1]-6) <= 1e-5) { // over 1e-9 alone, with values of 9
		t.Errorf("derivative %g, want 6", jac[1])
	}
	if !(math.Abs(jac[5]-0.5) <= 1e-9) {
		t.Errorf("derivative %g, want 0.5", jac[5])
	}
}
