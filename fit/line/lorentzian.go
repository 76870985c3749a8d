// Package line holds the profiles of Raman bands and what follows from them in closed form: derivatives, areas, widths.
//
// A band is described by its height (counts), position (cm-1) and width (cm-1, always the full width at half maximum), in this
// order, then by what else its [Shape] has. With a spectrometer of known resolution the band is a [Voigt] profile, whose width
// is that of the Lorentzian part: the natural one.
package line

import "math"

// Parameters of a band, in order.
const (
	Height   = iota // counts
	Position        // cm-1
	Width           // FWHM, cm-1, > 0
	Len             // number of parameters
)

// Lorentzian is H/(1+u²) with u = 2(x-x0)/FWHM: the profile of a transition with one lifetime, and the customary one for the
// bands of graphene.
type Lorentzian struct{}

// Eval stores the profile of a band with parameters p (height, position, FWHM) at x in y, and unless dh is nil its derivatives
// with respect to height, position and width in dh, dx and dw. All slices are as long as x. It keeps and changes neither x
// nor p.
func (Lorentzian) Eval(y, dh, dx, dw, x, p []float64) {
	h, x0, k := p[Height], p[Position], 2/p[Width]
	y = y[:len(x)]
	if dh == nil {
		for i, v := range x {
			u := (v - x0) * k
			y[i] = h * (1 / (1 + u*u)) // as below, to the last bit
		}
		return
	}
	dh, dx, dw = dh[:len(x)], dx[:len(x)], dw[:len(x)]
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

// Area returns the area, counts times cm-1, of a Lorentzian of that height and FWHM: π/2 times their product.
func (Lorentzian) Area(height, width float64) float64 { return math.Pi / 2 * height * width }
