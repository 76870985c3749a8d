// Package lsq minimises weighted sums of squares. [Solver] is a Levenberg-Marquardt method with bounds and fixed parameters
// that works in memory of its own; [Bands] is the problem it is made for: a sum of bands over a polynomial background.
package lsq

import (
	"fmt"
	"math"
)

// A Problem is a weighted sum of squares, Σ w (y - model)².
type Problem interface {
	// Normal stores J'WJ in a (row-major, as many rows as there are free parameters, lower triangle) and J'W(y - model) in g,
	// in the order of the free parameters, and returns the sum of squares at p.
	Normal(a, g, p []float64, free []bool) float64
}

// An End says why a minimisation ended and what became of the parameters.
type End uint8

const (
	Converged End = iota + 1 // the remaining step is below tolerance: the parameters are a local optimum
	AtLimit                  // out of iterations: the parameters are the best so far
	Stalled                  // no step reduces the sum of squares any more, though the gradient says so: best so far
	Singular                 // some parameter has no influence: parameters as at the start of the step
)

func (e End) String() string {
	switch e {
	case Converged:
		return "converged"
	case AtLimit:
		return "out of iterations"
	case Stalled:
		return "stalled"
	case Singular:
		return "singular"
	case NotFinite:
		return "start not finite"
	}
	return fmt.Sprintf("End(%d)", uint8(e))
}

// A Result is the outcome of a minimisation. The parameters are changed in place.
type Result struct {
	Sum        float64 // weighted sum of squares at the end
	Free       int     // parameters that were free
	Iterations int
	End        End
}

// Settings steer a minimisation; the zero value works.
type Settings struct {
	// Tolerance is the length of the remaining step, in standard errors, below which the search ends; default 1e-4. Standard
	// errors are scaled by the residuals, so that neither the units nor the weights' scale matter.
	Tolerance float64
	// Limit is the largest number of steps; default 60.
	Limit int
}

// A Solver holds the scratch memory for problems with up to a given number of parameters. It is not safe for concurrent use.
type Solver struct {
	a, a2, l  []float64 // normal matrices here and at the trial point; factor
	g, g2     []float64
	step      []float64
	trial     []float64
	index     []int // free parameter -> parameter
	active    []int // free parameters that are not held by a bound
	freeCount int
}

// NewSolver returns a solver for up to n parameters.
func NewSolver(n int) *Solver {
	return &Solver{
		a: make([]float64, n*n), a2: make([]float64, n*n), l: make([]float64, n*n),
		g: make([]float64, n), g2: make([]float64, n), step: make([]float64, n), trial: make([]float64, n),
		index: make([]int, 0, n), active: make([]int, 0, n),
	}
}

// Minimize moves the free parameters of p, within the bounds lo and hi, to a local minimum of the problem's sum of squares.
// points is the number of terms in the sum that count (weight above zero); it scales the convergence test. The start is
// first put inside the bounds.
//
// Method: Levenberg-Marquardt, J. Soc. Ind. Appl. Math. 11, 431 (1963), https://doi.org/10.1137/0111030, with Marquardt's
// diagonal scaling; a parameter at a bound is held there while the gradient pushes it outwards.
func (s *Solver) Minimize(problem Problem, p, lo, hi []float64, free []bool, points int, set Settings) Result {
	tol := set.Tolerance
	if tol == 0 {
		tol = 1e-4
	}
	limit := set.Limit
	if limit == 0 {
		limit = 60
	}
	s.index = s.index[:0]
	for i, f := range free {
		p[i] = min(max(p[i], lo[i]), hi[i])
		if f {
			s.index = append(s.index, i)
		}
	}
	n := len(s.index)
	s.freeCount = n
	res := Result{Free: n, End: AtLimit}
	copy(s.trial, p)
	res.Sum = problem.Normal(s.a, s.g, p, free)
	lambda, grow := 1e-4, 2.0
	for ; res.Iterations < limit; res.Iterations++ {
		s.active = s.active[:0]
		for k, i := range s.index {
			if held := p[i] <= lo[i] && s.g[k] < 0 || p[i] >= hi[i] && s.g[k] > 0; !held {
				s.active = append(s.active, k)
			}
		}
		if !s.damped(n, lambda) {
			if lambda > 1e8 {
				res.End = Singular
				return res
			}
			lambda *= 100
			continue
		}
		// The predicted fall of the sum, in units of the variance per point, is the squared length of the step in standard errors.
		fall := 0.0
		for j, k := range s.active {
			fall += s.step[j] * (s.g[k] + lambda*s.a[k*n+k]*s.step[j])
		}
		done := fall*float64(max(points-n, 1)) <= tol*tol*res.Sum && lambda < 1
		for j, k := range s.active {
			i := s.index[k]
			s.trial[i] = min(max(p[i]+s.step[j], lo[i]), hi[i])
		}
		sum := problem.Normal(s.a2, s.g2, s.trial, free)
		if sum <= res.Sum {
			ratio := (res.Sum - sum) / fall
			copy(p, s.trial[:len(p)])
			s.a, s.a2, s.g, s.g2 = s.a2, s.a, s.g2, s.g
			res.Sum = sum
			shrink := 2*ratio - 1
			lambda = max(lambda*max(1.0/9, 1-shrink*shrink*shrink), 1e-12)
			grow = 2
			if done {
				res.Iterations++
				res.End = Converged
				return res
			}
			continue
		}
		copy(s.trial, p)
		if done { // the step is lost in rounding: nothing left to gain
			res.End = Converged
			return res
		}
		if math.IsNaN(sum) || lambda < 1e-6 {
			lambda = max(lambda, 1e-3) * 10
		}
		lambda *= grow
		grow *= 2
		if lambda > 1e14 {
			res.End = Stalled
			return res
		}
	}
	return res
}

// damped solves the damped normal equations over the active parameters into s.step.
func (s *Solver) damped(n int, lambda float64) bool {
	m := len(s.active)
	for j, k := range s.active {
		for i, c := range s.active[:j] {
			s.l[j*m+i] = s.a[k*n+c]
		}
		s.l[j*m+j] = s.a[k*n+k] * (1 + lambda)
		s.step[j] = s.g[k]
	}
	if !factor(s.l, m) {
		return false
	}
	solve(s.l, m, s.step[:m])
	return true
}

// Covariance stores in cov, row-major over all parameters of the last Minimize, the inverse of its normal matrix at the end;
// rows and columns of parameters that were fixed are zero. Multiply by the variance of unit weight. It reports false where the
// matrix has no inverse.
func (s *Solver) Covariance(cov []float64, params int) bool {
	n := s.freeCount
	for j := range n {
		copy(s.l[j*n:j*n+j+1], s.a[j*n:j*n+j+1])
	}
	clear(cov[:params*params])
	if !factor(s.l, n) {
		return false
	}
	for j := range n {
		e := s.step[:n]
		clear(e)
		e[j] = 1
		solve(s.l, n, e)
		for i, v := range e {
			cov[s.index[i]*params+s.index[j]] = v
		}
	}
	return true
}
