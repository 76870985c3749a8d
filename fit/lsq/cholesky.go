package lsq

import "math"

// The systems here have at most a few dozen unknowns and are solved some millions of times, so they are factored in place, in
// memory that the caller owns.

// factor replaces the lower triangle of the symmetric n by n matrix a (row-major) with its Cholesky factor. It reports
// whether a is positive definite to working precision.
func factor(a []float64, n int) bool {
	for j := range n {
		rj := a[j*n : j*n+j+1]
		d := rj[j]
		for _, v := range rj[:j] {
			d -= v * v
		}
		if !(d > 1e-14*math.Abs(rj[j])) { // NaN fails too
			return false
		}
		d = math.Sqrt(d)
		rj[j] = d
		for i := j + 1; i < n; i++ {
			ri := a[i*n : i*n+j+1]
			s := ri[j]
			for k, v := range rj[:j] {
				s -= ri[k] * v
			}
			ri[j] = s / d
		}
	}
	return true
}

// solve overwrites b with the solution of A x = b, where l is A's factor.
func solve(l []float64, n int, b []float64) {
	for i := range n {
		s := b[i]
		for k := range i {
			s -= l[i*n+k] * b[k]
		}
		b[i] = s / l[i*n+i]
	}
	for i := n - 1; i >= 0; i-- {
		s := b[i]
		for k := i + 1; k < n; k++ {
			s -= l[k*n+i] * b[k]
		}
		b[i] = s / l[i*n+i]
	}
}
