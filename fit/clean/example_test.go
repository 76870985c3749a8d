package clean_test

import (
	"fmt"

	"bandgrid/fit/clean"
)

// A narrow line is in the neighbouring pixels as well; a cosmic ray is not.
func ExampleNeighbours_Mark() {
	before, here, after := make([]float64, 40), make([]float64, 40), make([]float64, 40)
	for i := range here {
		ripple := 0.5 * float64(i%2) // stands in for noise
		before[i], here[i], after[i] = 100+ripple, 110-ripple, 105+ripple
	}
	before[10], here[10], after[10] = 150, 170, 160
	here[30], here[31] = 150, 118
	skip := make([]bool, len(here))
	marked := clean.NewNeighbours(len(here)).Mark(here, 1, 5, [][]float64{before, after}, skip)
	fmt.Println(marked, "channels; line:", skip[10], "ray:", skip[30], skip[31])
	// Output: 2 channels; line: false ray: true true
}
