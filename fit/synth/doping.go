package synth

import (
	"math"
	"sort"
	"sync"
)

// Coupling of electrons to the G phonon, from memory, Phys. Rev. Lett. 97, 266407 (2006), Nat. Mater. 6, 198 (2007).
const (
	phonon        = 0.1961   // G phonon, eV
	velocity      = 1.1e6    // Fermi velocity, m/s
	kT            = 0.025852 // 300 K, eV
	waveNumber    = 8065.544 // cm-1 per eV
	shiftCoupling = 0.034    // dimensionless; 0.028 to 0.034 are published
	widthCoupling = 0.028    // the lower end, so that an undoped layer has the width that is measured, 14 to 16
)

// fermiEnergy returns |E_F|, eV, at a carrier density, 1e12 cm-2.
func fermiEnergy(density float64) float64 {
	return 6.582120e-16 * velocity * math.Sqrt(math.Pi*math.Abs(density)*1e16)
}

// gDoping returns by how much carriers (1e12 cm-2, either sign) shift G, cm-1, and the width that decay into electron-hole
// pairs leaves it, cm-1, at 300 K.
func gDoping(density float64) (shift, width float64) {
	table := dopingTable()
	e := fermiEnergy(density)
	i := min(int(e/dopingStep), len(table)-2)
	t := e/dopingStep - float64(i)
	shift = table[i] + t*(table[i+1]-table[i])
	fermi := func(e float64) float64 { return 1 / (1 + math.Exp(e/kT)) }
	width = widthCoupling / 4 * phonon * waveNumber * (fermi(-phonon/2-e) - fermi(phonon/2-e))
	return shift, width
}

// dopingStep is the step of the table of shifts, eV: fine against kT, so that linear interpolation is good to 0.01 cm-1.
const dopingStep = 0.004

// dopingTable holds the shift of G, cm-1, against |E_F| up to 1.2 eV (about 9e13 cm-2), beyond which it is extrapolated:
//
//	λ/2π P∫ [f(E-E_F) - f(E)] E² sgn(E) / (E² - (ħω0/2)²) dE
//
// by the midpoint rule with points symmetric about both poles, where the principal value cancels.
var dopingTable = sync.OnceValue(func() []float64 {
	const half = phonon / 2
	const h = half / 50
	table := make([]float64, 300)
	for i := range table {
		ef := float64(i) * dopingStep
		top := int((ef + 0.9) / h)
		sum := 0.0
		for k := range top {
			e := (float64(k) + 0.5) * h
			// f(E-E_F) - f(E) above minus below zero; f(-x) = 1 - f(x).
			above := 1/(1+math.Exp((e-ef)/kT)) - 1/(1+math.Exp(e/kT))
			below := 1/(1+math.Exp((-e-ef)/kT)) - 1/(1+math.Exp(-e/kT))
			sum += (above - below) * e * e / (e*e - half*half)
		}
		table[i] = shiftCoupling / (2 * math.Pi) * sum * h * waveNumber
	}
	return table
})

// defectRatio returns D/G (heights) at a mean distance of point defects, nm, and a photon energy, eV: two-radius activation
// model with the constants of Nano Lett. 11, 3190 (2011), from memory.
func defectRatio(distance, energy float64) float64 {
	const rs2, ra2 = 1.0, 3.1 * 3.1 // nm²
	if distance <= 0 {
		return 0 // no defects
	}
	l2 := distance * distance
	return 160 / math.Pow(energy, 4) * (ra2 - rs2) / (ra2 - 2*rs2) *
		(math.Exp(-math.Pi*rs2/l2) - math.Exp(-math.Pi*(ra2-rs2)/l2))
}

// defectDistance is the inverse of defectRatio on the branch of few defects; at and above the maximum, the distance of the
// maximum. 0 stands for no defects.
func defectDistance(ratio, energy float64) float64 {
	if ratio <= 0 {
		return 0
	}
	// The maximum lies where both exponentials fall alike, independent of the energy.
	const rs2, ra2 = 1.0, 3.1 * 3.1
	low, high := math.Sqrt(math.Pi*(ra2-2*rs2)/math.Log((ra2-rs2)/rs2)), 1e4
	if ratio >= defectRatio(low, energy) {
		return low
	}
	// The ratio falls from low to high.
	for range 60 {
		mid := math.Sqrt(low * high)
		if defectRatio(mid, energy) > ratio {
			low = mid
		} else {
			high = mid
		}
	}
	return low
}

// damage returns the width, cm-1, that point defects at a distance (nm; 0 none) add to D, G and D', and the factor by which
// they weaken the area of 2D. The width follows the guide 5, 12, 35, 75 at 7, 5, 3, 2 nm (from memory, read off published
// figures) within 30 %; 2D/G falls below about 0.3 where G is 35 wide.
func damage(distance float64) (width, twoD float64) {
	if distance <= 0 {
		return 0, 1
	}
	return 152 * math.Exp(-distance/2.05), math.Exp(-math.Pi * 2.3 * 2.3 / (distance * distance))
}

// interpolate reads a table of x rising and y, constant beyond its ends.
func interpolate(x, y []float64, at float64) float64 {
	i := sort.SearchFloat64s(x, at)
	if i == 0 {
		return y[0]
	}
	if i == len(x) {
		return y[len(y)-1]
	}
	return y[i-1] + (y[i]-y[i-1])*(at-x[i-1])/(x[i]-x[i-1])
}
