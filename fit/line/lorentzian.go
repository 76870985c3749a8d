// Package line holds the profiles of Raman bands and what follows from them in closed form: derivatives, areas, widths.
//
// A band is described by its height (counts), position (cm-1) and width (cm-1, always the full width at half maximum), in this
// order, then by what else its [Shape] has. With a spectrometer of known resolution the band is a [Voigt] profile, whose width
// is that of the Lorentzian part: the natural one.
package line

// Parameters of a band, in order.
const (
	Height   = iota // counts
	Position        // cm-1
	Width           // FWHM, cm-1, > 0
	Len             // number of parameters
)

// Lorentzian is H/(1+u²) with u = 2(x-x0)/FWHM: the profile of a transition with one lifetime, and the customary one for the
// bands of graphene. Area π/2 H FWHM.
type Lorentzian struct{}

func (Lorentzian) Len() int { return Len }

func (Lorentzian) Eval(y []float64, d [][]float64, x, p []float64) {
	h, x0, k := p[Height], p[Position], 2/p[Width]
	y = y[:len(x)]
	if d == nil {
		for i, v := range x {
			u := (v - x0) * k
			y[i] = h * (1 / (1 + u*u)) // as below, to the last bit
		}
		return
	}
	dh, dx, dw := d[Height][:len(x)], d[Position][:len(x)], d[Width][:len(x)]
	hx, hw := 2*h*k, h*k
	for i, v := range x {
		u := (v - x0) * k
		l := 1 / (1 + u*u)
		ul2 := u * l * l
		y[i] = h * l
		dh[i] = l
		dx[i] = hx * ul2
		dw[i] = hw * u * ul2
	}
}

func (Lorentzian) Area(p []float64) float64                       { return lorentzArea * p[Height] * p[Width] }
func (Lorentzian) AreaGradient(g, p []float64)                    { product(g, p, lorentzArea) }
func (Lorentzian) FWHM(p []float64) float64                       { return p[Width] }
func (Lorentzian) FWHMGradient(g, p []float64)                    { only(g, Width) }
func (Lorentzian) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }
