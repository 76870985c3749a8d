package lsq_test

import (
	"fmt"
	"math"

	"bandgrid/fit/lsq"
)

// A decay is fitted with its rate bounded from below. The residuals are in units of their standard deviation, so the
// covariance needs no factor.
func ExampleGeneral() {
	x := []float64{0, 1, 2, 3, 4, 5, 6, 7}
	y := []float64{99.5, 74.6, 54.5, 41.2, 29.9, 22.5, 16.4, 12.6}
	const noise = 0.5
	decay := lsq.Squares{
		Rows: len(x), Params: 2,
		Residuals: func(r, p []float64) {
			for i := range x {
				r[i] = (p[0]*math.Exp(-p[1]*x[i]) - y[i]) / noise
			}
		},
		Lower: []float64{math.Inf(-1), 0},
	}
	p := []float64{50, 1}
	solver := lsq.NewGeneral(len(x), 2)
	res := solver.Minimize(decay, p, lsq.GeneralSettings{})
	cov := make([]float64, 4)
	solver.Covariance(cov)
	fmt.Println(res.End)
	fmt.Printf("height %.1f ± %.1f\n", p[0], math.Sqrt(cov[0]))
	fmt.Printf("rate %.4f ± %.4f\n", p[1], math.Sqrt(cov[3]))
	// Output:
	// converged
	// height 99.7 ± 0.4
	// rate 0.2982 ± 0.0023
}
