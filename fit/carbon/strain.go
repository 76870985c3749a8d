package carbon

import (
	"fmt"
	"math"
	"sync"

	"bandgrid/fit"
	"bandgrid/mapio/survey"
)

// A Plane is the plane of G and 2D positions, in which strain and hole doping move a single layer along two lines from an
// origin (Nat. Commun. 3, 1024 (2012), https://doi.org/10.1038/ncomms2022).
type Plane struct {
	G, TwoD      float64 // origin: no strain, no doping; cm-1
	GSE, TwoDSE  float64
	Strain, Hole float64 // slopes d2D/dG
	Rate         float64 // of G with strain, cm-1 per %
}

// PlaneAt returns the plane for a laser line, nm. Origin (1581.6 ± 0.2, 2676.9 ± 0.7) at 514.5 nm (from memory), moved by 88 cm-1
// per eV (from memory; 106 is in use too, which moves biaxial strain at 532 nm by 0.02 %); slopes 2.2 and 0.70 (seen in secondary);
// rate -57 cm-1 per % biaxial, of the Grüneisen parameter 1.8 (Phys. Rev. Applied 2, 054008 (2014)), or -23.5 uniaxial.
func PlaneAt(laser float64, uniaxial bool) Plane {
	p := Plane{G: 1581.6, TwoD: 2676.9 + 88*(photon(laser)-photon(514.5)), GSE: 0.2, Strain: 2.2, Hole: 0.70, Rate: -57}
	p.TwoDSE = math.Hypot(0.7, 18*(photon(laser)-photon(514.5)))
	if uniaxial {
		p.Rate = -23.5
	}
	return p
}

// Parts splits the positions of G and 2D, cm-1, into the shifts of G by strain and by holes, with their standard errors; the two
// positions have independent errors.
func (p Plane) Parts(g, gSE, td, tdSE float64) (strain, strainSE, hole, holeSE float64) {
	dg, dd, k := g-p.G, td-p.TwoD, p.Strain-p.Hole
	strain, hole = (dd-p.Hole*dg)/k, (p.Strain*dg-dd)/k
	return strain, math.Hypot(tdSE, p.Hole*gSE) / k, hole, math.Hypot(tdSE, p.Strain*gSE) / k
}

// Constants of the shift of G with doping (Phys. Rev. Lett. 97, 266407 (2006); Phys. Rev. B 91, 205413 (2015); from memory).
const (
	coupling    = 0.034  // λ_Γ
	phonon      = 0.1961 // ħω0, eV
	velocity    = 1.1e6  // m/s
	temperature = 300.   // K
	perEV       = 8065.544
	kB          = 8.617333e-5     // eV/K
	hbar        = 6.582119569e-16 // eV s
)

// fermi returns the Fermi energy, eV, of a density of carriers, 1e12 cm-2.
func fermi(density float64) float64 { return hbar * velocity * math.Sqrt(math.Pi*density*1e16) }

// HoleShift returns the shift of G, cm-1, of a single layer with that density of holes, 1e12 cm-2, at 300 K:
//
//	(λ/2π) P∫ [f(E-E_F) - f(E)] E² sgn(E)/(E² - (ħω0/2)²) dE
//
// The principal value comes from a lattice that is symmetric about the pole.
func HoleShift(density float64) float64 {
	ef := fermi(density)
	f := func(e float64) float64 { return 1 / (1 + math.Exp(e/(kB*temperature))) }
	g := func(e float64) float64 { // both signs of E together, E > 0
		return (f(e-ef) - f(e)) - (f(-e-ef) - f(-e))
	}
	const step = phonon / 2 / 400 // the pole lies half way between two points
	sum := 0.0
	for e := step / 2; e < ef+20*kB*temperature+phonon; e += step {
		sum += g(e) * e * e / (e*e - phonon*phonon/4) * step
	}
	return coupling / (2 * math.Pi) * sum * perEV
}

