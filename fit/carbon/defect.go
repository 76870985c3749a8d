package carbon

import (
	"math"

	"bandgrid/fit"
	"bandgrid/mapio/survey"
)

// Activation is the two-radius model of D/G (heights) against the mean distance of point defects in one layer: a defect
// disorders the lattice within the radius rS, and activates the D band in a ring beyond it, up to rA.
//
//	I_D/I_G = C_A (rA²-rS²)/(rA²-2rS²) [exp(-πrS²/L²) - exp(-π(rA²-rS²)/L²)] + C_S [1 - exp(-πrS²/L²)]
//
// (Carbon 48, 1592 (2010), https://doi.org/10.1016/j.carbon.2009.12.057; constants from memory.)
type Activation struct{ RS, RA, CA, CS float64 } // nm, nm, pure numbers

// Activation2010 holds for 514.5 nm (Carbon 48, 1592 (2010), from memory).
var Activation2010 = Activation{RS: 1, RA: 3, CA: 4.2, CS: 0.87}

// ActivationAt is the set for lasers from 1.58 to 2.71 eV, in which D/G falls with the fourth power of the photon energy (Nano
// Lett. 11, 3190 (2011), https://doi.org/10.1021/nl201432g; constants from memory).
func ActivationAt(laser float64) Activation {
	e := photon(laser)
	return Activation{RS: 1, RA: 3.1, CA: 160 / (e * e * e * e)}
}

// photon returns the energy, eV, of light of that wavelength, nm.
func photon(nm float64) float64 { return 1239.842 / nm }

// Ratio returns D/G at a mean distance, nm.
func (a Activation) Ratio(distance float64) float64 {
	s, r := a.RS*a.RS, a.RA*a.RA
	q := math.Pi / (distance * distance)
	return a.CA*(r-s)/(r-2*s)*(math.Exp(-q*s)-math.Exp(-q*(r-s))) + a.CS*(1-math.Exp(-q*s))
}

// Turning returns the distance, nm, at which D/G is largest, and that D/G. With fewer or with more defects it is lower.
func (a Activation) Turning() (distance, ratio float64) {
	low, high := a.RS, 3*a.RA
	for range 80 { // golden section
		const g = 0.6180339887498949
		x, y := high-g*(high-low), low+g*(high-low)
		if a.Ratio(x) > a.Ratio(y) {
			high = y
		} else {
			low = x
		}
	}
	return (low + high) / 2, a.Ratio((low + high) / 2)
}

// Distance returns the mean distance, nm, at which D/G has a value: of stage 1, beyond the turning point, or of stage 2, before
// it. NaN where there is none: a ratio of 0 or less, or above the largest.
func (a Activation) Distance(ratio float64, stage int) float64 {
	turn, most := a.Turning()
	if !(ratio > 0 && ratio <= most) {
		return math.NaN()
	}
	low, high := turn, 1e4
	if stage == 2 {
		low, high = 0.2*a.RS, turn
		if ratio < a.Ratio(low) {
			return math.NaN()
		}
	} else if ratio < a.Ratio(high) {
		return math.NaN()
	}
	for range 100 { // bisection in the logarithm
		mid := math.Sqrt(low * high)
		if above := a.Ratio(mid) > ratio; above == (stage != 2) {
			low = mid
		} else {
			high = mid
		}
	}
	return math.Sqrt(low * high)
}

// Density returns the density of defects, cm-2, at a mean distance, nm: 1e14/(π L²) (Nano Lett. 11, 3190 (2011)).
func Density(distance float64) float64 { return 1e14 / (math.Pi * distance * distance) }

// DefectScale is the relative standard error that the model's constants give every defect density: common to all pixels, so it
// is no part of their errors. Half of it is that of a distance. (1.8 ± 0.5 in the prefactor; Nano Lett. 11, 3190 (2011), from
// memory.)
const DefectScale = 0.28

// Widths of G, cm-1, that tell the branch: below the first D/G rises with the number of defects (stage 1), above the second it
// falls (stage 2); between them it is undecided. (35 ± 10, with 2D below 0.3 of G in stage 2: from memory, read off published
// figures of Phys. Rev. B 82, 125429 (2010) and Carbon 95, 646 (2015).)
const (
	stageOneWidth = 25.
	stageTwoWidth = 45.
	stageTwo2DG   = 0.3
)

