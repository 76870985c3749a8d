package lsq

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/diff/fd"
	"gonum.org/v1/gonum/mat"
)

func axis(n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = 1200 + 1.2*float64(i)
	}
	return x
}

var truth = []float64{300, -12, 250, 1345, 26, 400, 1584, 14, 110, 1621, 11}

func problem(r *rand.Rand, noise float64) *Bands {
	b := NewBands(axis(459), 1, lorentzians(3)...)
	b.Curve(b.Y, truth)
	for i := range b.Y {
		b.Y[i] += noise * r.NormFloat64()
		b.RootW[i] = 1 / math.Max(noise, 1)
	}
	b.SetWeights()
	return b
}

func unbounded(n int) (lo, hi []float64, free []bool) {
	for range n {
		lo, hi, free = append(lo, math.Inf(-1)), append(hi, math.Inf(1)), append(free, true)
	}
	return lo, hi, free
}

func TestNormalIsTheGradient(t *testing.T) {
	b := problem(rand.New(rand.NewPCG(1, 1)), 20)
	p := []float64{310, -5, 200, 1348, 22, 420, 1583, 15, 80, 1620, 14}
	n := len(p)
	_, _, free := unbounded(n)
	free[6], free[10] = false, false
	a, g := make([]float64, n*n), make([]float64, n)
	b.Normal(a, g, p, free)
	sum := func(q []float64) float64 { // the sum of squares, written out
		s := 0.0
		curve := make([]float64, len(b.X))
		b.Curve(curve, q)
		for i, y := range b.Y {
			d := (y - curve[i]) * b.RootW[i]
			s += d * d
		}
		return s
	}
	want := fd.Gradient(nil, sum, p, &fd.Settings{Formula: fd.Central, Step: 1e-4})
	k := 0
	for i := range p {
		if !free[i] {
			continue
		}
		// The sum's gradient is -2 J'Wr. Central differences of step h lose h² of curvature and rounding over h.
		if got := -2 * g[k]; !(math.Abs(got-want[i]) <= 1e-5*math.Max(1, math.Abs(want[i]))) {
			t.Errorf("parameter %d: gradient %g, by differences %g", i, got, want[i])
		}
		k++
	}
}

func TestMinimizeFindsTheTruthWithoutNoise(t *testing.T) {
	b := problem(rand.New(rand.NewPCG(1, 1)), 0)
	p := []float64{0, 0, 100, 1335, 40, 500, 1586, 20, 50, 1618, 15}
	lo, hi, free := unbounded(len(p))
	res := NewSolver(len(p)).Minimize(b, p, lo, hi, free, len(b.X), Settings{Tolerance: 1e-10, Limit: 200})
	for i, v := range p {
		// Without noise the bottom of the valley is where the sum is lost in rounding, some 1e-8 of the parameters.
		if !(math.Abs(v-truth[i]) <= 1e-6*math.Max(1, math.Abs(truth[i]))) {
			t.Errorf("parameter %d is %.9g, want %g (%v after %d steps, sum %g)", i, v, truth[i], res.End, res.Iterations, res.Sum)
		}
	}
}

func TestCovarianceIsTheInverse(t *testing.T) {
	b := problem(rand.New(rand.NewPCG(2, 1)), 20)
	p := append([]float64(nil), truth...)
	n := len(p)
	lo, hi, free := unbounded(n)
	free[3] = false
	s := NewSolver(n)
	if res := s.Minimize(b, p, lo, hi, free, len(b.X), Settings{}); res.End != Converged {
		t.Fatal(res.End)
	}
	cov := make([]float64, n*n)
	if !s.Covariance(cov, n) {
		t.Fatal("singular")
	}
	a, g := make([]float64, n*n), make([]float64, n)
	b.Normal(a, g, p, free)
	m := n - 1
	normal := mat.NewSymDense(m, nil)
	for i := range m {
		for j := range i + 1 {
			normal.SetSym(i, j, a[i*m+j])
		}
	}
	var want mat.Dense
	if err := want.Inverse(normal); err != nil {
		t.Fatal(err)
	}
	at := func(i int) int { // free parameter -> parameter
		if i >= 3 {
			i++
		}
		return i
	}
	for i := range m {
		for j := range m {
			got := cov[at(i)*n+at(j)]
			// The matrix's condition number, some 1e6 with these units, times rounding.
			scale := math.Sqrt(want.At(i, i) * want.At(j, j))
			if !(math.Abs(got-want.At(i, j)) <= 1e-8*scale) {
				t.Errorf("covariance %d %d: %g, want %g", i, j, got, want.At(i, j))
			}
		}
	}
	for j := range n {
		if cov[3*n+j] != 0 || cov[j*n+3] != 0 {
			t.Errorf("a fixed parameter has covariance")
		}
	}
}

func TestMinimizeHoldsBounds(t *testing.T) {
	b := problem(rand.New(rand.NewPCG(3, 1)), 20)
	p := append([]float64(nil), truth...)
	lo, hi, free := unbounded(len(p))
	lo[7], hi[7] = 16, 40 // the G band is 14 wide
	res := NewSolver(len(p)).Minimize(b, p, lo, hi, free, len(b.X), Settings{})
	if res.End != Converged || p[7] != 16 {
		t.Errorf("width %g, want the bound 16; %v", p[7], res.End)
	}
	// With the width held, the others are at the optimum of the reduced problem.
	q := append([]float64(nil), p...)
	free[7] = false
	NewSolver(len(p)).Minimize(b, q, lo, hi, free, len(b.X), Settings{Tolerance: 1e-8})
	for i := range p {
		if !(math.Abs(p[i]-q[i]) <= 1e-3*math.Max(1, math.Abs(q[i]))) {
			t.Errorf("parameter %d: %g, with the width fixed %g", i, p[i], q[i])
		}
	}
}

func TestEndsByName(t *testing.T) {
	b := problem(rand.New(rand.NewPCG(4, 1)), 20)
	start := []float64{0, 0, 100, 1335, 40, 100, 1590, 25, 50, 1618, 15}
	lo, hi, free := unbounded(len(start))
	s := NewSolver(len(start))
	p := append([]float64(nil), start...)
	if res := s.Minimize(b, p, lo, hi, free, len(b.X), Settings{Limit: 2}); res.End != AtLimit || res.Iterations != 2 {
		t.Errorf("two steps allowed: %v after %d", res.End, res.Iterations)
	}
	for i := range b.RootW { // no weight: no parameter has influence
		b.RootW[i] = 0
	}
	b.SetWeights()
	p = append([]float64(nil), start...)
	if res := s.Minimize(b, p, lo, hi, free, len(b.X), Settings{}); res.End != Singular {
		t.Errorf("without weights: %v", res.End)
	}
}
