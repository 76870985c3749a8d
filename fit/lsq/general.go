package lsq

import (
	"math"
)

// Squares is any nonlinear least-squares problem: make Σ r(p)² small. A weight w enters as a factor √w of its residual.
// Parameters that are tied to each other are a [Linear]'s business.
type Squares struct {
	Rows   int // residuals
	Params int
	// Residuals stores r(p) in r. It keeps and changes neither slice's backing otherwise. A residual that is NaN or infinite
	// says that p is outside the model's domain: the search turns back.
	Residuals func(r, p []float64)
	// Jacobian stores ∂r_i/∂p_j in j, row-major Rows by Params. Where it is nil, derivatives are taken numerically, see
	// [Derivatives]; that costs some 30 evaluations per parameter.
	Jacobian func(j, p []float64)
	// Lower and Upper bound the parameters; nil means none, as do -Inf and +Inf. Residuals is never asked outside them.
	Lower, Upper []float64
}

// Ends that only [General] has.
const (
	NotFinite End = 16 + iota // residuals or derivatives at the start are NaN or infinite: parameters as given
)

// GeneralSettings steer [General]; the zero value works.
type GeneralSettings struct {
	// Tolerance is the length of the remaining step, in standard errors, below which the search ends; default 1e-9. It is
	// free of the units of parameters and residuals.
	Tolerance float64
	// Limit is the largest number of trial steps of one search; default 500.
	Limit int
	// Reach is the largest length of the first step relative to the parameters, both measured by their effect on the
	// residuals; default 10. Common practice is from 0.1, for starts far off, to 100.
	Reach float64
	// Searches is the largest number of searches from the start; default 3. One that does not converge is followed by
	// others with a tenth and ten times the reach, since it is the first steps that decide between valleys. The lowest sum
	// of squares counts.
	Searches int
}

// GeneralResult is the outcome of a minimisation by [General].
type GeneralResult struct {
	Result          // Free leaves out parameters that end at a bound
	Searches    int // from the same start
	Evaluations int // calls of Residuals, without those of numerical derivatives
	Jacobians   int
	Rank        int     // independent directions among the free parameters at the end
	Remaining   float64 // length of the step that remains, in standard errors; NaN where the start was not finite

	rounded bool // converged as far as rounding allows
}

// Reason says in words how the search ended.
func (r GeneralResult) Reason() string {
	switch {
	case r.End == Converged && r.rounded:
		return "converged as far as rounding allows"
	case r.End == NotFinite:
		return "residuals or derivatives at the start are not finite"
	case r.End == Singular:
		return "the data do not determine all parameters"
	}
	return r.End.String()
}

// General minimises [Squares] problems up to the size that it was made for. It trades speed for generality: QR factors of the
// Jacobian itself rather than normal equations, so that parameters come out right where the columns are almost dependent. Its
// memory is its own: an iteration with analytic derivatives allocates nothing. Not safe for concurrent use.
type General struct {
	rows, params int
	r, trial     []float64 // residuals here and at the trial point
	jac, jac2    []float64 // Jacobian here and at the trial point, row-major
	rhs          []float64 // residuals plus the effect of clipped steps
	scale        []float64 // largest column norm so far
	q            []float64 // trial point
	step         []float64
	start, best  []float64 // parameters of the search with the lowest sum so far
	z, inv       []float64 // scaled step; scratch of Covariance
	state        []uint8   // of each parameter
	free         []int     // parameters that move
	qr           *qr
	derivatives  *Derivatives
	last         Squares
	cut          bool // the last step ended at a bound
	usable       bool // there are residuals and derivatives for Covariance
}

const (
	moves   uint8 = iota
	held          // at a bound, the gradient pushes outwards
	clipped       // its step ends at a bound
)

// NewGeneral returns a solver for up to that many residuals and parameters.
func NewGeneral(rows, params int) *General {
	v := func(n int) []float64 { return make([]float64, n) }
	return &General{
		r: v(rows), trial: v(rows), jac: v(rows * params), jac2: v(rows * params), rhs: v(rows), scale: v(params),
		start: v(params), best: v(params), q: v(params), step: v(params), z: v(params), inv: v(params * params),
		state: make([]uint8, params), free: make([]int, 0, params), qr: newQR(rows, params),
	}
}

