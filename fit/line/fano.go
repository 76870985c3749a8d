package line

import "math"

// Asymmetry is the place of BreitWignerFano's fourth parameter, q = 1/Q.
const Asymmetry = 3

// BreitWignerFano is the profile of a transition that interferes with a continuum, I0 (1+qs)²/(1+s²) with s = 2(x-xr)/Γ and
// q = 1/Q (Phys. Rev. 124, 1866 (1961), from memory), told by its maximum: since with s = tan φ and q = tan α it is
// I0 cos²(φ-α)/cos²α, it is also
//
//	H (1+qv)²/((1+qv)²+v²),  v = 2(x-x0)/((1-q²) W)
//
// with the largest value H = I0 (1+q²) at x0 = xr + qΓ/2 and the full width W = Γ (1+q²)/(1-q²) at H/2. These, and q, are the
// parameters; |q| < 1, as beyond the profile does not fall to half its height on one side. q = 0 is the Lorentzian, q > 0 has
// the higher wing above x0. Resonance returns I0, xr and Γ.
//
// Far away the profile tends to a level, H q²/(1+q²) (see Level), and has no finite area. Area is that above the level, as the
// limit of ranges with a fixed middle: π/2 H W ((1-q²)/(1+q²))², the Lorentzian's for q = 0.
type BreitWignerFano struct{}

func (BreitWignerFano) Len() int { return 4 }

func (BreitWignerFano) Eval(y []float64, d [][]float64, x, p []float64) {
	h, x0, width, q := p[Height], p[Position], p[Width], p[Asymmetry]
	k := 2 / ((1 - q*q) * width)
	if !(math.Abs(q) < 1) {
		k = math.NaN()
	}
	for i, at := range x {
		v := (at - x0) * k
		a := 1 + q*v
		n := 1 / (a*a + v*v)
		f := a * a * n
		y[i] = h * f
		if d != nil {
			slope := -2 * h * a * v * n * n // by v, q fixed
			d[Height][i] = f
			d[Position][i] = -k * slope
			d[Width][i] = -v / width * slope
			d[Asymmetry][i] = slope * (2*q/(1-q*q)*v - v*v) // v itself depends on q
		}
	}
}

// Level returns the value, counts, that the profile tends to on both sides.
func (BreitWignerFano) Level(p []float64) float64 {
	q2 := p[Asymmetry] * p[Asymmetry]
	return p[Height] * q2 / (1 + q2)
}

// Resonance returns the amplitude I0 (counts), the resonance xr (cm-1) and its width Γ (cm-1) of the customary form.
func (BreitWignerFano) Resonance(p []float64) (amplitude, resonance, width float64) {
	q := p[Asymmetry]
	width = p[Width] * (1 - q*q) / (1 + q*q)
	return p[Height] / (1 + q*q), p[Position] - q*width/2, width
}

func (BreitWignerFano) Area(p []float64) float64 {
	q2 := p[Asymmetry] * p[Asymmetry]
	r := (1 - q2) / (1 + q2)
	return lorentzArea * p[Height] * p[Width] * r * r
}

func (BreitWignerFano) AreaGradient(g, p []float64) {
	q := p[Asymmetry]
	n := 1 + q*q
	r := (1 - q*q) / n
	product(g, p, lorentzArea*r*r)
	g[Asymmetry] = lorentzArea * p[Height] * p[Width] * 2 * r * (-4 * q / (n * n))
}

func (BreitWignerFano) FWHM(p []float64) float64                       { return p[Width] }
func (BreitWignerFano) FWHMGradient(g, p []float64)                    { only(g, Width) }
func (BreitWignerFano) Maximum(p []float64) (position, height float64) { return p[Position], p[Height] }
