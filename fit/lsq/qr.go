package lsq

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
)

// qr is a column-pivoted Householder factorisation A P = Q R of up to rows by cols numbers with the vector Q'b, and the
// damped systems that a trust region asks for. All memory is its own.
type qr struct {
	a    []float64 // row-major, rows by n: the matrix, then R and the reflectors
	b    []float64 // the right-hand side, then Q'b
	norm []float64 // of A's columns
	n    int       // columns in use
	rank int       // leading columns of A P that are independent to working precision

	pivot []int // column of A at each place of A P
	tau   []float64
	work  []float64
	s     []float64 // R with the damping rotated in, n by n
	w     []float64 // its right-hand side; scratch
	extra []float64 // the row that is being rotated in
	v     []float64 // scratch
	other []float64 // a second right-hand side
	rows  int
}

func newQR(rows, cols int) *qr {
	rows = max(rows, cols) // padded with zeros, so that R is always square
	return &qr{
		rows: rows, other: make([]float64, rows),
		a: make([]float64, rows*cols), b: make([]float64, rows), norm: make([]float64, cols),
		pivot: make([]int, cols), tau: make([]float64, cols), work: make([]float64, max(2*cols+(cols+1)*32, rows)),
		s: make([]float64, cols*cols), w: make([]float64, cols), extra: make([]float64, cols), v: make([]float64, cols),
	}
}

// factor takes the n columns in a, a row-major rows by n matrix, and b. Whether a column is independent of those before it
// is asked relative to its own length, so that the answer does not depend on units.
func (q *qr) factor(n int) {
	q.n, q.rank = n, 0
	if n == 0 {
		return
	}
	a := blas64.General{Rows: q.rows, Cols: n, Stride: n, Data: q.a[:q.rows*n]}
	for j := range n {
		q.norm[j] = blas64.Nrm2(blas64.Vector{N: q.rows, Inc: n, Data: q.a[j:]})
		q.pivot[j] = -1 // free to move
	}
	lapack64.Geqp3(a, q.pivot[:n], q.tau[:n], q.work, len(q.work))
	lapack64.Ormqr(blas.Left, blas.Trans, a, q.tau[:n], blas64.General{Rows: q.rows, Cols: 1, Stride: 1, Data: q.b}, q.work, len(q.work))
	tol := 4 * epsilon * float64(q.rows) // rounding that a reflection of so many rows may leave
	for j := range n {
		if !(math.Abs(q.a[j*n+j]) > tol*q.norm[q.pivot[j]]) {
			break
		}
		q.rank++
	}
}

// head is the length of Q'b over the independent columns: how much of b lies in the span of A.
func (q *qr) head() float64 {
	s := 0.0
	for _, v := range q.b[:q.rank] {
		s += v * v
	}
	return math.Sqrt(s)
}

// gradient is the length of A'b.
func (q *qr) gradient() float64 {
	s := 0.0
	for j := range q.n {
		g := 0.0
		for i := range j + 1 {
			g += q.a[i*q.n+j] * q.b[i]
		}
		s += g * g
	}
	return math.Sqrt(s)
}

// undamped stores in z, in the order of A P, the step that minimises |A z + b|; components of dependent columns are zero.
func (q *qr) undamped(z []float64) {
	for i := range z {
		z[i] = 0
		if i < q.rank {
			z[i] = -q.b[i]
		}
	}
	backward(q.a, q.n, z[:q.rank])
}

// damped stores in z, in the order of A P, the step that minimises |A z + b|² + λ|z|², λ > 0, and leaves the factor in q.s.
func (q *qr) damped(z []float64, lambda float64) {
	n := q.n
	for i := range n {
		copy(q.s[i*n+i:i*n+n], q.a[i*n+i:i*n+n])
		q.w[i] = q.b[i]
	}
	for j := range n {
		e := q.extra[:n]
		clear(e[j:])
		e[j] = math.Sqrt(lambda)
		be := 0.0
		for k := j; k < n; k++ {
			if e[k] == 0 {
				continue
			}
			r := math.Hypot(q.s[k*n+k], e[k])
			c, s := q.s[k*n+k]/r, e[k]/r
			for i := k; i < n; i++ {
				q.s[k*n+i], e[i] = c*q.s[k*n+i]+s*e[i], c*e[i]-s*q.s[k*n+i]
			}
			q.w[k], be = c*q.w[k]+s*be, c*be-s*q.w[k]
		}
	}
	for i := range z {
		z[i] = -q.w[i]
	}
	backward(q.s, n, z)
}

