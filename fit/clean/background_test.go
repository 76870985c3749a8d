package clean

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// dense makes W + λD'D.
func dense(w []float64, lambda float64) *mat.SymDense {
	n := len(w)
	m := mat.NewSymDense(n, nil)
	for i, v := range w {
		m.SetSym(i, i, v+ridge*(1+lambda))
	}
	for r := range n - 2 {
		row := [3]float64{1, -2, 1}
		for a := range 3 {
			for b := a; b < 3; b++ {
				m.SetSym(r+a, r+b, m.At(r+a, r+b)+lambda*row[a]*row[b])
			}
		}
	}
	return m
}

func TestBandedAgainstDense(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for _, n := range []int{3, 4, 5, 50, 300} {
		for _, lambda := range []float64{1e-2, 1, 1e4, 1e9} {
			w, y := make([]float64, n), make([]float64, n)
			for i := range w {
				w[i], y[i] = r.Float64(), 100*r.NormFloat64()
				if i%7 == 3 {
					w[i] = 0
				}
			}
			p := newPentadiagonal(n)
			p.fill(w, lambda)
			x := append([]float64(nil), y...)
			p.solve(x)
			var c mat.Cholesky
			if !c.Factorize(dense(w, lambda)) {
				t.Fatal("the dense matrix is not positive definite")
			}
			var want mat.VecDense
			if err := c.SolveVecTo(&want, mat.NewVecDense(n, y)); err != nil && c.Cond() < 1e14 {
				t.Fatal(err)
			}
			// Both solve with an error of the condition number times rounding; for stiff curves that is what the two may differ by.
			limit := 1e-13 * c.Cond()
			size := mat.Norm(&want, math.Inf(1))
			for i := range x {
				if !(math.Abs(x[i]-want.AtVec(i)) <= limit*size) {
					t.Fatalf("n=%d λ=%g: channel %d is %g, by the dense solver %g (condition %.0e)", n, lambda, i, x[i], want.AtVec(i), c.Cond())
				}
			}
		}
	}
}

// TestBackgrounds has bands on a strongly curved background: it is found to a few per cent of the bands' height.
func TestBackgrounds(t *testing.T) {
	const n = 1100
	r := rand.New(rand.NewPCG(2, 1))
	y, truth, z, skip := make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
	for i := range y {
		x := 1200 + 1.5*float64(i)
		truth[i] = 500 + 4000*math.Exp(-math.Pow((x-2000)/900, 2))
		y[i] = truth[i]
		for _, b := range [][3]float64{{200, 1345, 26}, {400, 1582, 15}, {1000, 2675, 30}} {
			u := 2 * (x - b[1]) / b[2]
			y[i] += b[0] / (1 + u*u)
		}
		y[i] += math.Sqrt(y[i]) * r.NormFloat64()
	}
	for i := 300; i < 310; i++ {
		y[i], skip[i] = math.NaN(), true
	}
	for i, s := range skip {
		if s {
			y[i] = 0
		}
	}
	for _, set := range []Baseline{{Method: "als", Stiffness: 500, Asymmetry: 0.01}, {Method: "arpls"}, {Method: "snip"}} {
		b := NewBackground(set, n, 1.5)
		b.Estimate(z, y, skip)
		worst, sum := 0.0, 0.0
		for i := 60; i < n-60; i++ {
			d := z[i] - truth[i]
			worst = max(worst, math.Abs(d))
			sum += d / (n - 120)
		}
		t.Logf("%s: off by %.0f counts at most, %+.0f in the mean; noise %.0f", set.Method, worst, sum, math.Sqrt(4000))
		// What is left is slow, and the polynomials of the windows take it up; but a background must not follow the bands (1000).
		if !(worst <= 500) || !(math.Abs(sum) <= 150) {
			t.Errorf("%s: off by %.0f counts", set.Method, worst)
		}
		twice := make([]float64, n)
		b.Estimate(twice, y, skip)
		for i := range z {
			if z[i] != twice[i] {
				t.Fatalf("%s: the second estimate differs", set.Method)
			}
		}
		if got := testing.AllocsPerRun(3, func() { b.Estimate(z, y, skip) }); got != 0 {
			t.Errorf("%s: %g allocations per spectrum", set.Method, got)
		}
	}
}

