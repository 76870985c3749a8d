package render_test

import (
	"fmt"
	"io"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render"
)

func ExampleMap() {
	s := &survey.Survey{}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: 3, Rows: 2, DX: 1, DY: 1}
	s.Put(survey.Quantity{Name: "g_position", Unit: "cm-1", Values: []float32{1581, 1582, 1583, 1582, 1583, 1584}})
	figure, err := render.Map(s, "g_position", render.Options{WidthMM: 80})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.0f mm wide: %s\n", figure.W, figure.Texts()[0].String)
	if err := figure.PNG(io.Discard); err != nil {
		fmt.Println(err)
	}
	// Output: 80 mm wide: G position (cm⁻¹)
}
