package clean

import "math"

// Neighbours tells cosmic rays from narrow bands by the spectra of neighbouring pixels, in memory of its own: a band is there
// as well, a ray is not. It allocates nothing per spectrum. (Comparison with neighbours: Appl. Spectrosc. 64, 195 (2010), from
// memory; the rules below are our own.)
type Neighbours struct {
	template, order []float64
	a, b            float64 // the local fit: y = a + b (template - centre)
	centre          float64
}

// Limits of the comparison, in channels and in units of what they name.
const (
	around   = 10  // channels on each side that the expectation is fitted to
	growth   = 6.0 // a narrow line may have grown by as many times its height next door
	narrow   = 0.3 // part of its height by which a narrow line falls in three channels: a Lorentzian of up to 9 channels
	wander   = 0.3 // part of a wider band's prominence that may come from a small shift or change of width
	standing = 5.0 // noise deviations from which a prominence next door is a line
)

// NewNeighbours returns a comparison for spectra of n channels.
func NewNeighbours(n int) *Neighbours {
	return &Neighbours{template: make([]float64, n), order: make([]float64, 0, 16)}
}

// Mark marks in skip the channels of y that exceed what the neighbouring spectra let expect by threshold (common: 5) standard
// deviations, and returns how many are new. sigma is the standard deviation of the noise of a channel, y's unit. others holds
// up to 16 spectra of the same channels, best those before and after it in order of acquisition; NaN means no count. Without
// any, or where none has a count, nothing is marked. It changes neither y nor others, and panics where lengths differ.
//
// Gain and offset of the neighbours are fitted next to each suspected channel and not at it, so bands may differ in height. A
// line next door that is narrower than about nine channels has too little of a foot to be scaled by, and moves by a good part
// of its width: within three channels of it a ray must exceed six times the line's height there, else it is left to others.
func (h *Neighbours) Mark(y []float64, sigma, threshold float64, others [][]float64, skip []bool) (marked int) {
	n := len(h.template)
	if len(y) != n || len(skip) != n {
		panic("clean: spectra of another length than the comparison was made for")
	}
	if len(others) == 0 || !(sigma > 0) {
		return 0
	}
	h.merge(others)
	for i, v := range y {
		if skip[i] || !(v-h.side(y, i) > (threshold-2)*sigma) { // NaN is no suspect
			continue
		}
		noise, ok := h.expect(y, sigma, skip, i, len(others))
		if !ok || !(h.excess(y, i) > threshold*noise+h.allowance(others, i, sigma)) {
			continue
		}
		marked += spread(skip, i, func(k int) bool { return h.excess(y, k) > 2.5*noise+h.allowance(others, k, sigma) })
	}
	return marked
}

// merge stores the median of the spectra in template: a ray in one of three or more does not show.
func (h *Neighbours) merge(others [][]float64) {
	for _, o := range others {
		if len(o) != len(h.template) {
			panic("clean: a neighbour of another length")
		}
	}
	for i := range h.template {
		v := h.order[:0]
		for _, o := range others {
			if !math.IsNaN(o[i]) && !math.IsInf(o[i], 0) {
				v = append(v, o[i])
			}
		}
		h.template[i] = Median(v)
	}
}

// side is the greater of the values three channels away from i, or the one there is. NaN where there is none.
func (h *Neighbours) side(y []float64, i int) float64 {
	side := math.NaN()
	for _, k := range [2]int{i - reach, i + reach} {
		if k >= 0 && k < len(y) && !math.IsNaN(y[k]) && !(side >= y[k]) {
			side = y[k]
		}
	}
	return side
}

// expect fits gain and offset of the template to y around channel i, without the channels that a ray there may reach, and
// returns the standard deviation of y minus what is expected at i. It reports false where too few channels are left.
func (h *Neighbours) expect(y []float64, sigma float64, skip []bool, i, others int) (noise float64, ok bool) {
	limit := math.Inf(1)
	for range 2 { // the second time without what does not fit: other rays
		var n, sx, sy, sxx, sxy float64
		for k := max(0, i-around); k < min(len(y), i+around+1); k++ {
			x := h.template[k]
			if k >= i-2 && k <= i+2 || skip[k] || !(math.Abs(h.excess(y, k)) < limit) && limit < math.Inf(1) || x != x || y[k] != y[k] {
				continue
			}
			if n == 0 {
				h.centre = x
			}
			x -= h.centre
			n++
			sx += x
			sy += y[k]
			sxx += x * x
			sxy += x * y[k]
		}
		if n < 6 || math.IsNaN(h.template[i]) {
			return 0, false
		}
		det := sxx - sx*sx/n
		h.b = 0
		// Noise next door makes the gain too small; where the template hardly varies it is no gain at all.
		if own := n * sigma * sigma / float64(others); det > 3*own {
			h.b = max(0, (sxy-sx*sy/n)/(det-own))
		}
		h.a = (sy - h.b*sx) / n
		noise = sigma * math.Sqrt(1+1/n+h.b*h.b/float64(others))
		limit = 5 * noise
	}
	return noise, true
}

// excess is what channel k has above the expectation of the last fit. NaN where there is no count.
func (h *Neighbours) excess(y []float64, k int) float64 {
	return y[k] - h.a - h.b*(h.template[k]-h.centre)
}

// allowance is by how much a real band next door, moved, widened or grown, may exceed the expectation at channel i. The tallest
// of the neighbours counts, not the median: at an edge the line may be there on one side only.
func (h *Neighbours) allowance(others [][]float64, i int, sigma float64) (most float64) {
	for _, o := range others {
		for k := max(0, i-reach); k < min(len(o), i+reach+1); k++ {
			p := o[k] - h.side(o, k)
			if !(p > standing*sigma) {
				continue
			}
			floor := math.Inf(1)
			for _, v := range o[max(0, k-around):min(len(o), k+around+1)] {
				if v < floor {
					floor = v
				}
			}
			if p > narrow*(o[k]-floor-2*sigma) { // the lowest of some 20 channels lies about two deviations low
				p *= growth
			} else {
				p *= wander * max(1, h.b)
			}
			most = max(most, p)
		}
	}
	return most
}
