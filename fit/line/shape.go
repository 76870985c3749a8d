package line

import "math"

// A Shape is the profile of one band. Its parameters are Height (counts), Position (cm-1) and Width (cm-1), in this order, then
// those that change its form. Height is the profile's largest value and Position where it is taken, for every shape. Width is
// the FWHM, but for Voigt bands that of the Lorentzian part.
//
// Parameters outside the range that the shape states give NaN. No method keeps or changes its arguments, but for the
// results y, d and g.
type Shape interface {
	// Len is the number of parameters, 3 or more.
	Len() int
	// Eval stores the profile at x in y and, unless d is nil, its derivative by parameter k in d[k]: Len() columns. All are
	// as long as x.
	Eval(y []float64, d [][]float64, x, p []float64)
	// Area is the integral over all x, counts times cm-1; BreitWignerFano says what it means there.
	Area(p []float64) float64
	// AreaGradient stores the derivatives of the area in g, len Len(): the standard error of the area is √(gᵀCg) with C the
	// covariance of the parameters.
	AreaGradient(g, p []float64)
	// FWHM is the distance, cm-1, of the two points at half the height.
	FWHM(p []float64) float64
	// FWHMGradient stores the derivatives of the FWHM in g, len Len().
	FWHMGradient(g, p []float64)
	// Maximum returns where the profile is largest, cm-1, and its value there, counts. (Smallest, where the height is negative.)
	Maximum(p []float64) (position, height float64)
}

// Gaussian is H exp(-ln2 u²) with u = 2(x-x0)/FWHM: the profile of many unequal sites, or of the spectrometer. Area
// ½√(π/ln2) H FWHM.
type Gaussian struct{}

// gaussArea is area/(height · FWHM) of a Gaussian.
var gaussArea = math.Sqrt(math.Pi/math.Ln2) / 2

// lorentzArea is area/(height · FWHM) of a Lorentzian.
const lorentzArea = math.Pi / 2

func (Gaussian) Len() int { return Len }

func (Gaussian) Eval(y []float64, d [][]float64, x, p []float64) {
	h, x0, k := p[Height], p[Position], 2/p[Width]
	for i, v := range x {
		u := (v - x0) * k
		e := math.Exp(-math.Ln2 * u * u)
		y[i] = h * e
		if d != nil {
			s := 2 * math.Ln2 * k * u * h * e
			d[Height][i], d[Position][i], d[Width][i] = e, s, s*u/2
		}
	}
}

func (Gaussian) Area(p []float64) float64                       { return gaussArea * p[Height] * p[Width] }
func (Gaussian) AreaGradient(g, p []float64)                    { product(g, p, gaussArea) }
func (Gaussian) FWHM(p []float64) float64                       { return p[Width] }
func (Gaussian) FWHMGradient(g, p []float64)                    { only(g, Width) }
func (Gaussian) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }

// Mixing is the place of PseudoVoigt's fourth parameter, η.
const Mixing = 3

// PseudoVoigt is η L + (1-η) G, a Lorentzian and a Gaussian of the same height, position and FWHM. With the published
// mixing for a pair of widths it is within 1.3 % of the height of the Voigt profile (J. Appl. Cryst. 20, 79 (1987)). η is
// meant to be within [0, 1]; a little beyond does no harm.
type PseudoVoigt struct{}

func (PseudoVoigt) Len() int { return 4 }

func (PseudoVoigt) Eval(y []float64, d [][]float64, x, p []float64) {
	h, x0, k, eta := p[Height], p[Position], 2/p[Width], p[Mixing]
	for i, v := range x {
		u := (v - x0) * k
		e, l := math.Exp(-math.Ln2*u*u), 1/(1+u*u)
		f := eta*l + (1-eta)*e
		y[i] = h * f
		if d != nil {
			s := 2 * k * u * h * (eta*l*l + math.Ln2*(1-eta)*e)
			d[Height][i], d[Position][i], d[Width][i], d[Mixing][i] = f, s, s*u/2, h*(l-e)
		}
	}
}

func (PseudoVoigt) factor(p []float64) float64 {
	return p[Mixing]*lorentzArea + (1-p[Mixing])*gaussArea
}

func (s PseudoVoigt) Area(p []float64) float64 { return s.factor(p) * p[Height] * p[Width] }

func (s PseudoVoigt) AreaGradient(g, p []float64) {
	product(g, p, s.factor(p))
	g[Mixing] = (lorentzArea - gaussArea) * p[Height] * p[Width]
}

func (PseudoVoigt) FWHM(p []float64) float64                       { return p[Width] }
func (PseudoVoigt) FWHMGradient(g, p []float64)                    { only(g, Width) }
func (PseudoVoigt) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }

// product stores the gradient of c · height · width.
func product(g, p []float64, c float64) {
	clear(g)
	g[Height], g[Width] = c*p[Width], c*p[Height]
}

// only stores the gradient of parameter k.
func only(g []float64, k int) {
	clear(g)
	g[k] = 1
}
