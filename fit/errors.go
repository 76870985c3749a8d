package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// errors turns the covariance of the optimum into that of the estimates, and takes their bias out.
//
// Beyond counting noise these widen it: an excess of chi-square and the correlation of channels (both in phi already); misfit of
// a band, which is alike in neighbouring channels and so does not average out; what linear propagation misses where a band is
// weak; and the unknown place of a band that could not be located.
func (w *window) errors() {
	n := len(w.p)
	copy(w.raw, w.cov)
	w.debias()
	for k, found := range w.found {
		w.misfits[k] = misfit{}
		if found {
			w.misfits[k] = w.misfit(k)
		}
	}
	for i := range w.cov {
		w.cov[i] *= w.phi
	}
	w.phi = 1
	for k := range w.Bands {
		i := w.problem.Band(k)
		if !w.found[k] {
			// What is left of the height's square after its noise is the band's.
			h := max(0, w.values[i]*w.values[i]-w.cov[i*n+i])
			w.cov[i*n+i] += h * w.weak[k].miss * w.weak[k].miss
			continue
		}
		w.strengthen(k)
		w.misfits[k].addTo(w.cov)
	}
}

// strengthen widens the errors of a weak band's position and width.
//
// At z standard errors of height the scatter of a Lorentzian's position exceeds linear propagation by the factor 1 + 8/z² in
// variance, that of its width, with its errors' own scatter, by 1 + 25/z²: computed by simulation over z from 7 to 35, see
// TestCoverageOfWeakBands.
func (w *window) strengthen(k int) {
	i, n := w.problem.Band(k), len(w.p)
	z2 := w.values[i] * w.values[i] / w.cov[i*n+i]
	for j := line.Position; j < w.shapes[k].Len(); j++ {
		c := 25.
		if j == line.Position {
			c = 8
		}
		root := math.Sqrt(1 + c/z2)
		for m := range n { // row and column: the diagonal gets both
			w.cov[(i+j)*n+m] *= root
			w.cov[m*n+i+j] *= root
		}
	}
}

// modes is the number of functions that stand for misfit of a band.
const modes = 7

// A misfit is what the residuals tell of a band's shape.
type misfit struct {
	square   float64          // estimate of the square of the discrepancy, a fraction of the height; negative by chance
	se       float64          // its standard deviation if there is no misfit
	white    float64          // what the noise adds to it, which is taken off
	freedom  float64          // degrees of freedom of the chi-square that is nearest in distribution
	variance float64          // the discrepancy that is taken for true, counts²
	shift    [][modes]float64 // of the parameters per count of each mode
}

// significant tells whether chance does not explain the misfit: of spectra without any, one in 150 goes beyond three and a half
// standard deviations, as the sum of a few squares is skewed.
func (m *misfit) significant() bool { return m.square > 3.5*m.se }

// misfit looks for a departure of band k from its shape, and finds what it does to the parameters.
//
// The departure is taken as ε H times a random function of the distance from the position: piecewise linear with independent
// values of variance 1/(1+u²/4)² at u = -4.5, -3 ... 4.5 half widths, hence alike over a half width or two, as the misfit of
// a skewed band or of a Voigt profile is. Part of it is taken up by the parameters, which gives their errors; what is left in the
// residuals gives ε. It counts if chance does not explain it, and at least what the recipe or the run says counts.
func (w *window) misfit(k int) misfit {
	i, n := w.problem.Band(k), len(w.p)
	height, x0, half := w.p[i], w.p[i+line.Position], w.p[i+line.Width]/2
	columns := w.problem.Columns() // as debias left them: at the optimum
	b := w.along[k][:n]            // J'W times the modes, by free parameter
	clear(b)
	var g [modes][2]float64 // their products with themselves and with the next
	var q [modes]float64    // and with the residuals
	for c, x := range w.x {
		u := (x - x0) / half
		at := u/1.5 + modes/2
		if !(at > -1 && at < modes) || w.skip[c] {
			continue
		}
		root := w.problem.RootW[c]
		e := root / (1 + u*u/4)
		m := int(math.Floor(at))
		r := (w.problem.Y[c] - w.curve[c]) * root
		for side, psi := range [2]float64{e * (1 - at + float64(m)), e * (at - float64(m))} {
			o := m + side
			if o < 0 || o >= modes {
				continue
			}
			q[o] += psi * r
			g[o][0] += psi * psi
			for a, column := range columns {
				b[a][o] += column[c] * psi
			}
		}
		if m >= 0 && m+1 < modes {
			g[m][1] += e * e * (1 - at + float64(m)) * (at - float64(m))
		}
	}
	// shift = C B by parameter; what the parameters do not take up has covariance G - B'CB.
	shift := w.shift[k][:n]
	for r := range n {
		shift[r] = [modes]float64{}
		if !w.free[r] {
			continue
		}
		d := 0
		for c := range n {
			if w.free[c] {
				for o := range shift[r] {
					shift[r][o] += w.cov[r*n+c] * b[d][o]
				}
				d++
			}
		}
	}
	var trace, trace2, q2 float64
	for o := range modes {
		for l := range modes {
			v := 0.0
			if d := l - o; d == 0 {
				v = g[o][0]
			} else if d == 1 {
				v = g[o][1]
			} else if d == -1 {
				v = g[l][1]
			}
			d := 0
			for r := range n {
				if w.free[r] {
					v -= b[d][o] * shift[r][l]
					d++
				}
			}
			if o == l {
				trace += v
			}
			trace2 += v * v
		}
		q2 += q[o] * q[o]
	}
	m := misfit{shift: shift}
	if !(trace2 > 0) {
		return m
	}
	noise := w.pure * w.noise.inflation()
	m.white = noise * trace / trace2 / (height * height)
	m.square = q2/trace2/(height*height) - m.white
	m.se = noise * math.Sqrt(2/trace2) / (height * height)
	m.freedom = trace * trace / trace2
	known := w.discrepancy[k]
	m.variance = known * known * height * height
	// A band that is known to be of several lines is described by the single one that comes closest: what is asked for is that
	// line's width, as published tables give it, and the misfit is no error of it.
	if severalLines := w.makeups != nil && w.makeups.components > 1; m.significant() && !severalLines {
		m.variance = max(m.variance, m.square*height*height)
	}
	return m
}

