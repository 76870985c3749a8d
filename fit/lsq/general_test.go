package lsq

import (
	"math"
	"math/rand/v2"
	"testing"
)

// twoBands is a sum of two Gaussians, each with height, position and width, over channels 0 to 119 with noise 1.
func twoBands(jacobian bool) Squares {
	const rows = 120
	r := rand.New(rand.NewPCG(5, 1))
	true6 := []float64{100, 40, 9, 60, 75, 9}
	y, d := make([]float64, rows), make([]float64, 6)
	value := func(x float64, b []float64) float64 {
		t := 0.0
		for k := 0; k < 6; k += 3 {
			u := (x - b[k+1]) / b[k+2]
			e := math.Exp(-u * u)
			d[k], d[k+1], d[k+2] = e, 2*b[k]*e*u/b[k+2], 2*b[k]*e*u*u/b[k+2]
			t += b[k] * e
		}
		return t
	}
	for i := range y {
		y[i] = value(float64(i), true6) + r.NormFloat64()
	}
	f := Squares{Rows: rows, Params: 6, Residuals: func(r, p []float64) {
		for i := range r {
			r[i] = value(float64(i), p) - y[i]
		}
	}}
	if jacobian {
		f.Jacobian = func(j, p []float64) {
			for i := range rows {
				value(float64(i), p)
				copy(j[6*i:6*i+6], d)
			}
		}
	}
	return f
}

var twoBandsStart = []float64{80, 45, 12, 80, 70, 7}

func TestGeneralSearchesAgain(t *testing.T) {
	for _, c := range readCertified(t) {
		if c.name != "mgh09" {
			continue
		}
		once, thrice := append([]float64(nil), c.starts[0]...), append([]float64(nil), c.starts[0]...)
		s := NewGeneral(len(c.y), 4)
		// With this reach the first step falls into a valley whose floor is at infinity.
		a := s.Minimize(c.squares(), once, GeneralSettings{Reach: 1, Searches: 1})
		b := s.Minimize(c.squares(), thrice, GeneralSettings{Reach: 1})
		if a.End != AtLimit || a.Searches != 1 || b.End != Converged || b.Searches < 2 || !(worst(thrice, c.want) >= 6) {
			t.Errorf("one search: %v, %d made: %v at %v", a.Reason(), b.Searches, b.Reason(), thrice)
		}
	}
	// Where none converges, the lowest sum comes back, with the parameters and the covariance that belong to it.
	f := twoBands(true)
	far := []float64{80, 20, 12, 80, 100, 7} // where long steps lead astray
	early := 0                               // lowest sums that were not the last search's
	for _, base := range []float64{0.01, 0.1, 1} {
		least, last := math.Inf(1), 0.0
		single := make([]float64, 6)
		for _, factor := range []float64{1, 0.1, 10} {
			p := append([]float64(nil), far...)
			res := NewGeneral(f.Rows, 6).Minimize(f, p, GeneralSettings{Reach: base * factor, Limit: 1, Searches: 1})
			if last = res.Sum; last < least {
				least = last
				copy(single, p)
			}
		}
		if least < last {
			early++
		}
		p := append([]float64(nil), far...)
		s := NewGeneral(f.Rows, 6)
		res := s.Minimize(f, p, GeneralSettings{Reach: base, Limit: 1})
		r := make([]float64, f.Rows)
		f.Residuals(r, p)
		if res.End != AtLimit || res.Searches != 3 || res.Iterations != 3 || res.Sum != least || squares(r) != least {
			t.Errorf("%v after %d searches, %d steps; sum %g, at the parameters %g, least %g",
				res.Reason(), res.Searches, res.Iterations, res.Sum, squares(r), least)
		}
		cov, want := make([]float64, 36), make([]float64, 36)
		s.Covariance(cov)
		s2 := NewGeneral(f.Rows, 6)
		s2.Minimize(f, single, GeneralSettings{Tolerance: 1e9}) // stays there
		s2.Covariance(want)
		for j := range p {
			if !(math.Abs(cov[7*j]/want[7*j]-1) <= 1e-9) {
				t.Errorf("variance %d: %g, at these parameters %g", j, cov[7*j], want[7*j])
			}
		}
	}
	if early == 0 {
		t.Error("the last search is always the best: the test asks less than it should")
	}
}

