package clean

import "math"

// A cosmic ray deposits its charge in one to three channels next to each other. Bands of two-dimensional materials are wider
// than that at any usual dispersion, so a spike is told from a band by how fast it falls: to nothing three channels away.
const reach = 3

// Sharp marks in skip the channels of strong spikes before anything is known of the bands, so that the search for a start is
// not led astray, and returns how many. It is meant to miss rather than to overreach: a spike must stand 15 standard
// deviations of the noise above both channels three away, and those must have fallen to an eighth of it; a Lorentzian has
// fallen so far in three channels only if it is narrower than 2.3 channels. sigma is the standard deviation of one channel.
// What it marks is judged again by [Residual] after the fit.
func Sharp(y []float64, sigma float64, skip []bool) (marked int) {
	n := len(y)
	for i := reach; i+reach < n; i++ {
		side := max(y[i-reach], y[i+reach])
		if skip[i] || !(y[i]-side > 15*sigma) || y[i] < y[i-1] || y[i] < y[i+1] {
			continue
		}
		floor := math.Inf(1)
		for _, v := range y[max(0, i-4*reach):min(n, i+4*reach+1)] {
			floor = min(floor, v)
		}
		floor = min(floor+2*sigma, side) // the lowest of some 25 channels lies about two deviations low
		if (side-floor)*8 > y[i]-floor {
			continue
		}
		marked += spread(skip, i, func(k int) bool { return y[k]-side > 3*sigma })
	}
	return marked
}

// Residual marks in skip the channels of spikes in r, the residuals of a fit in units of their standard deviation, and returns
// how many are new. A spike is a positive residual above threshold whose neighbours three channels away have fallen below a
// third of it: misfit of a band is smoother than that.
func Residual(r []float64, threshold float64, skip []bool) (marked int) {
	n := len(r)
	for i, v := range r {
		if skip[i] || !(v > threshold) {
			continue
		}
		side := math.Inf(-1)
		if i >= reach {
			side = r[i-reach]
		}
		if i+reach < n {
			side = max(side, r[i+reach])
		}
		if side*3 > v || i > 0 && r[i-1] > v && !skip[i-1] || i+1 < n && r[i+1] > v && !skip[i+1] {
			continue
		}
		marked += spread(skip, i, func(k int) bool { return r[k] > 2.5 })
	}
	return marked
}

// Harmless takes back suspicions: a group of neighbouring channels with suspect set whose residuals r all lie within threshold
// fits the curve after all, and its channels count again: suspect and skip are cleared. It returns how many came back.
func Harmless(r []float64, threshold float64, suspect, skip []bool) (cleared int) {
	for i := 0; i < len(r); i++ {
		if !suspect[i] {
			continue
		}
		end, within := i, true
		for ; end < len(r) && suspect[end]; end++ {
			within = within && math.Abs(r[end]) <= threshold
		}
		if within {
			clear(suspect[i:end])
			clear(skip[i:end])
			cleared += end - i
		}
		i = end
	}
	return cleared
}

// spread marks channel i and those beside it, up to two on each side, that high says belong to the same hit.
func spread(skip []bool, i int, high func(int) bool) (marked int) {
	mark := func(k int) {
		if !skip[k] {
			skip[k] = true
			marked++
		}
	}
	mark(i)
	for k := i - 1; k >= max(0, i-2) && high(k); k-- {
		mark(k)
	}
	for k := i + 1; k < len(skip) && k <= i+2 && high(k); k++ {
		mark(k)
	}
	return marked
}

// Differences marks in skip the channels of cosmic rays in a whole spectrum of which nothing else is known, and returns how many
// are new: where the modified z-score of the difference to the next channel, 0.6745 (d - median)/MAD, exceeds threshold upwards
// and within three channels downwards as well (Chemom. Intell. Lab. Syst. 179, 82 (2018), method seen in secondary; both ways,
// since the slope of a strong band exceeds it one way). Thresholds of 6 to 8 are common. A line narrower than three channels is
// marked too: use it where bands do not matter, for backgrounds. scratch is memory for 2 len(y) numbers.
func Differences(y []float64, skip []bool, threshold float64, scratch []float64) (marked int) {
	n := len(y)
	d, order := scratch[:0:n], scratch[n:n]
	for i := 0; i+1 < n; i++ {
		v := y[i+1] - y[i]
		if skip[i] || skip[i+1] {
			v = 0
		}
		d = append(d, v)
	}
	order = append(order, d...)
	median := Median(order)
	for i, v := range d {
		order[i] = math.Abs(v - median)
	}
	mad := Median(order)
	if !(mad > 0) {
		return 0
	}
	for i, v := range d {
		if !(0.6745*(v-median)/mad > threshold) {
			continue
		}
		for k := i + 1; k <= i+reach && k < len(d); k++ {
			if 0.6745*(d[k]-median)/mad < -threshold {
				for c := i + 1; c <= k; c++ {
					if !skip[c] {
						skip[c] = true
						marked++
					}
				}
				break
			}
		}
	}
	return marked
}
