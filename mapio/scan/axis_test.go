package scan

import (
	"fmt"
	"math"
	"testing"
)

// TestVacuumWavenumber compares with neon lines: wavelengths in air of the NIST Atomic Spectra Database, and in vacuum by the
// equation of Appl. Opt. 35, 1566 (1996), computed apart; and n - 1 at 532 nm in air, 2.78208e-4, by the same, 2.78195e-4 by the
// equation of Metrologia 2, 71 (1966).
func TestVacuumWavenumber(t *testing.T) {
	for _, test := range []struct{ air, vacuum float64 }{
		{533.07775, 533.22604}, {534.10938, 534.25795}, {534.32834, 534.47697},
	} {
		if got := 1e7 / VacuumWavenumber(test.air); !(math.Abs(got-test.vacuum) <= 6e-6) {
			t.Errorf("%.5f nm in air: %.6f nm in vacuum, want %.5f", test.air, got, test.vacuum)
		}
	}
	n := 1e7 / VacuumWavenumber(532) / 532
	// The value is for 532 nm in vacuum, this one for 532 nm in air, where dispersion makes it smaller by 3e-9.
	if !(math.Abs(n-1-(2.78208e-4-3e-9)) <= 1e-9) || !(math.Abs(n-1-2.78195e-4) <= 2e-8) {
		t.Errorf("refractive index at 532 nm: 1 + %.6e", n-1)
	}
}

// TestShiftFromWavelength: leaving the index of air out makes shifts too large by 0.46 cm-1 at G and 0.77 cm-1 at 2D for 532 nm
// (computed apart).
func TestShiftFromWavelength(t *testing.T) {
	for _, test := range []struct{ shift, excess float64 }{{1582, 0.46}, {2670, 0.77}} {
		nm := 1e7 / (1e7/532 - test.shift) // as if there were no air
		got := ShiftFromWavelength([]float64{nm}, 532)[0]
		if !(math.Abs(test.shift-got-test.excess) <= 0.02) {
			t.Errorf("at %g cm-1 the index of air makes %.3f cm-1, want %.2f", test.shift, test.shift-got, test.excess)
		}
	}
}

func TestAxisCheck(t *testing.T) {
	for _, good := range []Axis{{1, 2}, {3, 2, 1}, {1, 1.5, 7}} {
		if err := good.Check(); err != nil {
			t.Errorf("%v: %v", good, err)
		}
	}
	for _, bad := range []Axis{nil, {1}, {1, 1}, {1, 2, 1.5}, {3, 2, 2}, {1, math.NaN()}, {1, math.Inf(1)}} {
		if bad.Check() == nil {
			t.Errorf("%v passes", bad)
		}
	}
}

func ExampleAxis_Range() {
	low, high := Axis{2850, 2000, 1200}.Range()
	fmt.Println(low, high)
	// Output: 1200 2850
}
