package clean

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

func TestInverseAgainstDense(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 9))
	for _, n := range []int{3, 4, 50, 200} {
		for _, lambda := range []float64{1e-2, 1e4, 1e9} {
			w, got := make([]float64, n), make([]float64, n)
			for i := range w {
				w[i], got[i] = 0.001+r.Float64(), math.NaN()
			}
			p := newPentadiagonal(n)
			p.fill(w, lambda)
			p.inverse(got)
			var c mat.Cholesky
			if !c.Factorize(dense(w, lambda)) {
				t.Fatal("the dense matrix is not positive definite")
			}
			var want mat.SymDense
			if err := c.InverseTo(&want); err != nil {
				t.Fatal(err)
			}
			for i, v := range got { // condition times rounding, as in the test of the solver
				if !(math.Abs(v/want.At(i, i)-1) <= 1e-13*c.Cond()) {
					t.Fatalf("n=%d λ=%g: element %d is %g, by the dense solver %g", n, lambda, i, v, want.At(i, i))
				}
			}
		}
	}
}

// TestBackgroundErrorsHold draws noise anew: the scatter of a stiff curve with weights that hardly change is within the bound,
// and the bound is not idle.
func TestBackgroundErrorsHold(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 9))
	const n, draws = 300, 400
	b := NewBackground(Baseline{Method: "arpls"}, n, 2)
	y, z, se, square, skip := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
	for i := range b.w {
		b.w[i] = 1
	}
	for range draws {
		for i := range y {
			y[i] = 3 * r.NormFloat64()
		}
		b.smooth(z, y)
		for i, v := range z {
			square[i] += v * v / draws
		}
	}
	b.Errors(se, 3)
	for i := range se {
		// The scatter of 400 draws is known to 3.5 %: five of these.
		if ratio := math.Sqrt(square[i]) / se[i]; !(ratio <= 1.18 && ratio > 0.65) {
			t.Fatalf("channel %d scatters by %.2f of its bound", i, ratio)
		}
	}
	b.Estimate(z, y, skip)
	if got := testing.AllocsPerRun(3, func() { b.Errors(se, 3) }); got != 0 {
		t.Errorf("%g allocations", got)
	}
	snip := NewBackground(Baseline{Method: "snip"}, n, 2)
	if snip.Errors(se, 3); !math.IsNaN(se[0]) {
		t.Error("snip claims an error")
	}
}
