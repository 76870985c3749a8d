package scan

import (
	"fmt"
	"math"
)

// An Axis is the Raman shift of each channel, cm-1, in the run's own order: strictly ascending or strictly descending,
// evenly spaced or not.
type Axis []float64

// Check returns an error that names the first channel out of order, or nil.
func (a Axis) Check() error {
	if len(a) < 2 {
		return fmt.Errorf("the axis has %d channels, at least 2 are needed", len(a))
	}
	up := a[len(a)-1] > a[0]
	for i, v := range a {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("channel %d of the axis is %v", i, v)
		}
		if i > 0 && (v > a[i-1]) != up || i > 0 && v == a[i-1] {
			return fmt.Errorf("the axis jumps back at channel %d: %g after %g", i, v, a[i-1])
		}
	}
	return nil
}

// Descending tells whether the first channel has the highest shift.
func (a Axis) Descending() bool { return len(a) > 1 && a[0] > a[len(a)-1] }

// Range returns the lowest and highest shift, cm-1.
func (a Axis) Range() (low, high float64) {
	if a.Descending() {
		return a[len(a)-1], a[0]
	}
	return a[0], a[len(a)-1]
}

// ShiftFromWavelength converts wavelengths in air, nm, to Raman shifts, cm-1, for a laser line in air, nm. A shift is a
// difference of vacuum wavenumbers; leaving the refractive index of air out makes it too large by 0.46 cm-1 at the G band and
// 0.77 cm-1 at the 2D band for 532 nm.
func ShiftFromWavelength(nm []float64, laser float64) Axis {
	axis := make(Axis, len(nm))
	k0 := VacuumWavenumber(laser)
	for i, v := range nm {
		axis[i] = k0 - VacuumWavenumber(v)
	}
	return axis
}

// VacuumWavenumber returns the vacuum wavenumber, cm-1, of light whose wavelength in standard air (15 °C, 101325 Pa, 450 ppm
// CO2) is nm. Refractive index: Appl. Opt. 35, 1566 (1996), https://doi.org/10.1364/AO.35.001566.
func VacuumWavenumber(nm float64) float64 {
	vacuum := nm
	for range 3 { // the index is a function of the vacuum wavelength; two rounds suffice
		s2 := 1e6 / (vacuum * vacuum) // um-2
		n := 1 + 1e-8*(5792105/(238.0185-s2)+167917/(57.362-s2))
		vacuum = nm * n
	}
	return 1e7 / vacuum
}
