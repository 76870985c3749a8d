package scan

import (
	"cmp"
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"
)

// A lattice is a set of evenly spaced coordinates along one direction of the stage, or a single coordinate (n is 1, step 0).
type lattice struct {
	origin, step float64 // um
	n            int
	rms          float64 // of the distances from it, um
}

// index returns the place on the lattice that is nearest to v.
func (l lattice) index(v float64) int {
	if l.n == 1 {
		return 0
	}
	return int(math.Round((v - l.origin) / l.step))
}

// single is the lattice of one coordinate: the mean.
func single(v []float64) lattice {
	sum, square := 0.0, 0.0
	for _, x := range v {
		sum += x - v[0]
	}
	mean := v[0] + sum/float64(len(v))
	for _, x := range v {
		square += (x - mean) * (x - mean)
	}
	return lattice{origin: mean, n: 1, rms: math.Sqrt(square / float64(len(v)))}
}

// fitLattice fits origin and step to the sorted coordinates by least squares, starting from a guess whose phase must be right
// within half a step over the whole length. ok is false where all coordinates fall on one place.
func fitLattice(v []float64, origin, step float64) (l lattice, ok bool) {
	n := float64(len(v))
	for range 8 {
		var sk, sv, skk, skv float64
		for _, x := range v {
			k := math.Round((x - origin) / step)
			d := x - origin
			sk += k
			sv += d
			skk += k * k
			skv += k * d
		}
		spread := skk - sk*sk/n
		if !(spread > 0.5*(n-1)/n) { // one coordinate on a place of its own gives (n-1)/n
			return lattice{}, false
		}
		next := (skv - sk*sv/n) / spread
		if !(next > 0) {
			return lattice{}, false
		}
		shift := (sv - next*sk) / n
		still := math.Abs(next-step)*(v[len(v)-1]-v[0])/step <= 1e-9*step && math.Abs(shift) <= 1e-9*step
		origin, step = origin+shift, next
		if still {
			break
		}
	}
	low, high := math.Round((v[0]-origin)/step), math.Round((v[len(v)-1]-origin)/step)
	square := 0.0
	for _, x := range v {
		d := x - origin - math.Round((x-origin)/step)*step
		square += d * d
	}
	origin += low * step
	return lattice{origin: origin, step: step, n: int(high-low) + 1, rms: math.Sqrt(square / n)}, true
}

// growLattice fits from one end: the guess need only be right over a few steps, since the stretch that is fitted doubles.
func growLattice(v []float64, origin, step float64) (l lattice, ok bool) {
	for reach := 4.0; ; reach *= 2 {
		end, _ := slices.BinarySearch(v, origin+(reach+0.5)*step)
		if l, ok = fitLattice(v[:end], origin, step); ok {
			origin, step = l.origin, l.step
		}
		if end == len(v) {
			return l, ok
		}
	}
}

const (
	sample   = 1 << 15 // candidates are compared on at most this many coordinates
	maxBins  = 1 << 19 // of the periodogram
	oversize = 4       // the periodogram's length over that of the coordinates: its peaks are then sampled 4 times
)

// candidates proposes lattices for sorted coordinates, at most limit of them and the single one, first. They come from the gaps
// between the coordinates, which is exact where the stage is, and from the peaks of the periodogram, which stand out even where
// jitter fills the gaps.
func candidates(v []float64, limit int) []lattice {
	list := []lattice{single(v)}
	length := v[len(v)-1] - v[0]
	if !(length > 0) {
		return list
	}
	some := v
	if len(v) > sample {
		some = make([]float64, sample)
		for i := range some {
			some[i] = v[i*(len(v)-1)/(sample-1)]
		}
	}
	add := func(l lattice, ok bool) {
		if !ok || l.n < 2 || len(list) > limit {
			return
		}
		for _, old := range list[1:] {
			if old.n == l.n && math.Abs(old.step-l.step) <= 1e-3*old.step/float64(l.n) {
				return
			}
		}
		list = append(list, l)
	}
	for _, c := range clusters(v) {
		add(growLattice(c, c[0], lowerMedian(diffs(c))))
	}
	for _, p := range periodogram(v, length) {
		add(fitLattice(some, v[0]+p.origin, p.step))
	}
	return coarsest(list, len(v))
}

// loose is the rms distance from a lattice, in steps, up to which it describes coordinates. Forward and backward lines that are
// offset by a quarter of a step either way have 0.25; a lattice of twice the true step leaves 0.35.
const loose = 0.27

// nearness is the rms distance from a lattice, in steps, up to which n coordinates may be described by it. Few coordinates come
// close to some lattice by chance, so they must come closer (our choice; TestRandomPointsAreNoRaster).
func nearness(n int) float64 { return min(loose, 0.06+float64(n)/300) }