// addTo adds what the misfit does to the parameters to their covariance.
func (m *misfit) addTo(cov []float64) {
	if m.variance == 0 {
		return
	}
	n := len(m.shift)
	for i := range m.shift {
		for j := range m.shift {
			s := 0.0
			for o := range modes {
				s += m.shift[i][o] * m.shift[j][o]
			}
			cov[i*n+j] += m.variance * s
		}
	}
}

// debias stores in values the parameters less their bias to second order: the model is curved in position and width, so that
// noise does not cancel in the mean over many pixels (J. R. Stat. Soc. B 33, 171 (1971), from memory).
//
// The bias is -½ C J'W t with t the trace of covariance times second derivatives, channel by channel. For each band it comes
// from second differences of the profile along the columns of a square root of the band's covariance, one standard error long.
func (w *window) debias() {
	copy(w.values, w.p)
	w.problem.Curve(w.curve, w.p)
	t := w.r
	clear(t)
	n := len(w.p)
	for k, found := range w.found {
		if !found {
			continue
		}
		i, m := w.problem.Band(k), w.shapes[k].Len()
		if !w.root(i, m) {
			continue
		}
		for c := range m {
			ok := true
			for r := c; r < m; r++ {
				d := w.half[r*m+c]
				ok = ok && w.p[i+r]+math.Abs(d) <= w.hi[i+r] && w.p[i+r]-math.Abs(d) >= w.lo[i+r]
			}
			if !ok { // a band at the end of its range
				clear(t)
				break
			}
			copy(w.before, w.p)
			for _, sign := range []float64{1, -1} {
				for r := c; r < m; r++ {
					w.before[i+r] = w.p[i+r] + sign*w.half[r*m+c]
				}
				w.problem.Profile(w.scratch, k, w.before)
				floats.Add(t, w.scratch)
			}
			w.problem.Profile(w.scratch, k, w.p)
			floats.AddScaled(t, -2, w.scratch)
		}
	}
	g := w.sums[:n]
	w.problem.Project(g, t, w.p, w.free)
	a := 0
	for i := range n {
		if !w.free[i] {
			continue
		}
		shift := 0.0
		b := 0
		for j := range n {
			if w.free[j] {
				shift += w.cov[i*n+j] * g[b]
				b++
			}
		}
		a++
		// The series has not converged where its second term is as large as that.
		if limit := w.se(i) / 2; !math.IsNaN(shift) {
			w.values[i] += max(-limit, min(limit, shift/2))
		}
	}
}

// root stores in half the Cholesky factor (row-major, lower triangle) of the covariance of m parameters from i on.
func (w *window) root(i, m int) bool {
	n := len(w.p)
	for r := range m {
		for c := range r + 1 {
			s := w.cov[(i+r)*n+i+c] * w.phi
			for k := range c {
				s -= w.half[r*m+k] * w.half[c*m+k]
			}
			if r == c {
				if !(s > 0) {
					return false
				}
				w.half[r*m+r] = math.Sqrt(s)
			} else {
				w.half[r*m+c] = s / w.half[c*m+c]
			}
		}
	}
	return true
}

// se returns the standard error of parameter i.
func (w *window) se(i int) float64 { return math.Sqrt(w.cov[i*len(w.p)+i] * w.phi) }

// product returns g'Ch with C the covariance of the parameters.
func (w *window) product(g, h []float64) (sum float64) {
	n := len(w.p)
	for i, gi := range g {
		if gi == 0 {
			continue
		}
		for j, hj := range h {
			if hj != 0 {
				sum += gi * hj * w.cov[i*n+j]
			}
		}
	}
	return sum * w.phi
}

// propagate returns the standard error of a function of the parameters with gradient g.
func (w *window) propagate(g []float64) float64 { return math.Sqrt(w.product(g, g)) }

// area returns the area of band k. Height and width are estimated together, and what their errors have in common is taken out
// of the product.
func (w *window) area(k int) float64 {
	i, shape := w.problem.Band(k), w.shapes[k]
	p := w.values[i : i+shape.Len()]
	area := shape.Area(p)
	if h := p[line.Height]; w.found[k] && h != 0 {
		area *= 1 - w.cov[(i+line.Height)*len(w.p)+i+line.Width]*w.phi/(h*p[line.Width])
	}
	return area
}