// Minimize moves p to a local minimum of the problem. The start is first put inside the bounds. It panics where slices do not
// have the problem's size, or the problem not the solver's.
//
// Method: Levenberg-Marquardt, J. Soc. Ind. Appl. Math. 11, 431 (1963), https://doi.org/10.1137/0111030, in the trust-region
// form of Numerical Analysis, Lect. Notes Math. 630, 105 (1978) [from memory]: each step minimises the linear model within a
// radius, lengths of parameters being scaled by the largest column norms so far. A parameter at a bound is held while the
// gradient pushes it outwards; one whose step would cross a bound stops there, and the others are solved again.
//
// The search has converged when the step that remains is shorter than the tolerance in standard errors (the measure is the
// part of the residuals in the span of the Jacobian over the rest, Technometrics 23, 179 (1981) [from memory]), or when that
// part is no more than the rounding of the residuals. Near the end, where rounding hides the fall of the sum of squares, steps
// are taken as long as they shorten what remains.
//
// Iterations, Evaluations and Jacobians count all searches.
func (s *General) Minimize(f Squares, p []float64, set GeneralSettings) GeneralResult {
	s.check(f, p)
	s.last = f
	if set.Tolerance == 0 {
		set.Tolerance = 1e-9
	}
	if set.Limit == 0 {
		set.Limit = 500
	}
	if set.Reach == 0 {
		set.Reach = 10
	}
	if set.Searches == 0 {
		set.Searches = 3
	}
	s.resize(f.Rows, f.Params)
	for j := range p {
		p[j] = min(max(p[j], f.lower(j)), f.upper(j))
	}
	copy(s.start, p)
	best := s.search(f, p, set)
	best.Searches = 1
	s.usable = best.End != NotFinite
	for _, reach := range []float64{0.1, 10} {
		if best.End == Converged || best.End == NotFinite || best.Searches >= set.Searches {
			break
		}
		copy(s.best, p)
		copy(p, s.start)
		other := set
		other.Reach *= reach
		res := s.search(f, p, other)
		res.Iterations += best.Iterations
		res.Evaluations += best.Evaluations
		res.Jacobians += best.Jacobians
		res.Searches = best.Searches + 1
		const same = 1e-9 // relative difference of two sums that are one optimum
		if res.Sum < best.Sum*(1-same) || res.End == Converged && res.Sum <= best.Sum*(1+same) {
			best = res
			continue
		}
		best.Iterations, best.Evaluations, best.Jacobians, best.Searches = res.Iterations, res.Evaluations, res.Jacobians, res.Searches
		copy(p, s.best)
		f.Residuals(s.r, p)
		s.jacobian(s.jac, p, &best)
		best.Evaluations++
		s.hold(f, p)
	}
	return best
}

// search is one search from p.
func (s *General) search(f Squares, p []float64, set GeneralSettings) GeneralResult {
	tol, limit, reach := set.Tolerance, set.Limit, set.Reach
	res := GeneralResult{Result: Result{Sum: math.NaN(), End: AtLimit}, Remaining: math.NaN()}
	f.Residuals(s.r, p)
	res.Evaluations = 1
	res.Sum = squares(s.r)
	if !finite(res.Sum) || !allFinite(p) || !s.jacobian(s.jac, p, &res) {
		res.End = NotFinite
		return res
	}
	clear(s.scale)
	s.rescale()
	radius := reach * s.size(p)
	if radius == 0 {
		radius = reach * math.Sqrt(res.Sum)
	}
	const (
		curved = 0.1  // standard errors from the end, above which the path's curvature matters
		faint  = 1e-9 // fall of the sum, relative, below which rounding hides whether a step is good
	)
	polish, polished, before := true, false, 0.0
	for {
		s.hold(f, p)
		s.factor(s.r)
		remaining := s.remaining(&res)
		if polished && !(remaining < before) { // no better: back to where the sum can judge
			s.swap(p)
			res.Sum = squares(s.r)
			polish, polished = false, false
			continue
		}
		polished = false
		if rounding := s.rounding(p); remaining <= tol || s.qr.head() <= rounding {
			res.rounded = remaining > tol
			return s.converged(res)
		}
		for {
			if res.Iterations >= limit {
				return res
			}
			res.Iterations++
			length, damping := s.bounded(f, p, radius)
			fall := s.predicted()
			if remaining > curved && length > 0 {
				res.Evaluations += s.bend(f, p, length, damping)
			}
			f.Residuals(s.trial, s.q)
			res.Evaluations++
			actual := difference(s.r, s.trial)
			ratio := -1.0
			switch {
			case !(fall > 0) || !finite(actual):
			case polish && damping == 0 && fall <= faint*res.Sum && math.Abs(actual) <= faint*res.Sum:
				ratio, polished, before = 1, true, remaining
			default:
				ratio = actual / fall
			}
			accepted := ratio > 1e-4 && s.jacobian(s.jac2, s.q, &res)
			if !accepted {
				ratio = min(ratio, 0) // also where derivatives do not exist
			}
			switch {
			case ratio < 0.25:
				radius = 0.25 * min(radius, length)
			case damping == 0 || ratio > 0.75:
				radius = max(radius, 2*length)
			}
			if accepted {
				break
			}
			if head := s.qr.head(); head*head <= 4*(math.Sqrt(res.Sum)*s.rounding(p)+epsilon*res.Sum) {
				res.rounded = true
				return s.converged(res)
			}
			if !(radius > epsilon*s.size(p)) {
				res.End = Stalled
				return res
			}
		}
		s.swap(p)
		res.Sum = squares(s.r)
		s.rescale()
	}
}