// stage returns 1, 2, or 1.5 where the branch is undecided, from the width of G with its error, 2D/G, and D/G against the
// largest that the model allows.
func stage(width, se, ratio2D, ratio, ratioSE, most float64) float64 {
	switch {
	case math.IsNaN(width):
		return math.NaN()
	case ratio+2*ratioSE >= 0.95*most && width < stageTwoWidth: // at the turning point the two branches meet
		return 1.5
	case width+se < stageOneWidth:
		return 1
	case width-se > stageTwoWidth && !(ratio2D > stageTwo2DG):
		return 2
	}
	return 1.5
}

// DefectSteps returns the step that gives disorder_stage, defect_distance and defect_density, for single layers: where the layer
// number is 1, or where it is undetermined but D/G is that of damaged film, which imitates layers.
//
// What happens beyond the range: at the turning point and between the branches disorder_stage is 1.5 and there is neither
// distance nor density; the distance is NaN where D/G is not at least three standard errors above zero, or beyond 100 nm, and
// the density is then linear in D/G, of either sign.
func DefectSteps(set Settings) []fit.Step {
	return []fit.Step{{
		Name: "defects", Scope: fit.Local,
		Needs: []string{"d_g_ratio", "g_width"}, Gives: []string{"disorder_stage", "defect_distance", "defect_density"},
		Run: func(s *survey.Survey) error {
			if laser := set.laser(s); laser > 0 { // D/G goes with its fourth power
				defects(s, ActivationAt(laser))
			}
			return nil
		},
	}}
}

const (
	damaged    = 0.3  // D/G from which undetermined film counts as damaged single layer
	sparse     = 100. // nm beyond which D/G is lost in what else makes D: edges, folds
	resolvable = 3    // standard errors that D/G must have for a distance
)

func defects(s *survey.Survey, a Activation) {
	ratio, width, number, r2d := s.Map("d_g_ratio"), s.Map("g_width"), s.Map("layer_number"), s.Map("2d_g_ratio")
	n := len(ratio.Values)
	quantity := func(name, unit, about string) survey.Quantity {
		q := survey.Quantity{Name: name, Unit: unit, Description: about, Values: make([]float32, n)}
		for i := range q.Values {
			q.Values[i] = float32(math.NaN())
		}
		return q
	}
	st := quantity("disorder_stage", "", "1 where D/G rises with the number of defects, 2 where it falls, 1.5 undecided; of single layers, by the width of G")
	distance := quantity("defect_distance", "nm", "mean distance of point defects in a single layer, from D/G by the activation model; a scale error of 14 % is common to all")
	density := quantity("defect_density", "cm-2", "density of point defects in a single layer; a scale error of 28 % is common to all; edges and folds show as defects")
	distance.SE, density.SE = quantity("", "", "").Values, quantity("", "", "").Values
	_, most := a.Turning()
	// Few defects: density = slope times D/G, from the model's limit.
	const far = 1000.
	slope := Density(far) / a.Ratio(far)
	for i := range n {
		r, rse := float64(ratio.Values[i]), float64(ratio.SE[i])
		one := number == nil || number.Values[i] == 1 || number.Values[i] != number.Values[i] && r > damaged
		if !one || math.IsNaN(r) {
			continue
		}
		v2d := math.NaN()
		if r2d != nil {
			v2d = float64(r2d.Values[i])
		}
		k := stage(float64(width.Values[i]), float64(width.SE[i]), v2d, r, rse, most)
		st.Values[i] = float32(k)
		if k != 1 && k != 2 {
			continue
		}
		l := a.Distance(r, int(k))
		if k == 1 && (math.IsNaN(l) || l > sparse || r < resolvable*rse) {
			density.Values[i], density.SE[i] = float32(slope*r), float32(slope*rse)
			continue
		}
		if math.IsNaN(l) {
			continue
		}
		h := 1e-4 * l
		slopeHere := (a.Ratio(l+h) - a.Ratio(l-h)) / (2 * h)
		se := math.Abs(rse / slopeHere)
		distance.Values[i], distance.SE[i] = float32(l), float32(se)
		density.Values[i], density.SE[i] = float32(Density(l)), float32(2*Density(l)*se/l)
	}
	for _, q := range []survey.Quantity{st, distance, density} {
		s.Put(q)
	}
}
