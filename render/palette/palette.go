// Package palette holds the colours of figures. All are computed in OKLab from a few numbers that stand here with their reasons:
// lightness carries the value, so that a figure survives grey printing and colour-deficient eyes; hue tells kinds of quantity
// apart.
package palette

import (
	"image/color"
	"math"
)

// A Ramp maps 0 to 1 onto colours.
type Ramp struct {
	Name  string
	table [256]color.NRGBA
	path  func(t float64) Lab
}

// At returns the colour at t, cut to 0 to 1. t must not be NaN.
func (r *Ramp) At(t float64) color.NRGBA {
	return r.table[int(math.Round(255*min(1, max(0, t))))]
}

// The sequential ramps go from dark to light. Each stays within its own part of the hue circle, and none is grey anywhere: grey
// is kept for cells without a value.
var (
	// Water is for positions of bands: deep blue through sea green to a pale reed.
	Water = sequential("water", 0.24, 0.93, 282, 128, 0.092)
	// Copper is for ratios that tell of defects: wine through copper to a pale straw.
	Copper = sequential("copper", 0.24, 0.93, 348, 92, 0.125)
	// Moss is for widths, heights, areas and all else: dark pine through moss to a pale lime.
	Moss = sequential("moss", 0.24, 0.93, 190, 106, 0.090)
	// Tide is for changes: blue for a fall, copper for a rise, near white in the middle where nothing changed.
	Tide = diverging("tide", 0.44, 0.965, 255, 38, 0.115)
)

// sequential runs from lightness l0 at hue h0 to l1 at h1 (degrees, the short way round). Chroma rises to its peak a little
// below the middle, where screens have room for it, and stays above a third of it at both ends.
func sequential(name string, l0, l1, h0, h1, peak float64) *Ramp {
	turn := math.Mod(h1-h0+540, 360) - 180
	r := &Ramp{Name: name}
	r.fill(func(t float64) Lab {
		c := peak * (0.36 + 0.64*math.Sin(math.Pi*math.Pow(t, 0.9)))
		return LCH(l0+(l1-l0)*t, c, h0+turn*t)
	})
	return r
}

// diverging runs from lightness l0 at hue h0 over l1 in the middle to l0 at h1; both arms mirror each other in lightness.
func diverging(name string, l0, l1, h0, h1, peak float64) *Ramp {
	r := &Ramp{Name: name}
	r.fill(func(t float64) Lab {
		h, u := h0, 1-2*t // u: 1 at the ends, 0 in the middle
		if t > 0.5 {
			h, u = h1, 2*t-1
		}
		return LCH(l1-(l1-l0)*u, peak*math.Sin(math.Pi/2*math.Pow(u, 0.8)), h)
	})
	return r
}

// fill tabulates a path at equal steps of colour difference.
func (r *Ramp) fill(path func(t float64) Lab) {
	r.path = path
	const fine = 4096
	var length [fine + 1]float64
	last := path(0)
	for i := 1; i <= fine; i++ {
		p := path(float64(i) / fine)
		length[i] = length[i-1] + p.Distance(last)
		last = p
	}
	j := 0
	for i := range r.table {
		want := length[fine] * float64(i) / 255
		for j < fine-1 && length[j+1] < want {
			j++
		}
		part := (want - length[j]) / (length[j+1] - length[j])
		r.table[i] = path((float64(j) + part) / fine).RGB()
	}
}

// Layers are the colours of layer numbers 0 (bare), 1, 2, 3, 4 and 5 or more. Each is darker than the one before by 0.12 or
// more, as more carbon is; the single layer, which people look for, is the brightest of the strong colours.
var Layers = [6]color.NRGBA{
	LCH(0.945, 0.055, 90).RGB(), // sand
	LCH(0.80, 0.105, 212).RGB(), // turquoise
	LCH(0.60, 0.145, 262).RGB(), // blue
	LCH(0.47, 0.170, 302).RGB(), // violet
	LCH(0.34, 0.120, 2).RGB(),   // wine
	LCH(0.20, 0.030, 50).RGB(),  // near black
}

// Of those without a value.
var (
	// Undetermined fills cells that were measured but have no value: a flat grey of a lightness no layer number has.
	Undetermined = LCH(0.70, 0, 0).RGB()
	// Missing and MissingLine are ground and lines of the hatching over cells that were not measured.
	Missing     = LCH(1, 0, 0).RGB()
	MissingLine = LCH(0.58, 0, 0).RGB()
)
