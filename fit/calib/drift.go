package calib

import (
	"fmt"
	"math"
	"slices"

	"bandgrid/fit/clean"
)

// A Drift is how the axis moved during a run, from a line that every spectrum shows.
type Drift struct {
	Offset []float64 // by which the line lies higher than its mean over the run, cm-1, one value per pixel in order of acquisition
	SE     []float64 // its standard error
	Step   float64   // standard deviation of the movement from pixel to pixel, cm-1
	Jumps  []Jump
}

// A Jump is a sudden movement, as of a grating or of the laser's mode.
type Jump struct {
	Pixel int     `json:"pixel"` // the first after it, in order of acquisition
	Size  float64 `json:"size_cm-1"`
	SE    float64 `json:"se_cm-1"`
}

const (
	// beside is how many pixels on either side of a jump are compared.
	beside = 20
	// sudden is how many standard errors their means must differ for a jump: the search tries every pixel of the run.
	sudden = 8
	// leastTracked is from how many pixels on a drift can be followed.
	leastTracked = 2 * beside
)

// Track follows a line whose positions, cm-1, with standard errors, come in order of acquisition; NaN where it was not found.
//
// Between jumps the axis is taken to move as a random walk, whose step is estimated by maximum likelihood; the offsets are
// those of the fixed-interval smoother (Kalman filter and smoother; AIAA J. 3, 1445 (1965), from memory), which is the weighted
// mean over as many neighbours as the walk allows. Positions more than five standard errors off are left out.
func Track(position, se []float64) (*Drift, error) {
	n := len(position)
	y, v := slices.Clone(position), make([]float64, n)
	good := 0
	for i := range y {
		if v[i] = se[i] * se[i]; !(v[i] > 0) || math.IsInf(v[i], 0) || math.IsNaN(y[i]) {
			y[i], v[i] = math.NaN(), 1
		} else {
			good++
		}
	}
	if good < leastTracked || 2*good < n {
		return nil, fmt.Errorf("the line was found in %d of %d pixels; at least half of them, and %d, are needed to follow it", good, n, leastTracked)
	}
	outliers(y, v)
	d := &Drift{}
	starts := jumps(y, v)
	w := newWalk(y, v, starts)
	for range 2 {
		d.Step = w.step()
		w.run(d.Step * d.Step)
		for i := range y { // against the smoothed value: what is far off is no drift
			if z := (y[i] - w.level[i]) / math.Sqrt(v[i]+w.variance[i]); math.Abs(z) > 5 {
				y[i] = math.NaN()
			}
		}
	}
	d.Step = w.step()
	w.run(d.Step * d.Step)
	mean := 0.0
	for _, l := range w.level {
		mean += l / float64(n)
	}
	d.Offset, d.SE = make([]float64, n), make([]float64, n)
	for i := range n {
		d.Offset[i], d.SE[i] = w.level[i]-mean, math.Sqrt(w.variance[i])
	}
	for _, s := range starts {
		d.Jumps = append(d.Jumps, Jump{s, w.level[s] - w.level[s-1], math.Sqrt(w.variance[s] + w.variance[s-1])})
	}
	return d, nil
}

// outliers leaves out positions that are far off the median of those next to them: another line was found there, or a cosmic
// ray. Few neighbours, so that a jump is no outlier; the scale is that of differences all over the run.
func outliers(y, v []float64) {
	const reach = 3
	var differences, around []float64
	for i := 1; i < len(y); i++ {
		if d := math.Abs(y[i] - y[i-1]); d == d {
			differences = append(differences, d)
		}
	}
	usual := 1.4826 * clean.Median(differences) / math.Sqrt2
	off := make([]bool, len(y))
	for i, x := range y {
		around = around[:0]
		for _, u := range y[max(0, i-reach):min(len(y), i+reach+1)] {
			if u == u {
				around = append(around, u)
			}
		}
		off[i] = len(around) > reach && math.Abs(x-clean.Median(around)) > 6*max(math.Sqrt(v[i]), usual)
	}
	for i, o := range off {
		if o {
			y[i] = math.NaN()
		}
	}
}

// jumps finds where the mean changes suddenly: the pixels that begin a new stretch.
func jumps(y, v []float64) (starts []int) {
	n := len(y)
	z := make([]float64, n)
	scale := walkScatter(y, v)
	for i := beside; i+beside <= n; i++ {
		a, va := weighted(y[i-beside:i], v[i-beside:i])
		b, vb := weighted(y[i:i+beside], v[i:i+beside])
		// A walk makes means differ too: by its step times the root of two thirds of the pixels beside.
		z[i] = math.Abs(b-a) / math.Sqrt(va+vb+2./3*beside*scale)
		if math.IsNaN(z[i]) {
			z[i] = 0
		}
	}
	for {
		best, at := float64(sudden), -1
		for i, s := range z {
			if s > best {
				best, at = s, i
			}
		}
		if at < 0 {
			slices.Sort(starts)
			return starts
		}
		starts = append(starts, split(y, v, at))
		for i := max(0, at-beside); i < min(n, at+beside); i++ {
			z[i] = 0
		}
	}
}