func TestGeneralEndsByName(t *testing.T) {
	f := twoBands(true)
	nan, inf := math.NaN(), math.Inf(1)
	with := func(change func(r, p []float64)) Squares {
		g := f
		g.Residuals = func(r, p []float64) {
			f.Residuals(r, p)
			change(r, p)
		}
		return g
	}
	blind := f // the derivatives point uphill
	blind.Jacobian = func(j, p []float64) {
		f.Jacobian(j, p)
		for i := range j {
			j[i] = -j[i]
		}
	}
	noJacobian := f
	noJacobian.Jacobian = func(j, p []float64) {
		f.Jacobian(j, p)
		j[3] = nan
	}
	perfect := Squares{Rows: 2, Params: 2, Residuals: func(r, p []float64) { r[0], r[1] = p[0]-3, 10*(p[1]-p[0]*p[0]) }}
	flat := Squares{Rows: 3, Params: 2, Residuals: func(r, p []float64) {
		for i := range r {
			r[i] = (p[0] + p[1]) - float64(i) // only the sum of the two matters
		}
	}}
	unused := Squares{Rows: 3, Params: 2, Residuals: func(r, p []float64) {
		for i := range r {
			r[i] = p[0] - float64(i)
		}
	}}
	few := Squares{Rows: 1, Params: 2, Residuals: func(r, p []float64) { r[0] = p[0]*p[0] + p[1] - 4 }}
	settled := Squares{Rows: 2, Params: 1,
		Residuals: func(r, p []float64) { r[0], r[1] = math.Exp(-p[0])-1, 2 },
		Jacobian:  func(j, p []float64) { j[0], j[1] = -math.Exp(-p[0]), 0 },
	}
	for _, test := range []struct {
		name  string
		f     Squares
		start []float64
		set   GeneralSettings
		want  End
	}{
		{"good start", f, twoBandsStart, GeneralSettings{}, Converged},
		{"NaN residual", with(func(r, p []float64) { r[7] = nan }), twoBandsStart, GeneralSettings{}, NotFinite},
		{"infinite residual", with(func(r, p []float64) { r[7] = -inf }), twoBandsStart, GeneralSettings{}, NotFinite},
		{"start at infinity", f, []float64{80, inf, 12, 80, 70, 7}, GeneralSettings{}, NotFinite},
		{"start at NaN", f, []float64{nan, 45, 12, 80, 70, 7}, GeneralSettings{}, NotFinite},
		{"NaN derivative", noJacobian, twoBandsStart, GeneralSettings{}, NotFinite},
		{"three steps", f, twoBandsStart, GeneralSettings{Limit: 3, Searches: 1}, AtLimit},
		{"uphill derivatives", blind, twoBandsStart, GeneralSettings{}, Stalled},
		{"two of one kind", flat, []float64{5, 3}, GeneralSettings{}, Singular},
		{"no influence", unused, []float64{5, 3}, GeneralSettings{}, Singular},
		{"fewer residuals than parameters", few, []float64{5, 3}, GeneralSettings{}, Singular},
		{"infinity with finite residuals", settled, []float64{inf}, GeneralSettings{}, NotFinite},
		{"zero residual", perfect, []float64{-1, 1}, GeneralSettings{}, Converged},
	} {
		p := append([]float64(nil), test.start...)
		s := NewGeneral(test.f.Rows, test.f.Params)
		res := s.Minimize(test.f, p, test.set)
		if res.End != test.want {
			t.Errorf("%s: %v (%v) after %d steps, want %v", test.name, res.End, res.Reason(), res.Iterations, test.want)
		}
		switch test.want {
		case NotFinite:
			for j, v := range p {
				if v != test.start[j] && !math.IsNaN(test.start[j]) {
					t.Errorf("%s: parameters %v, want those given", test.name, p)
					break
				}
			}
			cov := make([]float64, len(p)*len(p))
			if s.Covariance(cov) || !math.IsNaN(cov[0]) {
				t.Errorf("%s: covariance %v", test.name, cov)
			}
			if res.Iterations != 0 || !math.IsNaN(res.Remaining) {
				t.Errorf("%s: %d steps, %g remain", test.name, res.Iterations, res.Remaining)
			}
		case AtLimit:
			if res.Iterations != 3 {
				t.Errorf("%s: %d steps", test.name, res.Iterations)
			}
		case Singular:
			cov := make([]float64, len(p)*len(p))
			if s.Covariance(cov) || !math.IsNaN(cov[0]) || res.Rank != len(p)-1 {
				t.Errorf("%s: rank %d, covariance %v", test.name, res.Rank, cov)
			}
		}
	}
}

// Outside its domain the model is NaN: the search must turn back, not end.
func TestGeneralTurnsBackFromNaN(t *testing.T) {
	x := []float64{1, 2, 3, 4, 5, 6, 7, 8}
	f := Squares{Rows: len(x), Params: 2, Residuals: func(r, p []float64) {
		for i, v := range x {
			r[i] = p[0]*math.Log(v-p[1]) - 2*math.Log(v-0.5) - 0.01*float64(i%2) // NaN where p1 > 1
		}
	}}
	p := []float64{20, -3}
	res := NewGeneral(len(x), 2).Minimize(f, p, GeneralSettings{Reach: 100})
	// The alternating hundredth moves the parameters by about its own size.
	if res.End != Converged || !(math.Abs(p[0]-2) <= 0.02 && math.Abs(p[1]-0.5) <= 0.02) {
		t.Errorf("%v at %v, want about [2 0.5]", res.Reason(), p)
	}
}

