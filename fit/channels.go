package fit

import (
	"math"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
)

// load takes over the counts and sets aside what cannot be used. It reports false where too little is left, or where the
// counts do not scatter at all, as in a channel-less or made-up spectrum: such a fit would claim errors of zero.
func (w *window) load(q *preparer) bool {
	w.status = 0
	good := 0
	for i, c := range w.channels {
		w.holes[i], w.scale[i] = q.holes[c], q.scale[c]
		if !w.holes[i] {
			good++
		}
		w.problem.Y[i] = q.counts[c]
		if q.removed != nil {
			w.removed[i] = q.removed[c]
		}
	}
	if good < len(w.holes) {
		w.status |= Holes
	}
	return good >= 2*len(w.p) && w.suspect(false)
}

// measured returns the counts as the detector saw them where the prepared value of channel i is m: noise is a matter of those.
func (w *window) measured(i int, m float64) float64 { return m/w.scale[i] + w.removed[i] }

// variance returns the variance of channel i where its expected value is m, both as prepared.
func (w *window) variance(i int, m float64) float64 {
	s := w.scale[i]
	return s * s * w.noise.variance(w.measured(i, m))
}

// suspect leaves out the holes, and the channels that look like strong spikes. Where a strong band may be, a narrow one looks
// like a spike too, so nothing is suspected there at first: if a spike does sit on the band the fit is poor, and it is tried
// again with all suspicions. It reports false where there is no noise to measure by.
func (w *window) suspect(all bool) bool {
	copy(w.skip, w.holes)
	w.bridge()
	for i := range w.sigma {
		w.sigma[i] = 1
	}
	noise := clean.Noise(w.problem.Y, w.sigma, w.skip, w.scratch)
	if !(noise > 0) {
		return false
	}
	if clean.Sharp(w.bridged, noise, w.skip) > 0 {
		for i, strong := range w.strong {
			w.skip[i] = w.skip[i] && (all || !strong || w.holes[i])
		}
		w.bridge()
	}
	for i, s := range w.skip {
		w.sharp[i] = s && !w.holes[i]
	}
	return true
}

// bridge copies the counts with a straight line drawn over skipped channels. They carry no weight in the fit; the line only
// keeps them from disturbing the search for a start.
func (w *window) bridge() {
	last := -1
	for i, y := range w.problem.Y {
		if w.skip[i] {
			continue
		}
		w.bridged[i] = y
		for k := last + 1; k < i; k++ {
			w.bridged[k] = y
			if last >= 0 {
				w.bridged[k] = w.bridged[last] + (y-w.bridged[last])*float64(k-last)/float64(i-last)
			}
		}
		last = i
	}
	for k := last + 1; k < len(w.bridged) && last >= 0; k++ {
		w.bridged[k] = w.bridged[last]
	}
}

// spikeChannels is the number of channels left out because of cosmic rays.
func (w *window) spikeChannels() (n int) {
	for i, s := range w.skip {
		if s && !w.holes[i] {
			n++
		}
	}
	return n
}

// spikes looks for cosmic rays in the residuals, and for channels that were wrongly suspected. It reports whether the set of
// channels changed.
func (w *window) spikes() bool {
	w.problem.Curve(w.curve, w.p)
	// A robust scale: the spike itself must not hide in the scatter that it makes.
	d := w.scratch[:0]
	for i, m := range w.curve {
		w.r[i] = (w.problem.Y[i] - m) / w.sigma[i]
		if !w.skip[i] {
			d = append(d, math.Abs(w.r[i]))
		}
	}
	scale := 1.4826 * clean.Median(d)
	if !(scale > 0) {
		return false
	}
	for i := range w.r {
		w.r[i] /= scale
	}
	w.spare()
	cleared := clean.Harmless(w.r, w.recipe.SpikeThreshold, w.sharp, w.skip)
	return clean.Residual(w.r, w.recipe.SpikeThreshold, w.skip)+cleared > 0
}

// spare replaces the residuals where a band may lie that may be as narrow as a cosmic ray. One spectrum cannot tell the two
// apart: the fit may have taken the ray for the band. The other pixels of the map can, if they show the band: its usual
// profile, as high as the median channel on it says, leaves a ray as a residual. Without them nothing counts as a ray there.
func (w *window) spare() {
	for k, b := range w.Bands {
		if !b.Narrow {
			continue
		}
		i := w.problem.Band(k)
		low, high := w.lo[i+line.Position]-b.Width, w.hi[i+line.Position]+b.Width
		known := w.usual[k].width > 0
		if known {
			known = w.compare(k, low, high)
		}
		for c, x := range w.x {
			if !known && x > low && x < high {
				w.r[c] = 0
			}
		}
	}
}

// compare sets the residuals between low and high to those against the band's usual profile. It reports false where the band
// has too few channels to tell.
func (w *window) compare(k int, low, high float64) bool {
	at := w.usual[k]
	i, n := w.problem.Band(k), w.shapes[k].Len()
	p := w.sums[:n]
	copy(p, w.p[i:i+n])
	p[line.Height], p[line.Position], p[line.Width] = 1, at.position, at.width
	w.shapes[k].Eval(w.curve, nil, w.x, p)
	w.problem.Base(w.bridged, w.p)
	ratios := w.scratch[:0]
	for c, f := range w.curve {
		if f > 0.2 && !w.holes[c] {
			ratios = append(ratios, (w.problem.Y[c]-w.bridged[c])/f)
		}
	}
	if len(ratios) < 3 {
		return false
	}
	height := clean.Median(ratios)
	for c, x := range w.x {
		if x > low && x < high {
			// The line moves and widens a little from pixel to pixel: a quarter of what it has there is no surprise.
			d := w.problem.Y[c] - w.bridged[c] - height*w.curve[c]
			w.r[c] = d / math.Hypot(w.sigma[c], 0.25/w.recipe.SpikeThreshold*math.Abs(height)*w.curve[c])
		}
	}
	return true
}