// TestBackgroundScaleAndOffset: the unit of counts and a level added to all do not matter, also for very stiff curves.
func TestBackgroundScaleAndOffset(t *testing.T) {
	const n = 1000
	y, z, other, got, skip := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
	r := rand.New(rand.NewPCG(4, 1))
	for i := range y {
		y[i] = 1000 + 500*math.Sin(float64(i)/200) + 300/(1+math.Pow(float64(i-500)/10, 2)) + 20*r.NormFloat64()
	}
	for _, set := range []Baseline{{Method: "als"}, {Method: "arpls"}, {Method: "snip"}, {Method: "als", Stiffness: 1100}, {Method: "arpls", Stiffness: 1100}} {
		b := NewBackground(set, n, 1)
		b.Estimate(z, y, skip)
		for _, by := range [][2]float64{{1e-3, 0}, {1e3, 0}, {1, 1e5}} {
			for i := range y {
				other[i] = by[0]*y[i] + by[1]
			}
			b.Estimate(got, other, skip)
			for i := range z {
				// The equations' condition, up to 1e13 where als weighs 0.001, times rounding, against counts of 1e5: under a hundredth of
				// the noise, 0.2.
				if d := (got[i]-by[1])/by[0] - z[i]; !(math.Abs(d) <= 0.2) {
					t.Fatalf("%+v, times %g plus %g: channel %d is off by %g", set, by[0], by[1], i, d)
				}
			}
		}
	}
}

func TestBackgroundOfOddSpectra(t *testing.T) {
	for _, method := range []string{"als", "arpls", "snip", "none"} {
		for name, y := range map[string][]float64{"constant": {5, 5, 5, 5, 5, 5}, "zero": make([]float64, 8), "three": {1, 2, 3}, "negative": {-5, -4, -100, -6, -7, -5}} {
			z := make([]float64, len(y))
			for _, all := range []bool{false, true} {
				skip := make([]bool, len(y))
				for i := range skip {
					skip[i] = all
				}
				NewBackground(Baseline{Method: method}, len(y), 1).Estimate(z, y, skip)
				for i, v := range z {
					if !all && (math.IsNaN(v) || math.IsInf(v, 0)) {
						t.Errorf("%s, %s: channel %d is %g", method, name, i, v)
					}
				}
			}
		}
	}
	if (Baseline{Method: "magic"}).Check() == nil || (Baseline{Method: "als", Asymmetry: 0.7}).Check() == nil || (Baseline{Method: "snip"}).Check() != nil {
		t.Error("Check lets the wrong ones pass")
	}
}

// BenchmarkBackground compares the methods, and the banded solver with a dense one in the same run.
func BenchmarkBackground(b *testing.B) {
	const n = 1024
	y, z, skip := make([]float64, n), make([]float64, n), make([]bool, n)
	r := rand.New(rand.NewPCG(3, 1))
	for i := range y {
		y[i] = 1000 + 30*r.NormFloat64() + 500*math.Exp(-math.Pow(float64(i-400)/20, 2))
	}
	for _, method := range []string{"als", "arpls", "snip"} {
		b.Run("method="+method, func(b *testing.B) {
			g := NewBackground(Baseline{Method: method}, n, 1.5)
			b.ReportAllocs()
			for b.Loop() {
				g.Estimate(z, y, skip)
			}
		})
	}
	w := make([]float64, n)
	for i := range w {
		w[i] = 1
	}
	b.Run("solver=banded", func(b *testing.B) {
		p := newPentadiagonal(n)
		for b.Loop() {
			p.fill(w, 1e6)
			copy(z, y)
			p.solve(z)
		}
	})
	b.Run("solver=dense", func(b *testing.B) {
		m := dense(w, 1e6)
		var x mat.VecDense
		for b.Loop() {
			var c mat.Cholesky
			c.Factorize(m)
			if err := c.SolveVecTo(&x, mat.NewVecDense(n, y)); err != nil {
				b.Fatal(err)
			}
		}
	})
}