// converged names the end where no step is left.
func (s *General) converged(res GeneralResult) GeneralResult {
	res.End = Converged
	if s.qr.rank < s.qr.n {
		res.End = Singular
	}
	return res
}

// swap exchanges the point and the trial point, with residuals and derivatives.
func (s *General) swap(p []float64) {
	for j := range p {
		p[j], s.q[j] = s.q[j], p[j]
	}
	s.r, s.trial = s.trial, s.r
	s.jac, s.jac2 = s.jac2, s.jac
}

// remaining is the length of the step that remains, in standard errors: the factors are those of the point.
func (s *General) remaining(res *GeneralResult) float64 {
	res.Free, res.Rank = s.qr.n, s.qr.rank
	res.Remaining = 0
	if span := s.qr.head(); span > 0 {
		res.Remaining = span / math.Sqrt(res.Sum/float64(max(s.rows-s.qr.rank, 1)))
	}
	return res.Remaining
}

// check panics where sizes do not fit: a caller's bug.
func (s *General) check(f Squares, p []float64) {
	switch {
	case len(p) != f.Params || f.Lower != nil && len(f.Lower) != f.Params || f.Upper != nil && len(f.Upper) != f.Params:
		panic("lsq: parameters or bounds not of the problem's length")
	case f.Rows > cap(s.r) || f.Params > cap(s.scale):
		panic("lsq: problem larger than its solver")
	}
	for j := range p {
		if !(f.lower(j) <= f.upper(j)) {
			panic("lsq: lower bound above upper bound")
		}
	}
}

// resize cuts the memory to the problem's size.
func (s *General) resize(rows, params int) {
	s.rows, s.params = rows, params
	s.r, s.trial, s.rhs = s.r[:rows], s.trial[:rows], s.rhs[:rows]
	s.jac, s.jac2 = s.jac[:rows*params], s.jac2[:rows*params]
	s.scale, s.q, s.step, s.state = s.scale[:params], s.q[:params], s.step[:params], s.state[:params]
	s.start, s.best = s.start[:params], s.best[:params]
}

func (f *Squares) lower(j int) float64 {
	if f.Lower == nil {
		return math.Inf(-1)
	}
	return f.Lower[j]
}

func (f *Squares) upper(j int) float64 {
	if f.Upper == nil {
		return math.Inf(1)
	}
	return f.Upper[j]
}

// jacobian stores the derivatives at p and reports whether all are finite.
func (s *General) jacobian(jac, p []float64, res *GeneralResult) bool {
	res.Jacobians++
	if s.last.Jacobian != nil {
		s.last.Jacobian(jac, p)
	} else {
		if s.derivatives == nil {
			s.derivatives = NewDerivatives(cap(s.r), cap(s.scale))
		}
		s.derivatives.Jacobian(jac, s.last, p)
	}
	return allFinite(jac)
}

// difference is the sum of squares of a less that of b, without the cancellation of two large sums.
func difference(a, b []float64) float64 {
	t := 0.0
	for i, v := range a {
		t += (v - b[i]) * (v + b[i])
	}
	return t
}

func squares(r []float64) float64 {
	t := 0.0
	for _, v := range r {
		t += v * v
	}
	return t
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func allFinite(v []float64) bool {
	for _, x := range v {
		if !finite(x) {
			return false
		}
	}
	return true
}

// Covariance stores in cov, row-major Params by Params of the last Minimize, the inverse of J'J at its end; rows and columns
// of parameters that are held at a bound are zero. Multiply by the variance of a residual, 1 where the residuals are in units
// of their standard deviation, else Sum over the number of residuals less Free. Where the data do not determine all parameters, or
// the start was not finite, it stores NaN and reports false.
func (s *General) Covariance(cov []float64) bool {
	n := s.params
	cov = cov[:n*n]
	if s.usable {
		s.factor(s.r)
	}
	if !s.usable || s.qr.rank < s.qr.n {
		for i := range cov {
			cov[i] = math.NaN()
		}
		return false
	}
	clear(cov)
	m := s.qr.n
	inv := s.inv[:m*m]
	s.qr.inverse(inv)
	for a, i := range s.free {
		for b, j := range s.free {
			cov[i*n+j] = inv[a*m+b] / s.scaleOf(i) / s.scaleOf(j)
		}
	}
	return true
}
