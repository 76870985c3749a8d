package fit

import (
	"math"

	"bandgrid/fit/line"
)

// A Fitter fits spectra by a plan. It owns all scratch memory and allocates nothing per pixel; each worker has its own.
type Fitter struct {
	plan     *Plan
	preparer *preparer
	windows  []*window
	spikes   []float32 // shifts of the last spectrum's channels that cosmic rays hit
	holes    int       // channels of the last spectrum that were left out for want of a usable count
	grad     []float64 // of a quantity by a window's parameters
	other    []float64
}

// NewFitter returns a fitter for the plan.
func NewFitter(plan *Plan) *Fitter {
	f := &Fitter{plan: plan, preparer: newPreparer(plan.Preparation, plan.Detector, plan.Axis, plan.Recipe.Baseline)}
	for i := range plan.windows {
		w := newWindow(&plan.windows[i], &plan.Recipe, plan.noise)
		f.windows = append(f.windows, w)
		f.grad = append(f.grad, make([]float64, max(0, len(w.p)-len(f.grad)))...)
	}
	f.other = make([]float64, len(f.grad))
	f.spikes = make([]float32, 0, plan.channelCount())
	return f
}

// Fit fits one spectrum: counts has a value for each channel of the plan's axis, in the axis's order, NaN where there is none.
// It stores the plan's columns in v and their standard errors in se, NaN where there is none. It reports whether every window
// was fitted. It panics where counts are not as long as the axis.
func (f *Fitter) Fit(counts []float32, v, se []float32) bool {
	for i := range v {
		v[i], se[i] = float32(nan), float32(nan)
	}
	status := Converged
	var sum, weight float64
	spikes := 0
	f.preparer.take(counts)
	f.holes, f.spikes = 0, f.spikes[:0]
	for _, w := range f.windows {
		fitted := w.fit(f.preparer)
		for _, hole := range w.holes {
			if hole {
				f.holes++
			}
		}
		if !fitted {
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
		for i, s := range w.skip {
			if s && !w.holes[i] && len(f.spikes) < cap(f.spikes) {
				f.spikes = append(f.spikes, float32(w.x[i]))
			}
		}
		for k := range w.Bands {
			f.band(w, k, v, se)
			if !w.found[k] {
				status |= Absent(w.bits[k])
			}
		}
		for _, r := range w.ratios {
			f.ratio(w, r, v, se)
		}
		if m := w.makeups; m != nil && w.found[0] {
			v[w.makeup], v[w.makeup+1] = float32(m.components), float32(m.evidence)
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
	i, c, shape := w.problem.Band(k), w.columns[k], w.shapes[k]
	p := w.values[i : i+shape.Len()]
	g := f.gradient(len(w.p))
	of := g[i : i+shape.Len()]
	if w.found[k] {
		v[c], se[c] = float32(p[line.Position]), float32(w.se(i+line.Position))
		width := p[line.Width]
		if _, free := shape.(line.FreeVoigt); free { // with the instrument's width known, the natural one is a parameter
			width = shape.FWHM(p)
			shape.FWHMGradient(of, p)
		} else {
			of[line.Width] = 1
		}
		v[c+1], se[c+1] = float32(width), float32(w.propagate(g))
	}
	v[c+2], se[c+2] = float32(p[line.Height]), float32(w.se(i+line.Height))
	shape.AreaGradient(of, p)
	v[c+3], se[c+3] = float32(w.area(k)), float32(w.propagate(g))
}

// ratio stores the ratio of two bands of one window, with the covariance of all their parameters. It is undefined where the
// denominator is not found.
//
// A ratio of two unbiased estimates is biased by r (var(b)/b² - cov(a, b)/(ab)) to second order; that is taken out.
func (f *Fitter) ratio(w *window, r ratioPlan, v, se []float32) {
	if !w.found[r.den] {
		return
	}
	n := len(w.p)
	num, den := f.gradient(n), f.other[:n]
	clear(den)
	i, j := w.problem.Band(r.num), w.problem.Band(r.den)
	var a, b float64
	if r.area {
		a, b = w.area(r.num), w.area(r.den)
		w.shapes[r.num].AreaGradient(num[i:i+w.shapes[r.num].Len()], w.values[i:])
		w.shapes[r.den].AreaGradient(den[j:j+w.shapes[r.den].Len()], w.values[j:])
	} else {
		a, b = w.values[i+line.Height], w.values[j+line.Height]
		num[i+line.Height], den[j+line.Height] = 1, 1
	}
	aa, ab, bb := w.product(num, num), w.product(num, den), w.product(den, den)
	ratio := a / b
	v[r.column] = float32(ratio - (ratio*bb-ab)/(b*b))
	se[r.column] = float32(math.Sqrt(max(0, aa-2*ratio*ab+ratio*ratio*bb)) / math.Abs(b))
}

func (f *Fitter) gradient(n int) []float64 {
	g := f.grad[:n]
	clear(g)
	return g
}
