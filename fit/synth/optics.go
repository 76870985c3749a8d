package synth

import (
	"math"
	"math/cmplx"
)

// optics is the stack air / graphene / silicon dioxide / silicon under the laser.
type optics struct {
	laser, oxide float64 // nm
}

func newOptics(laser, oxide float64) optics { return optics{laser, oxide} }

// Refractive index of silicon at 300 K against wavelength, nm: Sol. Energy Mater. Sol. Cells 92, 1305 (2008). Constant beyond.
var (
	siliconNM = []float64{488, 514.5, 532, 580, 600, 620, 640, 660, 700}
	siliconN  = []float64{4.364, 4.219, 4.143, 3.988, 3.940, 3.898, 3.861, 3.828, 3.772}
	siliconK  = []float64{0.0503, 0.0380, 0.0325, 0.0225, 0.0199, 0.0174, 0.0154, 0.0135, 0.0105}
)

const (
	graphene  = complex(2.6, -1.3) // index; from memory, Appl. Phys. Lett. 91, 063124 (2007)
	thickness = 0.335              // of a layer, nm
)

// enhancement returns the intensity of a band at that shift, cm-1, from a film of n layers, over that of the free-standing
// single layer: absorption and emission at each depth with all reflections, at normal incidence (Appl. Phys. Lett. 92, 043121
// (2008); Phys. Rev. B 80, 125422 (2009)).
func (o optics) enhancement(n int, shift float64) float64 {
	return o.collected(float64(n), shift, false) / o.collected(1, shift, true)
}

func (o optics) collected(n, shift float64, free bool) float64 {
	raman := 1e7 / (1e7/o.laser - shift)
	d := n * thickness
	const steps = 20 // Simpson's rule; the integrand hardly bends
	sum := 0.0
	for i := range steps + 1 {
		weight := 2.0
		switch {
		case i == 0 || i == steps:
			weight = 1
		case i%2 == 1:
			weight = 4
		}
		x := d * float64(i) / steps
		f := cmplx.Abs(o.field(x, d, o.laser, true, free) * o.field(x, d, raman, false, free))
		sum += weight * f * f
	}
	return sum * d / steps / 3
}

// field returns the amplitude at depth x in a film of thickness d, nm, of light of a wavelength, nm, that falls in (or, by
// reciprocity, that gets out).
func (o optics) field(x, d, wavelength float64, in, free bool) complex128 {
	n2, n3 := complex(silicaIndex(wavelength), 0), complex(interpolate(siliconNM, siliconN, wavelength),
		-interpolate(siliconNM, siliconK, wavelength))
	if free {
		n2, n3 = 1, 1
	}
	phase := func(n complex128, length float64) complex128 {
		return cmplx.Exp(complex(0, -2*math.Pi*length/wavelength) * n)
	}
	r1 := (1 - graphene) / (1 + graphene)
	r2 := (graphene - n2) / (graphene + n2)
	r3 := (n2 - n3) / (n2 + n3)
	t := 2 / (1 + graphene)
	if !in {
		t *= graphene
	}
	oxide := phase(n2, 2*o.oxide)
	a, b := 1+r2*r3*oxide, r2+r3*oxide
	return t * (a*phase(graphene, x) + b*phase(graphene, 2*d-x)) / (a + b*r1*phase(graphene, 2*d))
}

// silicaIndex returns the index of fused silica (J. Opt. Soc. Am. 55, 1205 (1965)).
func silicaIndex(nm float64) float64 {
	l2 := nm * nm * 1e-6
	return math.Sqrt(1 + 0.6961663*l2/(l2-0.0684043*0.0684043) + 0.4079426*l2/(l2-0.1162414*0.1162414) +
		0.8974794*l2/(l2-9.896161*9.896161))
}
