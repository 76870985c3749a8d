// Package plot is the drawing layer that all figures share. A [Figure] is a description: paths, texts and rasters at places in
// mm, y downwards from the upper left corner. [Figure.PNG] draws it; another drawer can use the same description.
package plot

import (
	"image/color"
	"math"
)

// A Point is a place in mm from the upper left corner.
type Point struct{ X, Y float64 }

// A Box is a rectangle in mm.
type Box struct{ X, Y, W, H float64 }

// Overlaps tells whether two boxes share an area.
func (b Box) Overlaps(c Box) bool {
	return b.X < c.X+c.W && c.X < b.X+b.W && b.Y < c.Y+c.H && c.Y < b.Y+b.H
}

// Inside tells whether the box lies within c, slack mm allowed.
func (b Box) Inside(c Box, slack float64) bool {
	return b.X >= c.X-slack && b.Y >= c.Y-slack && b.X+b.W <= c.X+c.W+slack && b.Y+b.H <= c.Y+c.H+slack
}

// An Item is a *Path, a *Text, a *Raster or a *Hatch.
type Item interface {
	transform(scale float64, by Point)
}

// A Path is one or more rings or lines with one fill and one stroke.
type Path struct {
	Rings  [][]Point
	Closed bool
	Fill   color.NRGBA // alpha 0: none
	Stroke color.NRGBA // alpha 0: none
	Width  float64     // of the stroke, mm
}

// A Text is one line. Superscript and subscript characters of Unicode (cm⁻¹, µm²) are drawn as raised or lowered smaller
// figures.
type Text struct {
	At     Point // on the baseline
	String string
	Size   float64 // mm: the em, not the height of capitals
	Bold   bool
	Align  Align
	Upward bool // reads from bottom to top
	Color  color.NRGBA
}

// Align says which part of a text is at its place.
type Align int

const (
	Left Align = iota
	Middle
	Right
)

// A Raster is a picture of Cols by Rows cells that fills a box; row 0 is the lowest. Cells of alpha 0 are left out.
type Raster struct {
	Box        Box
	Cols, Rows int
	Cells      []color.NRGBA
	// Mix averages the colours of cells that are smaller than a pixel of the drawing; otherwise the nearest cell is shown, as
	// classes need.
	Mix bool
}

// A Hatch fills a box with diagonal lines on a ground.
type Hatch struct {
	Box     Box
	Ground  color.NRGBA
	Line    color.NRGBA
	Spacing float64 // mm between lines
	Width   float64 // mm
}

// A Figure is a drawing of a size in mm, its items in the order in which they cover each other.
type Figure struct {
	W, H   float64
	Ground color.NRGBA
	Items  []Item
	DPI    float64 // dots per inch when drawn to pixels; 0 means 150
	Meta   [][2]string
}

// Add appends items.
func (f *Figure) Add(items ...Item) { f.Items = append(f.Items, items...) }

// Text adds a line of text and returns its box.
func (f *Figure) Text(t Text) Box {
	f.Add(&t)
	return t.Box()
}

// Line adds an open line.
func (f *Figure) Line(c color.NRGBA, width float64, points ...Point) {
	f.Add(&Path{Rings: [][]Point{points}, Stroke: c, Width: width})
}

// Rect adds a filled rectangle.
func (f *Figure) Rect(b Box, fill color.NRGBA) {
	f.Add(&Path{Rings: [][]Point{b.ring()}, Closed: true, Fill: fill})
}

// Frame adds the outline of a rectangle.
func (f *Figure) Frame(b Box, stroke color.NRGBA, width float64) {
	f.Add(&Path{Rings: [][]Point{b.ring()}, Closed: true, Stroke: stroke, Width: width})
}

func (b Box) ring() []Point {
	return []Point{{b.X, b.Y}, {b.X + b.W, b.Y}, {b.X + b.W, b.Y + b.H}, {b.X, b.Y + b.H}}
}

// Circle returns a disc's outline for a Path.
func Circle(center Point, radius float64) []Point {
	const corners = 32
	ring := make([]Point, corners)
	for i := range ring {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / corners)
		ring[i] = Point{center.X + radius*cos, center.Y + radius*sin}
	}
	return ring
}

// Texts returns the texts of the figure in order; with their boxes, tests find clipped and colliding ones.
func (f *Figure) Texts() []*Text {
	var list []*Text
	for _, item := range f.Items {
		if t, ok := item.(*Text); ok {
			list = append(list, t)
		}
	}
	return list
}

// Scale makes the whole figure larger or smaller, letters and lines with it.
func (f *Figure) Scale(by float64) {
	f.W *= by
	f.H *= by
	for _, item := range f.Items {
		item.transform(by, Point{})
	}
}

// Place moves the items of another figure to a corner and adds them. The other figure must not be used afterwards.
func (f *Figure) Place(other *Figure, at Point) {
	for _, item := range other.Items {
		item.transform(1, at)
	}
	f.Add(other.Items...)
}

func (p Point) moved(scale float64, by Point) Point {
	return Point{p.X*scale + by.X, p.Y*scale + by.Y}
}

func (b Box) moved(scale float64, by Point) Box {
	return Box{b.X*scale + by.X, b.Y*scale + by.Y, b.W * scale, b.H * scale}
}

func (p *Path) transform(scale float64, by Point) {
	for _, ring := range p.Rings {
		for i := range ring {
			ring[i] = ring[i].moved(scale, by)
		}
	}
	p.Width *= scale
}

func (t *Text) transform(scale float64, by Point) {
	t.At = t.At.moved(scale, by)
	t.Size *= scale
}

func (r *Raster) transform(scale float64, by Point) { r.Box = r.Box.moved(scale, by) }

func (h *Hatch) transform(scale float64, by Point) {
	h.Box = h.Box.moved(scale, by)
	h.Spacing *= scale
	h.Width *= scale
}