// So it must where only the derivatives are NaN: here about the point that an undisturbed search steps to first.
func TestGeneralTurnsBackFromNaNDerivatives(t *testing.T) {
	f := twoBands(true)
	jacobian := f.Jacobian
	var asked []float64 // heights of the first band
	f.Jacobian = func(j, p []float64) {
		asked = append(asked, p[0])
		jacobian(j, p)
	}
	want := append([]float64(nil), twoBandsStart...)
	NewGeneral(f.Rows, 6).Minimize(f, want, GeneralSettings{})
	refused := 0
	f.Jacobian = func(j, p []float64) {
		jacobian(j, p)
		if math.Abs(p[0]-asked[1]) < 1e-6 {
			j[5] = math.NaN()
			refused++
		}
	}
	p := append([]float64(nil), twoBandsStart...)
	res := NewGeneral(f.Rows, 6).Minimize(f, p, GeneralSettings{})
	if res.End != Converged || refused != 1 {
		t.Errorf("%v, %d points without derivatives", res.Reason(), refused)
	}
	for j, v := range p {
		if !(math.Abs(v-want[j]) <= 1e-8) { // standard errors here are 0.1 to 1
			t.Errorf("parameter %d: %.12g, undisturbed %.12g", j, v, want[j])
		}
	}
}

// The way of the search must not depend on units: parameters in units 1e12 apart, residuals 1e-9 as large.
func TestGeneralIsFreeOfUnits(t *testing.T) {
	f := twoBands(true)
	p := append([]float64(nil), twoBandsStart...)
	s := NewGeneral(f.Rows, 6)
	res := s.Minimize(f, p, GeneralSettings{})
	unit := []float64{0x1p40, 0x1p-40, 1, 0x1p20, 0x1p-30, 0x1p10} // powers of two, so that rounding is the same
	const shrunk = 0x1p-30
	q, inner := make([]float64, 6), make([]float64, 6)
	scaled := Squares{Rows: f.Rows, Params: 6,
		Residuals: func(r, q []float64) {
			for j, v := range q {
				inner[j] = v / unit[j]
			}
			f.Residuals(r, inner)
			for i := range r {
				r[i] *= shrunk
			}
		},
		Jacobian: func(jac, q []float64) {
			for j, v := range q {
				inner[j] = v / unit[j]
			}
			f.Jacobian(jac, inner)
			for i := range jac {
				jac[i] *= shrunk / unit[i%6]
			}
		},
	}
	for j, v := range twoBandsStart {
		q[j] = v * unit[j]
	}
	s2 := NewGeneral(f.Rows, 6)
	res2 := s2.Minimize(scaled, q, GeneralSettings{})
	if res2.End != res.End || res2.Iterations != res.Iterations {
		t.Errorf("%v after %d steps, in other units %v after %d", res.End, res.Iterations, res2.End, res2.Iterations)
	}
	cov, cov2 := make([]float64, 36), make([]float64, 36)
	s.Covariance(cov)
	s2.Covariance(cov2)
	for j := range p {
		if !(math.Abs(q[j]/unit[j]/p[j]-1) <= 1e-12) {
			t.Errorf("parameter %d: %.15g, in other units %.15g", j, p[j], q[j]/unit[j])
		}
		if got, want := math.Sqrt(cov2[j*7])/unit[j]*shrunk, math.Sqrt(cov[j*7]); !(math.Abs(got/want-1) <= 1e-12) {
			t.Errorf("standard error %d: %.15g, in other units %.15g", j, want, got)
		}
	}
}

// One solver serves problems of different sizes one after the other; nothing of the last one may show.
func TestGeneralIsReusable(t *testing.T) {
	f := twoBands(true)
	want, got := append([]float64(nil), twoBandsStart...), append([]float64(nil), twoBandsStart...)
	NewGeneral(f.Rows, 6).Minimize(f, want, GeneralSettings{})
	s := NewGeneral(200, 9)
	for _, c := range readCertified(t) {
		if len(c.y) <= 200 {
			s.Minimize(c.squares(), append([]float64(nil), c.starts[0]...), GeneralSettings{})
		}
	}
	s.Minimize(f, got, GeneralSettings{})
	for j := range got {
		if got[j] != want[j] {
			t.Errorf("parameter %d: %v, by a new solver %v", j, got[j], want[j])
		}
	}
}

func TestGeneralAllocatesNothing(t *testing.T) {
	f := twoBands(true)
	f.Lower = []float64{0, 0, 1, 0, 0, 12}
	s := NewGeneral(f.Rows, 6)
	p := make([]float64, 6)
	cov := make([]float64, 36)
	if got := testing.AllocsPerRun(20, func() {
		copy(p, twoBandsStart)
		s.Minimize(f, p, GeneralSettings{})
		s.Covariance(cov)
	}); got != 0 {
		t.Errorf("%g allocations in a fit", got)
	}
}
