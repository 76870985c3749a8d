package fit

import (
	"math"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
)

// makeups decides whether a band is described best by one line, two, or four with a common width.
//
// Each description is fitted to the same channels with the same weights, those of the noise alone. Between descriptions decides
// AICc (Biometrika 76, 297 (1989)). A misfit proves further lines only as far as it exceeds what the shape may be wrong
// by: with a discrepancy in the direction of the misfit, of variance ε² times the band's own weighted square, the fall Δ of
// chi-square counts as Δ/(1 + ε² Σ w b²), from the inverse of that covariance. So evidence does not grow without bound as
// counts do.
type makeups struct {
	components int     // 1, 2 or 4
	evidence   float64 // by how much the AICc of the next best description is higher
	chi2       float64 // of the chosen description, reduced

	tries  []*try
	solver *lsq.Solver
	band   []float64
	single [line.Len]float64
}

// A try is one description.
type try struct {
	n        int
	problem  *lsq.Multiplet
	offsets  []float64 // start: positions against the single line's, in units of its width
	heights  []float64 // and heights against its height
	width    float64   // and the common width
	p        []float64
	lo, hi   []float64
	free     []bool
	evidence float64 // AICc
	chi2     float64 // reduced
}

// makeupDiscrepancy is the ε of makeups: how far, as a fraction of the height, one line may differ from its shape before
// further ones are believed in. Chosen between the misfit of a single layer with the slight skew that suspended ones show (Nano
// Lett. 9, 346 (2009)) and that of the four lines of a bilayer.
const makeupDiscrepancy = 0.015

// convincing is the AICc difference from which the simpler description has little support, 4 to 7 "considerably less" on the
// published scale (Sociol. Methods Res. 33, 261 (2004)).
const convincing = 7

// promising is the fall of chi-square from one line to two below which four are not tried: of single layers, four in five are not
// worth it, and of bilayers whose four lines would convince none (TestMakeup).
const promising = 3

func newMakeups(w *windowPlan) *makeups {
	m := &makeups{band: make([]float64, len(w.x))}
	most := 0
	// Starts: two lines side by side, each too narrow alone; the four of a bilayer, offsets and heights as published for green
	// light over the width 51.7 of the single line (Phys. Rev. Lett. 97, 187401 (2006); Small 6, 195 (2010), from memory).
	for _, t := range []*try{
		{n: 1, offsets: []float64{0}, heights: []float64{1}, width: 1},
		{n: 2, offsets: []float64{-0.25, 0.25}, heights: []float64{0.6, 0.6}, width: 0.7},
		{n: 4, offsets: []float64{-0.85, -0.19, 0.19, 0.48}, heights: []float64{0.2, 0.65, 0.7, 0.25}, width: 0.46},
	} {
		t.problem = lsq.NewMultiplet(w.x, w.basis, t.n, w.shapes[0])
		n := t.problem.Len()
		most = max(most, n)
		t.p, t.lo, t.hi, t.free = make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
		for i := range n {
			t.lo[i], t.hi[i], t.free[i] = math.Inf(-1), math.Inf(1), true
		}
		for k := range t.n {
			i := t.problem.Component(k)
			t.lo[i] = 0 // lines add light
			t.lo[i+1], t.hi[i+1] = w.From, w.To
		}
		b := w.Bands[0]
		t.lo[t.problem.Width()], t.hi[t.problem.Width()] = b.Widths[0], b.Widths[1]
		m.tries = append(m.tries, t)
	}
	m.solver = lsq.NewSolver(most)
	return m
}

// choose compares the descriptions of the window's band, which is found.
func (m *makeups) choose(w *window) {
	points := w.rootWeights(m.tries[0].problem.RootW)
	scale := w.makeupScale()
	best := m.tries[0]
	var chi1, norm float64
	hope := math.Inf(1) // what the description before has gained
	for _, t := range m.tries {
		if t.evidence = math.Inf(1); hope < promising {
			continue
		}
		copy(t.problem.Y, w.problem.Y)
		copy(t.problem.RootW, m.tries[0].problem.RootW)
		t.problem.SetWeights()
		t.start(w)
		res := m.solver.Minimize(t.problem, t.p, t.lo, t.hi, t.free, points, lsq.Settings{Tolerance: 1e-2})
		if t.n == 1 {
			chi1 = res.Sum
			norm = m.norm(w, t)
		}
		fall := max(0, chi1-res.Sum) / scale
		if t.n > 1 {
			hope = fall
		}
		count := float64(t.problem.Len())
		t.chi2 = res.Sum / scale * w.noise.inflation() / max(float64(points)-count, 1)
		t.evidence = -fall/(1+makeupDiscrepancy*makeupDiscrepancy*norm/scale) + 2*count + 2*count*(count+1)/(float64(points)-count-1)
		if t.evidence < best.evidence-convincing {
			best = t
		}
	}
	m.components, m.chi2 = best.n, best.chi2
	m.evidence = math.Inf(1)
	for _, t := range m.tries {
		if t != best {
			m.evidence = min(m.evidence, t.evidence-best.evidence)
		}
	}
}

// start puts a description's lines where the single line says.
func (t *try) start(w *window) {
	i := w.problem.Band(0)
	height, position, width := w.p[i+line.Height], w.p[i+line.Position], w.p[i+line.Width]
	copy(t.p, w.p[:t.problem.Background()])
	t.p[t.problem.Width()] = t.width * width
	for k := range t.n {
		c := t.problem.Component(k)
		t.p[c], t.p[c+1] = t.heights[k]*height, position+t.offsets[k]*width
	}
}

// norm returns the weighted square of the single line.
func (m *makeups) norm(w *window, t *try) (sum float64) {
	c := t.problem.Component(0)
	m.single = [line.Len]float64{t.p[c], t.p[c+1], t.p[t.problem.Width()]}
	w.shapes[0].Eval(m.band, nil, w.x, m.single[:])
	for i, v := range m.band {
		v *= t.problem.RootW[i]
		sum += v * v
	}
	return sum
}

// rootWeights stores the square roots of the weights from noise alone, and returns how many channels count.
func (w *window) rootWeights(dst []float64) (points int) {
	w.problem.Curve(w.curve, w.p)
	for i, m := range w.curve {
		dst[i] = 0
		if !w.skip[i] {
			dst[i] = 1 / math.Sqrt(w.variance(i, m))
			points++
		}
	}
	return points
}

// makeupScale is the variance of unit weight for comparing descriptions: that of the noise, not of the misfit under judgement.
func (w *window) makeupScale() float64 {
	scale := 1.0
	if !w.noise.known {
		for i, m := range w.curve {
			w.r[i] = math.Sqrt(w.variance(i, m))
		}
		if s := clean.Noise(w.problem.Y, w.r, w.skip, w.scratch); s > 0 {
			scale = s * s / w.noise.second()
		}
	}
	return scale * w.noise.inflation()
}
