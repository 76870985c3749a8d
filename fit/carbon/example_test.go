package carbon_test

import (
	"fmt"
	"math"

	"bandgrid/fit"
	"bandgrid/fit/carbon"
	"bandgrid/mapio/survey"
)

// Four pixels, as the fit leaves them: one layer, two layers, bare substrate, and one that could not be fitted. A map this small
// has no single-layer level, so 2D width and 2D/G decide.
func Example() {
	nan := float32(math.NaN())
	s := &survey.Survey{}
	s.Laser = 532
	s.Grid.Rows, s.Grid.Cols = 1, 4
	for name, v := range map[string][2][]float32{
		"g_height":   {{400, 760, 3, nan}, {8, 9, 8, nan}},
		"g_width":    {{15, 15, nan, nan}, {0.4, 0.3, nan, nan}},
		"g_area":     {{9400, 17900, 70, nan}, {190, 210, 190, nan}},
		"2d_height":  {{1150, 790, -5, nan}, {9, 9, 8, nan}},
		"2d_width":   {{28, 51, nan, nan}, {0.3, 0.8, nan, nan}},
		"2d_g_ratio": {{2.9, 1.04, nan, nan}, {0.06, 0.02, nan, nan}},
	} {
		s.Put(survey.Quantity{Name: name, Values: v[0], SE: v[1]})
	}
	if err := fit.Apply(s, carbon.Steps(carbon.Settings{Film: carbon.Exfoliated})); err != nil {
		fmt.Println(err)
		return
	}
	for i, n := range s.Map("layer_number").Values {
		fmt.Printf("%g %.2f\n", n, s.Map("layer_probability").Values[i])
	}
	// Output:
	// 1 1.00
	// 2 0.93
	// 0 1.00
	// NaN NaN
}
