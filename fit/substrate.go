package fit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/clean"
	"bandgrid/mapio/scan"
)

// givenSubstrate adds to the background of each window what a spectrum of the substrate shows beside the polynomial.
func (p *Plan) givenSubstrate() {
	for i := range p.windows {
		w := &p.windows[i]
		term := make([]float64, len(w.channels))
		known := true
		for k, c := range w.channels {
			term[k] = p.Preparation.Substrate[c]
			known = known && !math.IsNaN(term[k])
		}
		if !known { // the spectrum does not reach over the window
			continue
		}
		project(term, orthonormal(w.basis))
		if !(floats.Norm(term, 2) > 1e-9*floats.Norm(p.Preparation.Substrate, 2)) {
			continue
		}
		w.basis = append(slices.Clone(w.basis), term)
		w.weaken()
		p.Learned.Substrate = append(p.Learned.Substrate, w.Name)
	}
}

// leastBare is how many bare pixels a sample must have for the substrate's own spectrum: its noise is then a tenth of a pixel's.
const leastBare = 100

// learnSubstrate adds to the background of each window what the bare pixels of the sample show beside it: lines of silicon, of
// oxygen in the air, of resist. A pixel is bare where no band that is searched for is found in any window.
//
// The mean of the bare pixels is fitted like a pixel, with the noise of a mean. Bands found in it, from film at the edge of the
// spot, are taken off; what is left beside the polynomial is the term, if it exceeds its noise.
func (p *Plan) learnSubstrate(sample []scan.Pixel, looks []look) {
	var bare []int
	for i := range looks {
		if looks[i].bare {
			bare = append(bare, i)
		}
	}
	if len(bare) < leastBare || !p.noise.known {
		return
	}
	mean := p.meanOf(sample, bare)
	few := *p
	few.noise.slope /= float64(len(bare))
	few.noise.level /= float64(len(bare))
	f := NewFitter(&few)
	f.preparer.take(mean)
	for i, w := range f.windows {
		if !w.fit(f.preparer) {
			continue
		}
		term := slices.Clone(w.problem.Y)
		for k, found := range w.found {
			if found && w.Bands[k].Search {
				w.problem.Profile(w.scratch, k, w.p)
				floats.Sub(term, w.scratch)
			}
		}
		for c, skip := range w.skip {
			if skip { // what cannot be seen is not known to be there
				term[c] = w.curve[c]
			}
		}
		basis := orthonormal(w.basis)
		project(term, basis)
		// Against noise that is not quite even over the window the polynomial is a little off; that does not matter here.
		var chi2 float64
		for c, v := range term {
			s := math.Sqrt(w.variance(c, w.curve[c]))
			chi2 += v * v / (s * s)
		}
		n := float64(len(term) - len(basis))
		if !(chi2 > p.noise.inflation()*(n+6*math.Sqrt(2*n))) {
			continue
		}
		q := &p.windows[i]
		q.basis = append(slices.Clone(q.basis), term)
		q.weaken()
		p.Learned.Substrate = append(p.Learned.Substrate, q.Name)
	}
	p.Learned.Bare = len(bare)
}

// meanOf returns the mean of pixels of the sample, channel by channel, without holes.
func (p *Plan) meanOf(sample []scan.Pixel, list []int) []float32 {
	sum, n := make([]float64, len(p.Axis)), make([]float64, len(p.Axis))
	q := newPreparer(Preparation{}, p.Detector, p.Axis, clean.Baseline{})
	for _, i := range list {
		q.take(sample[i].Counts)
		for c, hole := range q.holes {
			if !hole {
				sum[c] += q.counts[c]
				n[c]++
			}
		}
	}
	mean := make([]float32, len(sum))
	for c := range mean {
		mean[c] = float32(sum[c] / n[c]) // NaN without any
	}
	return mean
}
