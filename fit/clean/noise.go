// Package clean prepares spectra: it estimates noise without a model and finds the channels that cosmic rays hit.
package clean

import "math"

// Median returns the median of v, which it reorders; the mean of the middle two where their number is even, NaN where there
// are none. v must not hold NaN.
func Median(v []float64) float64 {
	n := len(v)
	if n == 0 {
		return math.NaN()
	}
	high := Select(v, n/2)
	if n%2 == 1 {
		return high
	}
	low := v[0]
	for _, x := range v[1 : n/2] {
		low = max(low, x)
	}
	return (low + high) / 2
}

// Select reorders v so that v[k] is what it would be if v were sorted, with nothing greater before it and nothing less behind
// it, and returns it. v must not hold NaN. Quickselect, Commun. ACM 4, 321 (1961), https://doi.org/10.1145/366622.366647.
func Select[T float32 | float64](v []T, k int) T {
	lo, hi := 0, len(v)-1
	for lo < hi {
		pivot := v[lo+(hi-lo)/2]
		i, j := lo, hi
		for i <= j {
			for v[i] < pivot {
				i++
			}
			for v[j] > pivot {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			hi = j
		case k >= i:
			lo = i
		default:
			return v[k]
		}
	}
	return v[k]
}

// Noise estimates the standard deviation of the white part of the noise of y relative to sigma, which gives its expected
// shape, from second differences: what is smooth over three channels cancels, and a median ignores the rest. Channels with
// skip set, and their neighbours, are left out. scratch is memory for len(y) numbers. It returns NaN where fewer than eight
// triples are left.
//
// The factor: a second difference of white noise has √6 times its standard deviation, and the median of the absolute value of
// a normal deviate is 0.6745 standard deviations.
func Noise(y, sigma []float64, skip []bool, scratch []float64) float64 {
	d := scratch[:0]
	for i := 1; i+1 < len(y); i++ {
		if skip[i-1] || skip[i] || skip[i+1] {
			continue
		}
		d = append(d, math.Abs(y[i-1]-2*y[i]+y[i+1])/sigma[i])
	}
	if len(d) < 8 {
		return math.NaN()
	}
	return 1.482602218505602 * Median(d) / math.Sqrt(6)
}
