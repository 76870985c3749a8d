package render

import (
	"math"
	"math/rand/v2"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

var nan = math.NaN()

// flake makes a survey of cols by rows cells of 0.5 um: a flake of one to five layers on bare substrate, an edge zone that is
// undetermined, and a corner that was not measured.
func flake(cols, rows int) *survey.Survey {
	s := &survey.Survey{}
	s.Program = "bandgrid test"
	s.Laser = 532
	s.Runs = []survey.RunFile{{Name: "overnight.txt.zst", SHA256: "9f2c", Bytes: 1234567, Format: "text"}}
	s.Axis = survey.AxisInfo{Channels: 512, From: 1150, To: 2900}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: cols, Rows: rows, X0: 10, Y0: -4, DX: 0.5, DY: 0.5}
	if rows == 1 || cols == 1 {
		s.Grid.Layout = scan.Line
	}
	s.Complete = true
	n := cols * rows
	r := rand.New(rand.NewPCG(3, uint64(n)))
	s.X, s.Y = make([]float32, n), make([]float32, n)
	names := []string{"status", "g_position", "2d_width", "d_g_ratio", "d_position", "chi2", "layer_number", "layer_probability"}
	units := []string{"", "cm-1", "cm-1", "", "cm-1", "", "", ""}
	values := make([][]float32, len(names))
	for k := range values {
		values[k] = make([]float32, n)
		for i := range values[k] {
			values[k][i] = float32(nan)
		}
	}
	for i := range n {
		col, row := i%cols, i/cols
		x, y := s.Grid.Center(col, row)
		s.X[i], s.Y[i] = float32(x), float32(y)
		u, v := (float64(col)+0.5)/float64(cols), (float64(row)+0.5)/float64(rows)
		if u > 0.93 && v > 0.86 && n > 1 {
			s.Pixels.Missing++
			continue
		}
		radius := math.Hypot(u-0.45, 0.8*(v-0.5)) + 0.05*math.Sin(7*math.Atan2(v-0.5, u-0.45))
		layers := []float64{0.08, 0.16, 0.2, 0.26, 0.4}
		number := 0
		edge := false
		for k, limit := range layers {
			if radius < limit && number == 0 {
				number = 5 - k
			}
			edge = edge || math.Abs(radius-limit) < 0.006
		}
		values[0][i] = 1
		values[5][i] = float32(1 + 0.08*r.NormFloat64())
		if number == 0 {
			values[6][i] = 0
			values[7][i] = 0.99
			continue
		}
		values[1][i] = float32(1580 + 4*u + 2*v + 0.4*r.NormFloat64())
		values[2][i] = float32([]float64{0, 27, 52, 57, 63, 67}[number] + 1.2*r.NormFloat64())
		values[3][i] = float32(0.02 + 0.6*math.Exp(-60*((u-0.6)*(u-0.6)+(v-0.35)*(v-0.35))) + 0.02*r.NormFloat64())
		if values[3][i] > 0.1 {
			values[4][i] = float32(1345 + r.NormFloat64())
		}
		if !edge {
			values[6][i] = float32(number)
		}
		values[7][i] = float32(0.6 + 0.4*r.Float64())
	}
	for k, name := range names {
		s.Put(survey.Quantity{Name: name, Unit: units[k], Description: "made for a test", Values: values[k]})
	}
	s.Regions = []survey.Region{{ID: "all", Layer: nan, Pixels: n}, {ID: "1", Layer: 1}}
	for i, v := range values[6] {
		if v == 1 {
			s.Regions[1].Cells = append(s.Regions[1].Cells, int32(i))
		}
	}
	s.Pixels = survey.Pixels{Expected: n, Read: n - s.Pixels.Missing, Fitted: n - s.Pixels.Missing, Missing: s.Pixels.Missing}
	return s
}

// only makes a survey of one quantity from its values.
func only(cols, rows int, name, unit string, value func(i int) float64) *survey.Survey {
	s := flake(cols, rows)
	s.Maps = s.Maps[:1]
	q := survey.Quantity{Name: name, Unit: unit, Description: "made for a test", Values: make([]float32, cols*rows)}
	for i := range q.Values {
		q.Values[i] = float32(value(i))
	}
	s.Put(q)
	return s
}