// along stores in z what undamped and damped would for another right-hand side.
func (q *qr) along(z, b []float64, lambda float64) {
	q.b, q.other = q.other, q.b
	copy(q.b, b)
	clear(q.b[len(b):])
	a := blas64.General{Rows: q.rows, Cols: q.n, Stride: q.n, Data: q.a[:q.rows*q.n]}
	lapack64.Ormqr(blas.Left, blas.Trans, a, q.tau[:q.n], blas64.General{Rows: q.rows, Cols: 1, Stride: 1, Data: q.b}, q.work, len(q.work))
	if lambda == 0 {
		q.undamped(z)
	} else {
		q.damped(z, lambda)
	}
	q.b, q.other = q.other, q.b
}

// within stores in z, in the order of A P, the step of a length at most about radius that minimises |A z + b|, and returns
// its damping. Lengths within 10 % of the radius will do.
//
// Method: Numerical Analysis, Lect. Notes Math. 630, 105 (1978), section 5 [from memory]: Newton's method on
// 1/|z(λ)| with bounds that make sure it ends.
func (q *qr) within(z []float64, radius float64) float64 {
	const near = 0.1
	q.undamped(z)
	length := norm(z)
	if length <= (1+near)*radius {
		return 0
	}
	lo, hi := 0.0, q.gradient()/radius
	if q.rank == q.n {
		lo = (length - radius) / radius / q.slope(q.a, z, length)
	}
	lambda := min(max(0, lo), hi)
	if lambda == 0 {
		lambda = max(hi/length*radius, epsilon*hi)
	}
	excess := length - radius
	for range 10 {
		if lambda == 0 {
			lambda = max(math.SmallestNonzeroFloat64, 0.001*hi)
		}
		q.damped(z, lambda)
		length = norm(z)
		before := excess
		excess = length - radius
		if math.Abs(excess) <= near*radius || lo == 0 && excess <= before && before < 0 {
			break
		}
		if excess > 0 {
			lo = max(lo, lambda)
		} else {
			hi = min(hi, lambda)
		}
		lambda = max(lo, lambda+excess/radius/q.slope(q.s, z, length))
	}
	return lambda
}

// slope is |S⁻ᵀz|²/|z|² for the upper triangle S.
func (q *qr) slope(s, z []float64, length float64) float64 {
	v := q.v[:q.n]
	for i := range v {
		v[i] = z[i] / length
	}
	forward(s, q.n, v)
	l := norm(v)
	return l * l
}

// inverse stores in c, n by n in A's own order, the inverse of A'A. It needs full rank.
func (q *qr) inverse(c []float64) {
	n := q.n
	for j := range n { // columns of R⁻¹ into s
		v := q.v[:j+1]
		clear(v)
		v[j] = 1
		for i := j; i >= 0; i-- {
			for k := i + 1; k <= j; k++ {
				v[i] -= q.a[i*n+k] * v[k]
			}
			v[i] /= q.a[i*n+i]
		}
		for i := range n {
			q.s[i*n+j] = 0
			if i <= j {
				q.s[i*n+j] = v[i]
			}
		}
	}
	for i := range n {
		for j := range n {
			t := 0.0
			for k := max(i, j); k < n; k++ {
				t += q.s[i*n+k] * q.s[j*n+k]
			}
			c[q.pivot[i]*n+q.pivot[j]] = t
		}
	}
}

// backward overwrites the leading part z of the unknowns with the solution of U z = z, U upper triangular with that stride.
func backward(u []float64, stride int, z []float64) {
	for i := len(z) - 1; i >= 0; i-- {
		for k := i + 1; k < len(z); k++ {
			z[i] -= u[i*stride+k] * z[k]
		}
		z[i] /= u[i*stride+i]
	}
}

// forward overwrites z with the solution of U'z = z.
func forward(u []float64, stride int, z []float64) {
	for i := range z {
		for k := range i {
			z[i] -= u[k*stride+i] * z[k]
		}
		z[i] /= u[i*stride+i]
	}
}

// norm is the length of z, with no overflow in between.
func norm(z []float64) float64 { return blas64.Nrm2(blas64.Vector{N: len(z), Inc: 1, Data: z}) }

const epsilon = 1.0 / (1 << 52)
