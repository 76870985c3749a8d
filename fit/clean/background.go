package clean

import (
	"fmt"
	"math"
)

// A Baseline says how the background of a whole spectrum is estimated, for strong luminescence. The zero value is none: the
// polynomials of the windows do, and their uncertainty is in the errors of the fit.
type Baseline struct {
	// Method: "" or "none"; "als", asymmetric least squares (Anal. Chem. 75, 3631 (2003), from memory); "arpls", its
	// reweighted variant (Analyst 140, 250 (2015)); "snip", peak clipping (Nucl. Instrum. Methods B 34, 396 (1988), from
	// memory).
	Method string `json:"method"`
	// Stiffness of the first two: the length, cm-1, below which the background does not follow; 0: 800 for als, 500 for arpls. It must be long against
	// the widest band's foot, since a background that follows a band takes from its height.
	Stiffness float64 `json:"stiffness_cm-1,omitempty"`
	// Asymmetry of als: the weight of what lies above the background; 0: 0.001.
	Asymmetry float64 `json:"asymmetry,omitempty"`
	// Clip of snip: half the width, cm-1, of what is clipped; 0: 90. It wants a parabola in the windows (background_order 2): its
	// curve runs under bands in a way that a line does not make good.
	Clip float64 `json:"clip_cm-1,omitempty"`
}

// Check returns an error that names what makes no sense.
func (b Baseline) Check() error {
	switch b.Method {
	case "", "none", "als", "arpls", "snip":
	default:
		return fmt.Errorf("method is %q; none, als, arpls or snip is possible", b.Method)
	}
	if !(b.Stiffness >= 0 && b.Stiffness <= 1e5) || !(b.Asymmetry >= 0 && b.Asymmetry < 0.5) || !(b.Clip >= 0 && b.Clip <= 1e4) {
		return fmt.Errorf("stiffness_cm-1 %g, asymmetry %g or clip_cm-1 %g is out of range", b.Stiffness, b.Asymmetry, b.Clip)
	}
	return nil
}

// None tells whether nothing is asked for.
func (b Baseline) None() bool { return b.Method == "" || b.Method == "none" }

// A Background estimates backgrounds in memory of its own. It allocates nothing per spectrum.
type Background struct {
	set     Baseline
	lambda  float64
	reach   int
	w, prev []float64
	band    pentadiagonal
	v, u    []float64
}

// NewBackground returns one for spectra of n channels, spacing cm-1 apart.
func NewBackground(set Baseline, n int, spacing float64) *Background {
	if set.Stiffness == 0 {
		set.Stiffness = 500
		if set.Method == "als" {
			set.Stiffness = 800
		}
	}
	if set.Asymmetry == 0 {
		set.Asymmetry = 0.001
	}
	if set.Clip == 0 {
		set.Clip = 90
	}
	f := func() []float64 { return make([]float64, n) }
	// A smoother of second differences passes half of a wave of length L channels where λ = (L/2π)⁴.
	l := set.Stiffness / spacing / (2 * math.Pi)
	return &Background{set: set, lambda: l * l * l * l, reach: max(1, int(set.Clip/spacing)), w: f(), prev: f(), v: f(), u: f(), band: newPentadiagonal(n)}
}

// Estimate stores the background of y in z. Channels with skip set are bridged. It panics where lengths differ.
func (b *Background) Estimate(z, y []float64, skip []bool) {
	if len(z) != len(b.w) || len(y) != len(b.w) || len(skip) != len(b.w) {
		panic("clean: spectra of another length than the background was made for")
	}
	switch b.set.Method {
	case "als":
		b.asymmetric(z, y, skip)
	case "arpls":
		b.reweighted(z, y, skip)
	case "snip":
		b.clip(z, y, skip)
	default:
		clear(z)
	}
}

// smooth stores in z the smooth curve nearest to y with the weights w. It is solved for what is left of a weighted straight line,
// which the penalty does not see: so the matrix's ridge draws to that line and not to zero.
func (b *Background) smooth(z, y []float64) {
	b.band.fill(b.w, b.lambda)
	var s, sx, sy, sxx, sxy float64
	middle := float64(len(y)-1) / 2
	for i, w := range b.w {
		if w > 0 {
			x := float64(i) - middle
			s, sx, sy, sxx, sxy = s+w, sx+w*x, sy+w*y[i], sxx+w*x*x, sxy+w*x*y[i]
		}
	}
	var level, slope float64
	if s > 0 {
		if det := sxx - sx*sx/s; det > 1e-9*sxx {
			slope = (sxy - sx*sy/s) / det
		}
		level = (sy - slope*sx) / s
	}
	for i, w := range b.w {
		z[i] = 0
		if w > 0 {
			z[i] = w * (y[i] - level - slope*(float64(i)-middle))
		}
	}
	b.band.solve(z)
	for i := range z {
		z[i] += level + slope*(float64(i)-middle)
	}
}

func (b *Background) start(skip []bool) {
	for i, s := range skip {
		b.w[i] = 1
		if s {
			b.w[i] = 0
		}
	}
}

// asymmetric is als: what lies above the curve hardly counts. It ends when the weights stay, after 30 rounds at most.
func (b *Background) asymmetric(z, y []float64, skip []bool) {
	b.start(skip)
	for range 30 {
		b.smooth(z, y)
		changed := false
		for i := range y {
			w := 1 - b.set.Asymmetry
			if y[i] > z[i] {
				w = b.set.Asymmetry
			}
			if skip[i] {
				w = 0
			}
			changed = changed || w != b.w[i]
			b.w[i] = w
		}
		if !changed {
			return
		}
	}
}

