package plot

import "image/color"

// Point size: 72 to the inch.
const pt = 25.4 / 72

// A Style is what all figures have in common. Sizes are in mm.
type Style struct {
	Ground color.NRGBA
	Ink    color.NRGBA // text and frames
	Soft   color.NRGBA // lesser text and lines

	Title  float64 // em of titles
	Body   float64 // em of axis titles and legends
	Small  float64 // em of tick labels
	Stroke float64 // frames and ticks
	Tick   float64 // length of a tick
	Gap    float64 // between neighbours that belong together
	Bar    float64 // thickness of a colour bar
	Margin float64 // around the figure
}

// Light is dark ink on white, with body text of the given size in points; 0 means 8.5, which reads well in a column and, at
// twice the width, on a slide.
func Light(points float64) Style {
	if points == 0 {
		points = 8.5
	}
	em := points * pt
	return Style{
		Ground: color.NRGBA{255, 255, 255, 255},
		Ink:    color.NRGBA{28, 30, 34, 255},
		Soft:   color.NRGBA{92, 96, 104, 255},
		Title:  1.16 * em,
		Body:   em,
		Small:  0.9 * em,
		Stroke: 0.075 * em,
		Tick:   0.42 * em,
		Gap:    0.45 * em,
		Bar:    1.25 * em,
		Margin: 0.8 * em,
	}
}
