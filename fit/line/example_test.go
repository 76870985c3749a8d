package line_test

import (
	"fmt"

	"bandgrid/fit/line"
)

// A band of natural width 14 cm-1 seen through a spectrometer that widens a sharp line to 3 cm-1.
func ExampleVoigt() {
	band := line.Voigt{Instrument: 3}
	p := []float64{1000, 1582, 14} // height, position, natural width
	y := make([]float64, 3)
	band.Eval(y, nil, []float64{1572, 1582, 1592}, p)
	fmt.Printf("%.1f counts, FWHM %.2f cm-1, area %.0f counts cm-1\n", y, band.FWHM(p), band.Area(p))
	// Output: [345.4 1000.0 345.4] counts, FWHM 14.66 cm-1, area 22678 counts cm-1
}
