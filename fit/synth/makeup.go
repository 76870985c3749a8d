package synth

import (
	"math"
	"math/rand/v2"
)

// A makeup is a 2D band as a sum of Lorentzians, scaled so that the single Lorentzian that fits it best has height 1 and
// position 0.
type makeup struct {
	parts []part
	width float64 // FWHM of that single Lorentzian, cm-1
}

type part struct{ offset, height, width float64 }

// publishedWidth is the FWHM of the single-Lorentzian 2D band and its spread from flake to flake for 1 to 5 layers on oxide at
// 532 nm, Small 6, 195 (2010), from memory; graphite, here from 10 layers, is common practice.
var publishedWidth = [...]struct{ mean, sd float64 }{{27.5, 3.8}, {51.7, 1.7}, {56.2, 1.6}, {63.1, 1.6}, {66.1, 1.4}, {70, 2}}

// Limits of the single layer's width: no narrower one has been seen (Sci. Adv. 1, e1500222 (2015)); wider than twice that is
// another material.
const narrowest, widest = 16.5, 38

// drawWidth draws the 2D width of an object.
func drawWidth(layers int, turbostratic bool, r *rand.Rand) float64 {
	z := r.NormFloat64()
	if layers == 1 || turbostratic {
		mean := publishedWidth[0].mean
		if layers > 5 {
			mean = 45 // towards 50 of turbostratic graphite, Phys. Rev. Lett. 97, 187401 (2006), from memory
		}
		return min(max(mean+publishedWidth[0].sd*z, narrowest), widest*mean/publishedWidth[0].mean)
	}
	p := publishedWidth[min(layers, 5)-1]
	if layers > 5 {
		t := min(1, float64(layers-5)/5)
		p.mean += t * (publishedWidth[5].mean - p.mean)
		p.sd += t * (publishedWidth[5].sd - p.sd)
	}
	return p.mean + p.sd*min(2.5, max(-2.5, z))
}

// newMakeup builds the 2D band of so many AB layers (or of turbostratic ones) so that its single-Lorentzian width is the one
// asked for, or the closest that the make-up can have; newMakeup's width says which.
//
// Two layers: four components of 24 cm-1 at the offsets of Phys. Rev. Lett. 97, 187401 (2006) for 514.5 nm (from memory, used at
// every laser), heights 0.25, 0.95, 1, 0.35 where the width is 51.7; the outer two vary with it. Three to nine: six components
// of 24 cm-1, a plateau with a shoulder, whose spacing varies. Graphite: two components 42 cm-1 apart of height ratio 1:2,
// whose width varies.
func newMakeup(layers int, turbostratic bool, width, skew float64) makeup {
	var parts []part
	var vary func(t float64) // the width rises with t
	low, high := 0.0, 3.0
	switch {
	case layers <= 1 || turbostratic:
		if skew == 0 {
			return makeup{[]part{{0, 1, width}}, width}
		}
		parts = []part{{0, 1 - skew, 0}, {12, skew, 0}}
		low, high = 1, width
		vary = func(t float64) { parts[0].width, parts[1].width = t, t }
	case layers == 2:
		parts = []part{{-44, 0, 24}, {-10, 0.95, 24}, {10, 1, 24}, {25, 0, 24}}
		vary = func(t float64) { parts[0].height, parts[3].height = 0.25*t, 0.35*t }
	case layers < 10:
		parts = []part{{0, 0.35, 24}, {0, 0.7, 24}, {0, 1, 24}, {0, 1, 24}, {0, 0.85, 24}, {0, 0.5, 24}}
		low, high = 0.2, 2.5
		vary = func(t float64) {
			for i, offset := range [...]float64{-36, -21, -7, 6, 18, 30} {
				parts[i].offset = t * offset
			}
		}
	default:
		parts = []part{{-42, 0.5, 0}, {0, 1, 0}}
		low, high = 10, 90
		vary = func(t float64) { parts[0].width, parts[1].width = t, t }
	}
	vary((low + high) / 2)
	var sum, at float64
	for _, p := range parts {
		sum += p.height * p.width
		at += p.height * p.width * p.offset
	}
	fit := part{at / sum, sum / 55, 55}
	for range 30 {
		mid := (low + high) / 2
		vary(mid)
		if fit = fitOne(parts, fit); fit.width < width {
			low = mid
		} else {
			high = mid
		}
	}
	for i := range parts {
		parts[i].offset -= fit.offset
		parts[i].height /= fit.height
	}
	return makeup{parts, fit.width}
}

// fitWindow is the half width, cm-1, of the window on which a band is compared with one Lorentzian over a linear background: as
// wide as the usual window for 2D. Published widths depend on it: a free background takes up part of the shoulders.
const fitWindow = 150

// fitOne returns the Lorentzian that, with a linear background, comes closest to a sum of Lorentzians by unweighted least
// squares on a grid of 1 cm-1 within fitWindow of the centre of gravity: Gauss-Newton from a start. The residual is small and
// smooth, so that it needs no damping.
func fitOne(parts []part, fit part) part {
	var sum, at float64
	for _, p := range parts {
		sum += p.height * p.width
		at += p.height * p.width * p.offset
	}
	at /= sum
	var level, slope float64
	for range 50 {
		var a [5][6]float64 // normal equations
		for i := -fitWindow; i <= fitWindow; i++ {
			x := at + float64(i)
			y := -level - slope*float64(i)
			for _, p := range parts {
				u := 2 * (x - p.offset) / p.width
				y += p.height / (1 + u*u)
			}
			u := 2 * (x - fit.offset) / fit.width
			l := 1 / (1 + u*u)
			row := [6]float64{l, fit.height * 4 * u * l * l / fit.width, fit.height * 2 * u * u * l * l / fit.width,
				1, float64(i), y - fit.height*l}
			for j := range 5 {
				for k := range 6 {
					a[j][k] += row[j] * row[k]
				}
			}
		}
		step := solve(a)
		fit.height += step[0]
		fit.offset += step[1]
		fit.width = max(fit.width/2, fit.width+step[2])
		level += step[3]
		slope += step[4]
		if math.Abs(step[1])+math.Abs(step[2]) < 1e-9 {
			break
		}
	}
	return fit
}

// solve solves five linear equations, of which a holds the matrix and the right-hand side, by elimination: the matrix is
// positive definite.
func solve(a [5][6]float64) (x [5]float64) {
	for i := range 5 {
		for j := i + 1; j < 5; j++ {
			f := a[j][i] / a[i][i]
			for k := i; k < 6; k++ {
				a[j][k] -= f * a[i][k]
			}
		}
	}
	for i := 4; i >= 0; i-- {
		x[i] = a[i][5]
		for k := i + 1; k < 5; k++ {
			x[i] -= a[i][k] * x[k]
		}
		x[i] /= a[i][i]
	}
	return x
}
