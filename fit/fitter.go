package fit

import (
	"math"

	"bandgrid/fit/line"
)

// A Fitter fits spectra by a plan. It owns all scratch memory and allocates nothing per pixel; each worker has its own.
type Fitter struct {
	plan    *Plan
	windows []*window
	grad    []float64
}

// NewFitter returns a fitter for the plan.
func NewFitter(plan *Plan) *Fitter {
	f := &Fitter{plan: plan}
	for i := range plan.windows {
		w := newWindow(&plan.windows[i], &plan.Recipe, plan.Detector)
		f.windows = append(f.windows, w)
		f.grad = append(f.grad, make([]float64, max(0, len(w.p)-len(f.grad)))...)
	}
	return f
}

// Fit fits one spectrum: counts has a value for each channel of the plan's axis, in the axis's order, NaN where there is none.
// It stores the plan's columns in v and their standard errors in se, NaN where there is none. It reports whether every window
// was fitted.
func (f *Fitter) Fit(counts []float32, v, se []float32) bool {
	for i := range v {
		v[i], se[i] = float32(nan), float32(nan)
	}
	status := Converged
	var sum, weight float64
	spikes := 0
	for _, w := range f.windows {
		if !w.fit(counts) {
			status = status&^Converged | w.status
			for _, bit := range w.bits {
				status |= Absent(bit)
			}
			continue
		}
		both := status & w.status & Converged
		status = (status|w.status)&^Converged | both
		sum += w.chi2 * float64(w.points)
		weight += float64(w.points)
		spikes += w.spikeChannels()
		for k := range w.Bands {
			f.band(w, k, v, se)
			if !w.found[k] {
				status |= Absent(w.bits[k])
			}
		}
		for _, r := range w.ratios {
			f.ratio(w, r, v, se)
		}
	}
	last := v[len(v)-3:]
	if weight > 0 {
		last[0], last[1] = float32(sum/weight), float32(spikes)
	}
	last[2] = float32(status)
	return status&Unfit == 0
}

// band stores the four quantities of a band.
func (f *Fitter) band(w *window, k int, v, se []float32) {
	i, c := w.problem.Band(k), w.columns[k]
	height, width := w.p[i+line.Height], w.p[i+line.Width]
	if w.found[k] {
		v[c], se[c] = float32(w.p[i+line.Position]), float32(w.se(i+line.Position))
		v[c+1], se[c+1] = float32(width), float32(w.se(i+line.Width))
	}
	v[c+2], se[c+2] = float32(height), float32(w.se(i+line.Height))
	g := f.gradient(len(w.p))
	areaGradient(g[i:], 1, height, width)
	v[c+3], se[c+3] = float32(line.Lorentzian{}.Area(height, width)), float32(w.propagate(g))
}

// ratio stores the ratio of two bands of one window, with the covariance of all their parameters. It is undefined where the
// denominator is not found.
func (f *Fitter) ratio(w *window, r ratioPlan, v, se []float32) {
	if !w.found[r.den] {
		return
	}
	i, j := w.problem.Band(r.num), w.problem.Band(r.den)
	g := f.gradient(len(w.p))
	var ratio float64
	if r.area {
		num := line.Lorentzian{}.Area(w.p[i+line.Height], w.p[i+line.Width])
		den := line.Lorentzian{}.Area(w.p[j+line.Height], w.p[j+line.Width])
		ratio = num / den
		areaGradient(g[i:], 1/den, w.p[i+line.Height], w.p[i+line.Width])
		areaGradient(g[j:], -ratio/den, w.p[j+line.Height], w.p[j+line.Width])
	} else {
		den := w.p[j+line.Height]
		ratio = w.p[i+line.Height] / den
		g[i+line.Height] = 1 / den
		g[j+line.Height] = -ratio / den
	}
	v[r.column], se[r.column] = float32(ratio), float32(w.propagate(g))
}

func (f *Fitter) gradient(n int) []float64 {
	g := f.grad[:n]
	clear(g)
	return g
}

// areaGradient stores factor times the derivatives of a Lorentzian's area by its height and width.
func areaGradient(g []float64, factor, height, width float64) {
	g[line.Height] = factor * math.Pi / 2 * width
	g[line.Width] = factor * math.Pi / 2 * height
}

// propagate returns the standard error of a function of the parameters with gradient g.
func (w *window) propagate(g []float64) float64 {
	n := len(w.p)
	variance := 0.0
	for i, gi := range g {
		if gi == 0 {
			continue
		}
		for j, gj := range g {
			variance += gi * gj * w.cov[i*n+j]
		}
	}
	return math.Sqrt(variance * w.phi)
}
