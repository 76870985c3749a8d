package line

import "math"

// Voigt is a Lorentzian seen through an instrument of known width: the convolution with a Gaussian of FWHM Instrument (cm-1,
// >= 0). Its parameters are the height of the observed band, its position and the FWHM of the Lorentzian part, >= 0: the
// natural width. The zero value is the Lorentzian.
//
// With L, G the FWHM of the parts the profile is H K(X, Y)/K(0, Y), where K = Re w(X+iY), X = 2√ln2 (x-x0)/G, Y = √ln2 L/G and w
// is Faddeeva's function (J. Quant. Spectrosc. Radiat. Transf. 17, 233 (1977)). Its area is ½√(π/ln2) H G/K(0, Y).
type Voigt struct{ Instrument float64 }

// GaussWidth is the place of FreeVoigt's fourth parameter.
const GaussWidth = 3

// FreeVoigt is the profile of Voigt with the FWHM of the Gaussian part, cm-1, >= 0, as fourth parameter.
type FreeVoigt struct{}

// lorentzLimit is Y beyond which the Gaussian part changes less than one unit in the last place: 1/(2Y²) = 5e-17. There the
// profile is the Lorentzian, and its change with the Gaussian part the first term of its series in G².
const lorentzLimit = 1e8

var (
	sqrtLn2 = math.Sqrt(math.Ln2)
	inv8Ln2 = 1 / (8 * math.Ln2) // σ²/FWHM² of a Gaussian
)

func (Voigt) Len() int { return Len }

func (s Voigt) Eval(y []float64, d [][]float64, x, p []float64) {
	evalVoigt(y, d, x, p, s.Instrument)
}

func (s Voigt) Area(p []float64) float64 {
	v := newProfile(p[Width], s.Instrument)
	return p[Height] * v.area()
}

func (s Voigt) AreaGradient(g, p []float64) {
	v := newProfile(p[Width], s.Instrument)
	clear(g)
	g[Height] = v.area()
	byL, _ := v.areaGradient()
	g[Width] = p[Height] * byL
}

// FWHM returns the width of the observed band, wider than the natural one.
func (s Voigt) FWHM(p []float64) float64 { return VoigtFWHM(p[Width], s.Instrument) }

func (s Voigt) FWHMGradient(g, p []float64) {
	clear(g)
	g[Width], _ = voigtFWHMGradient(p[Width], s.Instrument)
}

func (Voigt) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }

func (FreeVoigt) Len() int { return 4 }

func (FreeVoigt) Eval(y []float64, d [][]float64, x, p []float64) {
	evalVoigt(y, d, x, p, p[GaussWidth])
}

func (FreeVoigt) Area(p []float64) float64 {
	v := newProfile(p[Width], p[GaussWidth])
	return p[Height] * v.area()
}

func (FreeVoigt) AreaGradient(g, p []float64) {
	v := newProfile(p[Width], p[GaussWidth])
	clear(g)
	g[Height] = v.area()
	byL, byG := v.areaGradient()
	g[Width], g[GaussWidth] = p[Height]*byL, p[Height]*byG
}

func (FreeVoigt) FWHM(p []float64) float64 { return VoigtFWHM(p[Width], p[GaussWidth]) }

func (FreeVoigt) FWHMGradient(g, p []float64) {
	clear(g)
	g[Width], g[GaussWidth] = voigtFWHMGradient(p[Width], p[GaussWidth])
}

func (FreeVoigt) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }

// evalVoigt is Eval of both shapes: the derivative by the Gaussian width only where there is a column for it.
func evalVoigt(y []float64, d [][]float64, x, p []float64, gauss float64) {
	h, x0 := p[Height], p[Position]
	v := newProfile(p[Width], gauss)
	if d == nil {
		for i, at := range x {
			y[i] = h * v.value(at-x0)
		}
		return
	}
	wantG := len(d) > GaussWidth
	for i, at := range x {
		f, byT, byL, byG := v.at(at-x0, wantG)
		y[i] = h * f
		d[Height][i], d[Position][i], d[Width][i] = f, -h*byT, h*byL
		if wantG {
			d[GaussWidth][i] = h * byG
		}
	}
}

// VoigtFWHM returns the FWHM of a Voigt profile from the FWHM of its Lorentzian and Gaussian parts, all in cm-1 and >= 0, to a
// few units in the last place: the half height is found by Newton's method from ApproximateVoigtFWHM, in 2 or 3 steps.
func VoigtFWHM(lorentz, gauss float64) float64 {
	if lorentz == 0 && gauss >= 0 {
		return gauss
	}
	v := newProfile(lorentz, gauss)
	if v.pure {
		return v.lorentz
	}
	t := ApproximateVoigtFWHM(lorentz, gauss) / 2
	for range 8 {
		f, slope, _, _ := v.at(t, false)
		step := (f - 0.5) / slope
		t -= step
		if math.Abs(step) <= 1e-9*t { // the next would be its square
			break
		}
	}
	return 2 * t
}

// ApproximateVoigtFWHM is VoigtFWHM by the closed formula 0.5346 L + √(0.2166 L² + G²), off by -0.020 % to +0.024 %.
// (J. Quant. Spectrosc. Radiat. Transf. 17, 233 (1977).)
func ApproximateVoigtFWHM(lorentz, gauss float64) float64 {
	return 0.5346*lorentz + math.Sqrt(0.2166*lorentz*lorentz+gauss*gauss)
}

// voigtFWHMGradient returns the derivatives of VoigtFWHM by the two widths: at half the height the change of the profile with
// a width is made good by a step along the slope.
func voigtFWHMGradient(lorentz, gauss float64) (byL, byG float64) {
	v := newProfile(lorentz, gauss)
	_, slope, byL, byG := v.at(VoigtFWHM(lorentz, gauss)/2, true)
	return -2 * byL / slope, -2 * byG / slope
}