// coarsest keeps of the proposals the single coordinate and the coarsest lattice that describes the n coordinates: where one
// does, so does a lattice of half its step, or a fifth.
func coarsest(list []lattice, n int) []lattice {
	best := -1
	near := nearness(n)
	for i, l := range list[1:] {
		if l.rms <= near*l.step && (best < 0 || l.step > list[best].step) {
			best = i + 1
		}
	}
	if best < 0 {
		return list[:1]
	}
	return []lattice{list[0], list[best]}
}

// clusters returns the centres of groups of coordinates that lie much closer together than the groups, for the one or two most
// striking ways to group them.
func clusters(v []float64) (groupings [][]float64) {
	gaps := diffs(v)
	slices.Sort(gaps)
	tiny := 1e-9 * max(math.Abs(v[0]), math.Abs(v[len(v)-1])) // rounding of equal coordinates
	best, threshold := 2.0, -1.0                              // a striking ratio is above 2
	for i := len(gaps) - 1; i > 0; i-- {
		if gaps[i-1] <= tiny {
			if gaps[i] > tiny {
				groupings = append(groupings, group(v, tiny))
			}
			break
		}
		if r := gaps[i] / gaps[i-1]; r > best {
			best, threshold = r, gaps[i-1]
		}
	}
	if len(groupings) == 0 {
		groupings = append(groupings, v)
	}
	if threshold >= 0 {
		groupings = append(groupings, group(v, threshold))
	}
	groupings = slices.DeleteFunc(groupings, func(c []float64) bool { return len(c) < 2 })
	return groupings
}

// group averages runs of coordinates with gaps of at most limit.
func group(v []float64, limit float64) (centres []float64) {
	first := 0
	for i := 1; i <= len(v); i++ {
		if i < len(v) && v[i]-v[i-1] <= limit {
			continue
		}
		sum := 0.0
		for _, x := range v[first:i] {
			sum += x - v[first]
		}
		centres = append(centres, v[first]+sum/float64(i-first))
		first = i
	}
	return centres
}

func diffs(v []float64) []float64 {
	d := make([]float64, len(v)-1)
	for i := range d {
		d[i] = v[i+1] - v[i]
	}
	return d
}

// lowerMedian sorts d and returns its middle.
func lowerMedian(d []float64) float64 {
	slices.Sort(d)
	return d[(len(d)-1)/2]
}

// periodogram returns the steps (and origins, relative to v[0]) at which the coordinates are in phase: |mean of exp(2 pi i
// v/step)| has a peak. The coarsest come first, then the most coherent.
func periodogram(v []float64, length float64) (peaks []lattice) {
	bins := 64
	for bins < 32*oversize*len(v) && bins < maxBins {
		bins *= 2
	}
	used := bins / oversize // the rest stays empty
	histogram := make([]float64, bins)
	for _, x := range v {
		histogram[min(int((x-v[0])/length*float64(used)), used-1)]++
	}
	spectrum := fourier.NewFFT(bins).Coefficients(nil, histogram)
	power := make([]float64, len(spectrum)) // coherence, 0 to 1
	for i, c := range spectrum {
		power[i] = cmplx.Abs(c) / float64(len(v))
	}
	// Uniform jitter of a quarter of the step either way leaves a coherence of 0.64, a Gaussian one of 0.2 steps 0.45.
	const coherent = 0.4
	var at []int
	for m := oversize / 2; m < used/2; m++ { // at least two bins per step
		if power[m] >= coherent && power[m] >= power[m-1] && power[m] > power[m+1] {
			at = append(at, m)
		}
	}
	const each = 5
	chosen := slices.Clone(at[:min(each, len(at))])
	slices.SortStableFunc(at, func(i, j int) int { return cmp.Compare(power[j], power[i]) })
	for _, m := range at[:min(each, len(at))] {
		if !slices.Contains(chosen, m) {
			chosen = append(chosen, m)
		}
	}
	whole := length * oversize
	half := length / float64(used) / 2 // centre of a bin
	for _, m := range chosen {
		// The vertex of a parabola through the peak.
		a, b, c := power[m-1], power[m], power[m+1]
		f := float64(m) + 0.5*(a-c)/(a-2*b+c)
		step := whole / f
		// Phase at the vertex: it turns by the mean of the coordinates, here about half the length.
		phase := cmplx.Phase(spectrum[m]) - 2*math.Pi*(f-float64(m))/whole*(length/2)
		origin := -phase/(2*math.Pi)*step + half
		peaks = append(peaks, lattice{origin: origin, step: step})
	}
	return peaks
}