// split returns the pixel near at where two levels, one before and one from it on, fit best.
func split(y, v []float64, at int) int {
	low, high := max(0, at-beside), min(len(y), at+beside)
	best, where := math.Inf(1), at
	for s := max(low+3, at-beside/2); s <= min(high-3, at+beside/2); s++ {
		cost := 0.0
		for _, part := range [][2]int{{low, s}, {s, high}} {
			mean, _ := weighted(y[part[0]:part[1]], v[part[0]:part[1]])
			for i := part[0]; i < part[1]; i++ {
				if d := y[i] - mean; d == d {
					cost += d * d / v[i]
				}
			}
		}
		if cost < best {
			best, where = cost, s
		}
	}
	return where
}

// walkScatter is the variance of a step of the walk, robustly, from differences of means of five pixels, without their noise.
func walkScatter(y, v []float64) float64 {
	const group = 5
	var d, noise []float64
	for i := 0; i+2*group <= len(y); i += group {
		a, va := weighted(y[i:i+group], v[i:i+group])
		b, vb := weighted(y[i+group:i+2*group], v[i+group:i+2*group])
		if x := b - a; x == x {
			d, noise = append(d, math.Abs(x)), append(noise, va+vb)
		}
	}
	s := 1.4826 * clean.Median(d)
	return max(0, s*s-clean.Median(noise)) / (2. / 3 * group)
}

// weighted returns a weighted mean and its variance.
func weighted(y, v []float64) (mean, variance float64) {
	var s, w float64
	for i, x := range y {
		if x == x {
			s += x / v[i]
			w += 1 / v[i]
		}
	}
	return s / w, 1 / w
}

// A walk is a random walk seen with noise, that starts anew at given pixels.
type walk struct {
	y, v     []float64
	fresh    []bool
	level    []float64 // smoothed
	variance []float64
	fl, fv   []float64 // filtered
}

func newWalk(y, v []float64, starts []int) *walk {
	n := len(y)
	f := func() []float64 { return make([]float64, n) }
	w := &walk{y: y, v: v, fresh: make([]bool, n), level: f(), variance: f(), fl: f(), fv: f()}
	w.fresh[0] = true
	for _, s := range starts {
		w.fresh[s] = true
	}
	return w
}

// diffuse is the variance of a level of which nothing is known, cm-2.
const diffuse = 1e6

// filter runs forward with steps of variance q and returns -2 log likelihood.
func (w *walk) filter(q float64) (cost float64) {
	level, variance := 0.0, diffuse
	for i, y := range w.y {
		if variance += q; w.fresh[i] {
			level, variance = 0, diffuse
		}
		if y == y {
			s := variance + w.v[i]
			e := y - level
			if variance < diffuse/2 {
				cost += math.Log(s) + e*e/s
			}
			gain := variance / s
			level += gain * e
			variance *= w.v[i] / s
		}
		w.fl[i], w.fv[i] = level, variance
	}
	return cost
}

// step is the standard deviation of a step that makes what was seen most likely, by golden section over its logarithm.
func (w *walk) step() float64 {
	low, high := math.Log(1e-6), math.Log(1)
	const golden = 0.6180339887498949
	cost := func(l float64) float64 { s := math.Exp(l); return w.filter(s * s) }
	a, b := high-golden*(high-low), low+golden*(high-low)
	fa, fb := cost(a), cost(b)
	for high-low > 0.01 {
		if fa < fb {
			high, b, fb = b, a, fa
			a = high - golden*(high-low)
			fa = cost(a)
		} else {
			low, a, fa = a, b, fb
			b = low + golden*(high-low)
			fb = cost(b)
		}
	}
	return math.Exp((low + high) / 2)
}

// run filters and smooths with steps of variance q.
func (w *walk) run(q float64) {
	w.filter(q)
	n := len(w.y)
	w.level[n-1], w.variance[n-1] = w.fl[n-1], w.fv[n-1]
	for i := n - 2; i >= 0; i-- {
		if w.fresh[i+1] {
			w.level[i], w.variance[i] = w.fl[i], w.fv[i]
			continue
		}
		next := w.fv[i] + q
		gain := w.fv[i] / next
		w.level[i] = w.fl[i] + gain*(w.level[i+1]-w.fl[i])
		w.variance[i] = w.fv[i] + gain*gain*(w.variance[i+1]-next)
	}
}