// reweighted is arpls: weights from a logistic function of the residual against the scatter below the curve. It ends when the
// weights change by less than a thousandth, after 50 rounds at most.
func (b *Background) reweighted(z, y []float64, skip []bool) {
	b.start(skip)
	for range 50 {
		b.smooth(z, y)
		var n, sum, square float64
		for i := range y {
			if d := y[i] - z[i]; d < 0 && !skip[i] {
				n++
				sum += d
				square += d * d
			}
		}
		if n < 3 {
			return
		}
		mean := sum / n
		sd := math.Sqrt(max(square/n-mean*mean, 0))
		if !(sd > 0) {
			return
		}
		copy(b.prev, b.w)
		var change, norm float64
		for i := range y {
			b.w[i] = 0
			if !skip[i] {
				b.w[i] = 1 / (1 + math.Exp(min(2*(y[i]-z[i]-(2*sd-mean))/sd, 700)))
			}
			d := b.w[i] - b.prev[i]
			change += d * d
			norm += b.prev[i] * b.prev[i]
		}
		if change <= 1e-6*norm {
			return
		}
	}
}

// clip is snip: in a scale that evens out peaks, each channel is lowered to the mean of two others, ever nearer; where the
// background is curved a mean of four, which is exact for parabolas, is the better bound (Nucl. Instrum. Methods A 401, 113
// (1997), from memory). Noise is averaged over a tenth of the reach before, or the result would run along its lower edge.
func (b *Background) clip(z, y []float64, skip []bool) {
	n := len(y)
	last := 0.0
	for i, s := range skip {
		if !s {
			last = y[i]
			break
		}
	}
	for i := range y { // holes hold the value before them
		if !skip[i] {
			last = y[i]
		}
		z[i] = last
	}
	half := b.reach / 20
	floor := math.Inf(1)
	for i := range n {
		low, high := max(0, i-half), min(n, i+half+1)
		sum := 0.0
		for _, v := range z[low:high] {
			sum += v
		}
		b.v[i] = sum / float64(high-low)
		floor = min(floor, b.v[i])
	}
	// The scale is no straight line: the mean is set to a fixed value, or the result would depend on the unit of counts.
	mean := 0.0
	for _, v := range b.v {
		mean += (v - floor) / float64(n)
	}
	unit := 1.0
	if mean > 0 {
		unit = mean / 2000
	}
	for i, v := range b.v {
		b.v[i] = math.Log(math.Log(math.Sqrt((v-floor)/unit+1)+1) + 1)
	}
	for p := b.reach; p >= 1; p-- {
		copy(b.u, b.v)
		for i := range n {
			low, high := max(0, i-p), min(n-1, i+p)
			m := (b.u[low] + b.u[high]) / 2
			if h := p / 2; h > 0 && i-p >= 0 && i+p < n {
				m = max(m, (4*(b.u[i-h]+b.u[i+h])-b.u[low]-b.u[high])/6)
			}
			if m < b.v[i] {
				b.v[i] = m
			}
		}
	}
	for i, v := range b.v {
		e := math.Exp(math.Exp(v)-1) - 1
		z[i] = (e*e-1)*unit + floor
	}
}

// ridge keeps the matrix positive definite where hardly a channel counts: some 50 times the rounding of its elements, and far
// below the least weight of als at any usual stiffness.
const ridge = 1e-14

// A pentadiagonal is a symmetric positive definite matrix W + λ D'D, D second differences, factored as L diag(d) L'.
type pentadiagonal struct{ d, a, b []float64 } // diagonal, first and second below it

func newPentadiagonal(n int) pentadiagonal {
	return pentadiagonal{make([]float64, n), make([]float64, n), make([]float64, n)}
}

// fill makes the matrix and factors it, in order of n operations.
func (m pentadiagonal) fill(w []float64, lambda float64) {
	n := len(w)
	for i := range n {
		// Rows of D that hold channel i: as first (1), middle (-2) and last (1).
		m.d[i], m.a[i], m.b[i] = w[i]+ridge*(1+lambda), 0, 0
		first, middle, last := i+2 < n, i >= 1 && i+1 < n, i >= 2
		if first {
			m.d[i] += lambda
			m.a[i] -= 2 * lambda
			m.b[i] += lambda
		}
		if middle {
			m.d[i] += 4 * lambda
			if i+1 < n {
				m.a[i] -= 2 * lambda
			}
		}
		if last {
			m.d[i] += lambda
		}
	}
	for i := range n {
		d := m.d[i]
		l1, l2 := m.a[i]/d, m.b[i]/d
		if i+1 < n {
			m.d[i+1] -= l1 * m.a[i]
			m.a[i+1] -= l1 * m.b[i]
		}
		if i+2 < n {
			m.d[i+2] -= l2 * m.b[i]
		}
		m.a[i], m.b[i] = l1, l2
	}
}

// solve overwrites x with the solution for the right-hand side x.
func (m pentadiagonal) solve(x []float64) {
	n := len(x)
	for i := range n {
		if i >= 1 {
			x[i] -= m.a[i-1] * x[i-1]
		}
		if i >= 2 {
			x[i] -= m.b[i-2] * x[i-2]
		}
	}
	for i := n - 1; i >= 0; i-- {
		x[i] /= m.d[i]
		if i+1 < n {
			x[i] -= m.a[i] * x[i+1]
		}
		if i+2 < n {
			x[i] -= m.b[i] * x[i+2]
		}
	}
}
