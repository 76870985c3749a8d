package carbon

import (
	"math"
	"math/cmplx"
)

// The stack is air, N layers of graphene, SiO2, silicon, at normal incidence: the laser light and the Raman light both bounce
// in it, so a band's height depends on the oxide and is not quite proportional to N. (Model and formulas: Appl. Phys. Lett. 92,
// 043121 (2008) and Phys. Rev. B 80, 125422 (2009), from memory.)

// layerThickness is the thickness of one layer, nm.
const layerThickness = 0.335

// graphiteIndex is the refractive index of graphene, n - ik: 2.6-1.3i (Appl. Phys. Lett. 91, 063124 (2007), from memory). Other
// sources give 2.0-1.1i and 2.68-1.22i: below 1 % on one layer.
const graphiteIndex = complex(2.6, -1.3)

// siliconFrom, siliconStep: wavelengths of siliconIndex, nm.
const siliconFrom, siliconStep = 440, 20

// siliconIndex is n and k of silicon at 300 K from 440 to 800 nm (Sol. Energy Mater. Sol. Cells 92, 1305 (2008)).
var siliconIndex = [...][2]float64{
	{4.812, 0.107}, {4.587, 0.071381}, {4.419, 0.055004}, {4.294, 0.044165}, {4.193, 0.036415}, {4.112, 0.030295},
	{4.045, 0.025758}, {3.988, 0.022524}, {3.940, 0.019934}, {3.898, 0.017367}, {3.861, 0.015432}, {3.828, 0.013498},
	{3.798, 0.011905}, {3.772, 0.010528}, {3.748, 0.0096257}, {3.727, 0.008362}, {3.708, 0.007197}, {3.691, 0.0063933},
	{3.675, 0.0054113},
}

// silicon interpolates the index of silicon. Beyond the table it takes the nearest value.
func silicon(nm float64) complex128 {
	at := (nm - siliconFrom) / siliconStep
	last := float64(len(siliconIndex) - 1)
	at = min(max(at, 0), last)
	i := int(min(at, last-1))
	f := at - float64(i)
	a, b := siliconIndex[i], siliconIndex[i+1]
	return complex(a[0]+f*(b[0]-a[0]), -(a[1] + f*(b[1]-a[1])))
}

// silica is the index of fused silica at 20 °C, 0.21 to 3.71 um (J. Opt. Soc. Am. 55, 1205 (1965)).
func silica(nm float64) complex128 {
	u := nm * nm * 1e-6
	n2 := 1 + 0.6961663*u/(u-0.0684043*0.0684043) + 0.4079426*u/(u-0.1162414*0.1162414) + 0.8974794*u/(u-9.896161*9.896161)
	return complex(math.Sqrt(n2), 0)
}

// enhancement returns the intensity of a band of that shift, cm-1, from a film of that many layers on oxide of that thickness,
// nm, up to a factor that is about the same for all bands: ratios of its values mean something, single values do not.
func enhancement(laser, shift, oxide float64, layers int) float64 {
	in := newStack(laser, oxide, layers)
	out := newStack(1/(1/laser-shift*1e-7), oxide, layers)
	// Simpson's rule; the field varies over tens of nm.
	steps := 2 * (8 + layers/2)
	h := in.thickness / float64(steps)
	sum := 0.0
	for i := 0; i <= steps; i++ {
		x := h * float64(i)
		f := cmplx.Abs(in.field(x, in.enter) * out.field(x, out.leave))
		weight := 2.0
		switch {
		case i == 0 || i == steps:
			weight = 1
		case i%2 == 1:
			weight = 4
		}
		sum += weight * f * f
	}
	return sum * h / 3
}

// A stack holds the amplitudes of one film at one wavelength.
type stack struct {
	thickness    float64 // of the graphene, nm
	wave         complex128
	enter, leave complex128 // transmission of the upper face, inwards and outwards
	forth, back  complex128 // of the waves towards and from the oxide
}

func newStack(nm, oxide float64, layers int) stack {
	const air, film = complex(1, 0), graphiteIndex
	ox, si := silica(nm), silicon(nm)
	s := stack{thickness: layerThickness * float64(layers), wave: complex(2*math.Pi/nm, 0) * film}
	r1, r2, r3 := (air-film)/(air+film), (film-ox)/(film+ox), (ox-si)/(ox+si)
	s.enter, s.leave = 2*air/(air+film), 2*film/(air+film)
	trip := cmplx.Exp(-2i * complex(2*math.Pi*oxide/nm, 0) * ox)
	whole := s.wave * complex(s.thickness, 0)
	forth, back := 1+r2*r3*trip, (r2+r3*trip)*cmplx.Exp(-2i*whole)
	round := forth + back*r1
	s.forth, s.back = forth/round, back/round
	return s
}

// field returns the amplitude at depth x, nm.
func (s *stack) field(x float64, t complex128) complex128 {
	phase := s.wave * complex(x, 0)
	return t * (s.forth*cmplx.Exp(-1i*phase) + s.back*cmplx.Exp(1i*phase))
}