// scattered makes a survey of n points off any grid.
func scattered(n int) *survey.Survey {
	s := flake(n, 1)
	s.Grid = scan.Grid{Layout: scan.Points, Cols: n, Rows: 1, DX: 2, DY: 2}
	r := rand.New(rand.NewPCG(8, 9))
	for i := range n {
		s.X[i], s.Y[i] = float32(40*r.Float64()), float32(25*r.Float64())
	}
	return s
}

// A sample is a survey and a quantity that a figure must cope with.
type sample struct {
	name     string
	survey   *survey.Survey
	quantity string
	opt      Options
}

func samples() []sample {
	list := []sample{
		{"layers", flake(60, 45), "layer_number", Options{}},
		{"ratio", flake(60, 45), "d_g_ratio", Options{}},
		{"position", flake(60, 45), "g_position", Options{}},
		{"d-position", flake(60, 45), "d_position", Options{}},
		{"probability", flake(60, 45), "layer_probability", Options{}},
		{"one-row", flake(200, 1), "g_position", Options{}},
		{"one-row-layers", flake(200, 1), "layer_number", Options{}},
		{"one-column", flake(1, 120), "2d_width", Options{}},
		{"wide", flake(500, 20), "d_g_ratio", Options{}},
		{"wide-layers", flake(500, 20), "layer_number", Options{}},
		{"tall", flake(20, 500), "d_g_ratio", Options{}},
		{"tall-layers", flake(20, 500), "layer_number", Options{}},
		{"two-rows", flake(400, 2), "2d_width", Options{}},
		{"one-pixel", only(1, 1, "g_position", "cm-1", func(int) float64 { return 1583.2 }), "g_position", Options{}},
		{"all-missing", only(12, 9, "g_position", "cm-1", func(int) float64 { return nan }), "g_position", Options{}},
		{"all-equal", only(12, 9, "spikes", "", func(int) float64 { return 3 }), "spikes", Options{}},
		{"all-zero", only(12, 9, "spikes", "", func(int) float64 { return 0 }), "spikes", Options{}},
		{"negative", only(40, 30, "d_height", "counts", func(i int) float64 { return -float64(i) / 7 }), "d_height", Options{}},
		{"tiny", only(40, 30, "strain", "%", func(i int) float64 { return 1e-9 * float64(i) }), "strain", Options{}},
		{"huge", only(40, 30, "defect_density", "cm-2", func(i int) float64 { return 1e11 * float64(i) }), "defect_density", Options{}},
		{"narrow-range", only(40, 30, "g_position", "cm-1", func(i int) float64 { return 1582 + 1e-3*float64(i%40) }), "g_position", Options{}},
		{"long-name", only(40, 30, "a_quantity", "10^12 cm-2", func(i int) float64 { return float64(i) }), "a_quantity", Options{}},
		{"points", scattered(60), "g_position", Options{}},
		{"points-layers", scattered(60), "layer_number", Options{}},
		{"small", flake(60, 45), "layer_number", Options{WidthMM: 5, DPI: 600}},
		{"narrow", flake(60, 45), "2d_width", Options{WidthMM: 40, DPI: 300}},
		{"big", flake(60, 45), "2d_width", Options{WidthMM: 400, DPI: 60}},
	}
	q := list[21].survey.Map("a_quantity")
	q.Description = "density of something that has an uncommonly long name because nobody found a short one for it in the recipe"
	oblique := flake(50, 1)
	oblique.Grid.Rise = 0.3
	far := flake(30, 30)
	far.Grid.X0, far.Grid.Y0 = 123456.7, -98765.4
	nine := flake(60, 45)
	for i := range nine.Map("layer_number").Values {
		nine.Map("layer_number").Values[i] = float32(i / 45 % 6)
	}
	return append(list, sample{"oblique", oblique, "2d_width", Options{}}, sample{"far", far, "g_position", Options{}}, sample{"classes", nine, "layer_number", Options{}})
}
