package synth

import (
	"math"
	"math/rand/v2"
)

// manyElectrons is the mean above which electrons are drawn by [detector.many] rather than exactly. Against the exact
// distribution the largest difference of the cumulative distribution is then below 3e-6, ever smaller for larger means
// (TestManyElectronsAgainstExact).
const manyElectrons = 100

// A detector turns mean counts into counts.
type detector struct {
	gain, read, offset, top float64
	first, second           float64 // kernel that correlates neighbouring channels, of unit energy
	whole, quiet            bool    // round; no noise
	r                       *rand.Rand
	carry                   float64 // the last channel's own noise
}

func newDetector(n *Instrument, r *rand.Rand) detector {
	d := detector{gain: n.Gain, read: n.ReadNoise, offset: n.Offset, top: n.Saturation, r: r,
		whole: !n.Fractional && !n.Noiseless, quiet: n.Noiseless}
	if d.top == 0 {
		d.top = math.Inf(1)
	}
	// a² + b² = 1 keeps the variance (where it hardly changes from channel to channel), a b is the correlation.
	phi := math.Asin(2*n.Correlation) / 2
	d.first, d.second = math.Cos(phi), math.Sin(phi)
	return d
}

// measure stores in counts what the detector makes of mean counts, 0 and more, without offset.
func (d *detector) measure(counts []float32, mean []float64) {
	mean = mean[:len(counts)]
	if d.quiet {
		for i, m := range mean {
			counts[i] = float32(min(d.top, m+d.offset))
		}
		return
	}
	if d.second != 0 { // the channel before the first one has noise as well
		d.carry = d.electrons(mean[0]*d.gain)/d.gain - mean[0]
	}
	for i, m := range mean {
		v := d.electrons(m*d.gain) / d.gain
		if d.second != 0 {
			own := v - m
			v = m + d.first*own + d.second*d.carry
			d.carry = own
		}
		v += d.offset
		if d.whole {
			v = math.Floor(v + 0.5)
		}
		counts[i] = float32(min(d.top, v))
	}
}

// electrons draws what is read for a mean number of electrons: Poisson, then Gaussian read noise.
func (d *detector) electrons(mean float64) float64 {
	if mean > manyElectrons {
		return d.many(mean)
	}
	n := poisson(d.r, mean)
	if d.read > 0 {
		n += d.read * d.r.NormFloat64()
	}
	return n
}

// many draws electrons for large means from one normal number z, by the Cornish-Fisher expansion to the fourth cumulant
// (Biometrika 47, 209 (1960), the same in Abramowitz-Stegun 26.2.49). Poisson light with Gaussian read noise has the
// cumulants mean, mean + read², mean, mean. With little read noise, which is added afterwards, the result is a whole number:
// rounding adds 1/12 to the variance, which is taken off before.
func (d *detector) many(mean float64) float64 {
	n := expand(mean, d.read, d.r.NormFloat64())
	if d.read > 0 && d.read < wholeBelow {
		n += d.read * d.r.NormFloat64()
	}
	return n
}

func expand(mean, read, z float64) float64 {
	variance := mean + read*read
	if read < wholeBelow {
		variance = mean - 1./12
	}
	s := math.Sqrt(variance)
	k := mean / (variance * 6)         // s times a sixth of the skewness
	q := mean / (variance * s * 24)    // s times a twenty-fourth of the excess
	p := k * mean / (variance * s * 6) // s times a thirty-sixth of the skewness squared
	z2 := z * z
	v := mean + s*z + k*(z2-1) + z*(q*(z2-3)-p*(2*z2-5))
	if read < wholeBelow {
		v = math.Floor(v + 0.5)
	}
	return v
}

// wholeBelow is the read noise, electrons, that smears the steps between whole electrons: from 1 they are left with
// exp(-2π²), 3e-9 of their height.
const wholeBelow = 1

// poisson draws a Poisson number exactly. Below 10 by multiplying uniform numbers, above by transformed rejection with squeeze
// (Insur. Math. Econ. 12, 39 (1993), algorithm PTRS).
func poisson(r *rand.Rand, mean float64) float64 {
	if !(mean > 0) {
		return 0
	}
	if mean < 10 {
		floor, product, n := math.Exp(-mean), r.Float64(), 0
		for product > floor {
			product *= r.Float64()
			n++
		}
		return float64(n)
	}
	logMean := math.Log(mean)
	b := 0.931 + 2.53*math.Sqrt(mean)
	a := -0.059 + 0.02483*b
	invAlpha := 1.1239 + 1.1328/(b-3.4)
	accept := 0.9277 - 3.6224/(b-2)
	for {
		u, v := r.Float64()-0.5, r.Float64()
		us := 0.5 - math.Abs(u)
		k := math.Floor((2*a/us+b)*u + mean + 0.43)
		if us >= 0.07 && v <= accept {
			return k
		}
		if k < 0 || us < 0.013 && v > us {
			continue
		}
		lg, _ := math.Lgamma(k + 1)
		if math.Log(v)+math.Log(invAlpha)-math.Log(a/(us*us)+b) <= k*logMean-mean-lg {
			return k
		}
	}
}