// holes is HoleShift at the densities 0.5, 0.6 ... 30, rising from 0.6 on: below, G does not tell (it even softens).
var holes = sync.OnceValue(func() (t []float64) {
	for k := range 296 {
		t = append(t, HoleShift(0.5+0.1*float64(k)))
	}
	return t
})

// leastHoles is the density, 1e12 cm-2, below which the shift of G does not tell the density.
const leastHoles = 0.5

// Holes returns the density of holes, 1e12 cm-2, that shifts G by so much, cm-1, and its derivative. It is 0 with the derivative
// at leastHoles where the shift is less than that density's, NaN beyond 3e13.
func Holes(shift float64) (density, slope float64) {
	holes := holes()
	n := len(holes)
	if shift > holes[n-1] {
		return math.NaN(), math.NaN()
	}
	k := 1
	for k < n-1 && holes[k] < shift {
		k++
	}
	slope = 0.1 / (holes[k] - holes[k-1])
	if shift < holes[0] {
		return 0, slope
	}
	return leastHoles + 0.1*float64(k-1) + slope*(shift-holes[k-1]), slope
}

// StrainSteps returns the step that gives strain and hole_density, of single layers in stage 1: biaxial strain, %, and holes,
// 1e12 cm-2.
//
// A pixel more than two standard errors on the side of the wedge where holes would be negative is left out: electron doping, a
// calibration that is off, or not a single layer. hole_density is 0 with its error below 5e11 cm-2, where G does not tell. The
// errors of the origin are common to all pixels and no part of theirs: 0.01 % of strain, 0.3 in 1e12 cm-2 (computed from them).
func StrainSteps(set Settings) []fit.Step {
	return []fit.Step{{
		Name: "strain and doping", Scope: fit.Local,
		Needs: []string{"g_position", "2d_position", "layer_number"}, Gives: []string{"strain", "hole_density"},
		Run: func(s *survey.Survey) error {
			if laser := set.laser(s); laser > 0 { // 2D moves with it
				decompose(s, PlaneAt(laser, false))
			}
			return nil
		},
	}}
}

func decompose(s *survey.Survey, p Plane) {
	g, td, number, st := s.Map("g_position"), s.Map("2d_position"), s.Map("layer_number"), s.Map("disorder_stage")
	n := len(g.Values)
	empty := func() []float32 {
		v := make([]float32, n)
		for i := range v {
			v[i] = float32(math.NaN())
		}
		return v
	}
	strain := survey.Quantity{Name: "strain", Unit: "%", Description: "biaxial strain of a single layer, from G and 2D position; tension is positive", Values: empty(), SE: empty()}
	hole := survey.Quantity{Name: "hole_density", Unit: "10^12 cm-2", Description: "density of holes in a single layer, from G and 2D position; 0 below 0.5, where G does not tell", Values: empty(), SE: empty()}
	outside := 0
	for i := range n {
		if number.Values[i] != 1 || st != nil && st.Values[i] != 1 {
			continue
		}
		e, ese, h, hse := p.Parts(float64(g.Values[i]), float64(g.SE[i]), float64(td.Values[i]), float64(td.SE[i]))
		if math.IsNaN(e) {
			continue
		}
		if h < -2*math.Hypot(hse, p.Strain*p.GSE) {
			outside++
			continue
		}
		strain.Values[i], strain.SE[i] = float32(e/p.Rate), float32(ese/math.Abs(p.Rate))
		if d, slope := Holes(h); !math.IsNaN(d) {
			hole.Values[i], hole.SE[i] = float32(d), float32(hse*math.Abs(slope))
		}
	}
	s.Put(strain)
	s.Put(hole)
	if outside > 0 {
		s.Warnings = append(s.Warnings, outsideWedge(outside))
	}
}

func outsideWedge(n int) string {
	return fmt.Sprintf("%d pixels of single layers lie outside what strain and hole doping can explain (electron doping, an axis that is off, or several layers): they have no strain", n)
}
