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
	least := math.Inf(1)
	single := make([]float64, 6)
	for _, reach := range []float64{1, 0.1, 10} {
		p := append([]float64(nil), twoBandsStart...)
		if res := NewGeneral(f.Rows, 6).Minimize(f, p, GeneralSettings{Reach: reach, Limit: 2, Searches: 1}); res.Sum < least {
			least = res.Sum
			copy(single, p)
		}
	}
	p := append([]float64(nil), twoBandsStart...)
	s := NewGeneral(f.Rows, 6)
	res := s.Minimize(f, p, GeneralSettings{Reach: 1, Limit: 2})
	r := make([]float64, f.Rows)
	f.Residuals(r, p)
	if res.End != AtLimit || res.Searches != 3 || res.Iterations != 6 || res.Sum != least || squares(r) != least {
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
