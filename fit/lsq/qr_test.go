package lsq

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

func randomQR(r *rand.Rand, rows, n int) (q *qr, a *mat.Dense, b *mat.VecDense) {
	q = newQR(rows, n+2) // larger than needed
	a, b = mat.NewDense(rows, n, nil), mat.NewVecDense(rows, nil)
	for i := range rows {
		for j := range n {
			a.Set(i, j, r.NormFloat64()*math.Pow(10, float64(j%3)))
			q.a[i*n+j] = a.At(i, j)
		}
		b.SetVec(i, r.NormFloat64())
		q.b[i] = b.AtVec(i)
	}
	return q, a, b
}

// Damped steps are those of the stacked system, solved by an independent route.
func TestDampedStep(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 1))
	for _, size := range [][2]int{{3, 1}, {5, 5}, {40, 4}, {60, 11}} {
		rows, n := size[0], size[1]
		for _, lambda := range []float64{0, 1e-8, 1, 1e6} {
			q, a, b := randomQR(r, rows, n)
			q.factor(n)
			if q.rank != n {
				t.Fatalf("%d by %d: rank %d", rows, n, q.rank)
			}
			z := make([]float64, n)
			for i := range z {
				z[i] = math.NaN()
			}
			if lambda == 0 {
				q.undamped(z)
			} else {
				q.damped(z, lambda)
			}
			stacked, rhs := mat.NewDense(rows+n, n, nil), mat.NewVecDense(rows+n, nil)
			stacked.Slice(0, rows, 0, n).(*mat.Dense).Copy(a)
			for j := range n {
				stacked.Set(rows+j, j, math.Sqrt(lambda))
			}
			rhs.SliceVec(0, rows).(*mat.VecDense).ScaleVec(-1, b)
			var want mat.VecDense
			if err := want.SolveVec(stacked, rhs); err != nil {
				t.Fatal(err)
			}
			size := mat.Norm(&want, 2)
			for k, place := range q.pivot[:n] {
				// Rounding times the condition number, at most some 1e4 for these matrices.
				if !(math.Abs(z[k]-want.AtVec(place)) <= 1e-11*size) {
					t.Errorf("%d by %d, λ = %g: step %g, want %g", rows, n, lambda, z[k], want.AtVec(place))
				}
			}
		}
	}
}

func TestWithinHoldsTheRadius(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 1))
	inside := 0
	for range 300 {
		n := 1 + r.IntN(8)
		q, _, _ := randomQR(r, 20, n)
		if n > 2 && r.IntN(2) == 0 { // two equal columns
			for i := range 20 {
				q.a[i*n+1] = q.a[i*n]
			}
		}
		q.factor(n)
		z := make([]float64, n)
		q.undamped(z)
		full := norm(z)
		radius := full * math.Pow(10, 1-8*r.Float64())
		lambda := q.within(z, radius)
		switch length := norm(z); {
		case lambda == 0:
			inside++
			if !(length <= 1.1*radius) || length != full {
				t.Errorf("undamped step of length %g within %g", length, radius)
			}
		case !(math.Abs(length-radius) <= 0.1*radius):
			t.Errorf("n = %d, rank %d: length %g, radius %g, λ = %g", n, q.rank, length, radius, lambda)
		}
	}
	if inside == 0 || inside == 300 {
		t.Error("both cases must occur")
	}
}

func TestInverseAndRank(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 1))
	q, a, _ := randomQR(r, 30, 5)
	q.factor(5)
	c := make([]float64, 25)
	q.inverse(c)
	var normal, product mat.Dense
	normal.Mul(a.T(), a)
	product.Mul(&normal, mat.NewDense(5, 5, c))
	for i := range 5 {
		for j := range 5 {
			want := 0.0
			if i == j {
				want = 1
			}
			// Entries of A'A differ by 1e4 and its condition number is some 1e5.
			if !(math.Abs(product.At(i, j)-want) <= 1e-9) {
				t.Errorf("A'A times its inverse has %g at %d %d", product.At(i, j), i, j)
			}
		}
	}
	for _, test := range []struct {
		name   string
		change func(row []float64)
		want   int
	}{
		{"a tiny column is not a dependent one", func(row []float64) { row[2] *= 1e-30 }, 5},
		{"the sum of two others", func(row []float64) { row[4] = row[0] + 3*row[1] }, 4},
		{"nothing", func(row []float64) { row[3] = 0 }, 4},
		{"three of one kind", func(row []float64) { row[1], row[3] = 7*row[0], -row[0] }, 3},
	} {
		q, _, _ := randomQR(r, 30, 5)
		for i := range 30 {
			test.change(q.a[i*5 : i*5+5])
		}
		q.factor(5)
		if q.rank != test.want {
			t.Errorf("%s: rank %d, want %d", test.name, q.rank, test.want)
		}
	}
}
