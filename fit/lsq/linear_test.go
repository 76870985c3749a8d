package lsq

import (
	"math"
	"testing"
)

func TestSharedWidthIsTheReducedModel(t *testing.T) {
	f := twoBands(true)
	tie := Shared(6, []int{2, 5})
	if tie.Free != 5 {
		t.Fatalf("%d free parameters, want 5", tie.Free)
	}
	q := []float64{80, 45, 10, 80, 70} // height, position, width, height, position
	s := NewGeneral(f.Rows, 6)
	res := s.Minimize(tie.Reduce(f), q, GeneralSettings{})
	covQ, covP, p := make([]float64, 25), make([]float64, 36), make([]float64, 6)
	if !s.Covariance(covQ) || res.End != Converged || res.Free != 5 {
		t.Fatalf("%v, %d free", res.Reason(), res.Free)
	}
	tie.Expand(p, q)
	tie.Covariance(covP, covQ)
	if p[2] != p[5] || covP[2*6+2] != covP[5*6+5] || covP[2*6+2] != covP[2*6+5] {
		t.Errorf("widths %g and %g, variances %g %g %g: want one parameter", p[2], p[5], covP[14], covP[35], covP[17])
	}

	// The same model written with five parameters, and derivatives of its own.
	reduced := Squares{Rows: f.Rows, Params: 5, Residuals: func(r, b []float64) {
		f.Residuals(r, []float64{b[0], b[1], b[2], b[3], b[4], b[2]})
	}}
	b := []float64{120, 35, 8, 50, 80}
	s2 := NewGeneral(f.Rows, 5)
	res2 := s2.Minimize(reduced, b, GeneralSettings{})
	cov := make([]float64, 25)
	if !s2.Covariance(cov) || res2.End != Converged {
		t.Fatal(res2.Reason())
	}
	for i := range b {
		se := math.Sqrt(cov[i*5+i])
		// Both end within the tolerance, 1e-9 standard errors of one direction, amplified by the correlations: less than tenfold here.
		if !(math.Abs(b[i]-q[i]) <= 1e-8*se) {
			t.Errorf("parameter %d: tied %.12g, reduced %.12g, differ by %g standard errors", i, q[i], b[i], (q[i]-b[i])/se)
		}
		// Numerical derivatives are right to 1e-11 of a column.
		if got := math.Sqrt(covQ[i*5+i]); !(math.Abs(got/se-1) <= 1e-9) {
			t.Errorf("standard error %d: tied %.12g, reduced %.12g", i, got, se)
		}
	}
}

func TestLinearFixesAndScales(t *testing.T) {
	// Two parameters of one free one: the second is three times the first less one; the third is fixed.
	l := Linear{Params: 3, Free: 1, C: []float64{1, 3, 0}, P0: []float64{0, -1, 7}}
	p := make([]float64, 3)
	l.Expand(p, []float64{2})
	if p[0] != 2 || p[1] != 5 || p[2] != 7 {
		t.Errorf("expanded to %v", p)
	}
	cov := make([]float64, 9)
	l.Covariance(cov, []float64{4})
	want := []float64{4, 12, 0, 12, 36, 0, 0, 0, 0}
	for i, v := range cov {
		if v != want[i] {
			t.Errorf("covariance %v, want %v", cov, want)
			break
		}
	}
	// r = (p0 - 1, p1 - 1, p2 - 7): the least squares in q are those of q - 1 and 3q - 2, whose normal equation is 10 q = 7.
	f := Squares{Rows: 3, Params: 3, Residuals: func(r, p []float64) { r[0], r[1], r[2] = p[0]-1, p[1]-1, p[2]-7 }}
	q := []float64{5}
	if res := NewGeneral(3, 3).Minimize(l.Reduce(f), q, GeneralSettings{}); res.End != Converged || !(math.Abs(q[0]-0.7) <= 1e-9) {
		t.Errorf("q = %.12g, want 0.7: %v", q[0], res.Reason())
	}
}
