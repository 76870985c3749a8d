package lsq

import (
	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// channels are the data of a window and the background under its bands, a sum of given functions.
type channels struct {
	X     []float64 // shift of each channel, cm-1, ascending
	Y     []float64 // counts; any finite value where the weight is zero
	RootW []float64 // square root of each channel's weight; change it with SetWeights

	basis   [][]float64 // functions of the background
	columns [][]float64 // weighted derivatives by each parameter, those of the background first
	used    [][]float64 // the columns of the free parameters
	curve   []float64
	profile []float64
	resid   []float64
}

// newChannels makes room for a background of those functions and a number of further parameters.
func newChannels(x []float64, background [][]float64, further int) channels {
	n := len(x)
	v := func() []float64 { return make([]float64, n) }
	c := channels{X: x, Y: v(), RootW: v(), basis: background, curve: v(), profile: v(), resid: v()}
	for range len(background) + further {
		c.columns = append(c.columns, v())
	}
	c.used = make([][]float64, 0, len(c.columns))
	return c
}

// Polynomial returns the powers 0 to order of t = (x - middle)/half-width of the channels given: t runs from -1 to 1, and
// the coefficients of a background have the unit of counts.
func Polynomial(x []float64, order int) [][]float64 {
	var powers [][]float64
	mid, half := (x[0]+x[len(x)-1])/2, (x[len(x)-1]-x[0])/2
	for k := range order + 1 {
		power := make([]float64, len(x))
		for i, at := range x {
			power[i] = 1
			if k > 0 {
				power[i] = powers[k-1][i] * (at - mid) / half
			}
		}
		powers = append(powers, power)
	}
	return powers
}

// Background is the number of background coefficients; they are the first parameters.
func (c *channels) Background() int { return len(c.basis) }

// Basis returns the background's functions, one slice per coefficient. Read only.
func (c *channels) Basis() [][]float64 { return c.basis }

// SetWeights must be called after RootW was changed.
func (c *channels) SetWeights() {
	for k, power := range c.basis {
		floats.MulTo(c.columns[k], power, c.RootW)
	}
}

// Base stores the background at p in dst.
func (c *channels) Base(dst, p []float64) {
	clear(dst)
	for k, power := range c.basis {
		floats.AddScaled(dst, p[k], power)
	}
}

// normal makes the normal equations from the columns and the curve, as [Problem] asks.
func (c *channels) normal(a, g []float64, free []bool) float64 {
	floats.SubTo(c.resid, c.Y, c.curve)
	floats.Mul(c.resid, c.RootW)
	c.project(g, free)
	n := len(c.used)
	for i, ci := range c.used {
		for j, cj := range c.used[:i+1] {
			a[i*n+j] = floats.Dot(ci, cj)
		}
	}
	return floats.Dot(c.resid, c.resid)
}

// project stores in g the scalar products of the free columns and the weighted residuals.
func (c *channels) project(g []float64, free []bool) {
	c.used = c.used[:0]
	for i, column := range c.columns {
		if free[i] {
			g[len(c.used)] = floats.Dot(column, c.resid)
			c.used = append(c.used, column)
		}
	}
}

// Bands is a sum of bands over a background. Its parameters are the background's coefficients, in the order of its functions,
// then those of each band's shape: height, position, width, and what else it has.
//
// All are fitted together: eliminating heights and background from the search (variable projection) saves 2 to 4 % of the
// evaluations and none of the time (BenchmarkElimination).
type Bands struct {
	channels
	shapes    []line.Shape
	first     []int       // parameter of each band
	templates [][]float64 // profile of unit height that stands in for a band, or nil
}

// NewBands returns the problem for channels at x with a polynomial background of that order, see [Polynomial], and bands of those
// shapes.
func NewBands(x []float64, order int, shapes ...line.Shape) *Bands {
	return NewBandsOver(x, Polynomial(x, order), shapes...)
}

// NewBandsOver returns the problem for channels at x with a background made of the functions given, each with a value per
// channel. They are used, not copied.
func NewBandsOver(x []float64, background [][]float64, shapes ...line.Shape) *Bands {
	b := &Bands{shapes: shapes, templates: make([][]float64, len(shapes))}
	n := 0
	for _, s := range shapes {
		b.first = append(b.first, len(background)+n)
		n += s.Len()
	}
	b.channels = newChannels(x, background, n)
	return b
}

// Len is the number of parameters.
func (b *Bands) Len() int { return len(b.columns) }

// Band returns the place of the first parameter (height) of band k.
func (b *Bands) Band(k int) int { return b.first[k] }

// Shape returns the shape of band k.
func (b *Bands) Shape(k int) line.Shape { return b.shapes[k] }

// SetTemplate makes band k a fixed profile of unit height times the band's height, its only parameter that counts; nil makes it
// a band again. The profile is used, not copied.
func (b *Bands) SetTemplate(k int, profile []float64) { b.templates[k] = profile }

// Template tells whether band k is a fixed profile.
func (b *Bands) Template(k int) bool { return b.templates[k] != nil }

// Profile stores the contribution of band k at p, all parameters of the problem, in dst.
func (b *Bands) Profile(dst []float64, k int, p []float64) {
	p = p[b.first[k]:]
	if t := b.templates[k]; t != nil {
		floats.ScaleTo(dst, p[line.Height], t)
		return
	}
	b.shapes[k].Eval(dst, nil, b.X, p)
}

// Curve stores the model at p in dst, len(b.X).
func (b *Bands) Curve(dst, p []float64) {
	b.Base(dst, p)
	for k := range b.shapes {
		b.Profile(b.profile, k, p)
		floats.Add(dst, b.profile)
	}
}

// evaluate fills in the curve and the columns of the free parameters at p.
func (b *Bands) evaluate(p []float64, free []bool) {
	b.Base(b.curve, p)
	for k, shape := range b.shapes {
		i := b.first[k]
		c := b.columns[i : i+shape.Len()]
		if t := b.templates[k]; t != nil {
			floats.AddScaled(b.curve, p[i], t)
			floats.MulTo(c[line.Height], t, b.RootW)
			continue
		}
		shape.Eval(b.profile, c, b.X, p[i:])
		floats.Add(b.curve, b.profile)
		for j := range c {
			if free[i+j] {
				floats.Mul(c[j], b.RootW)
			}
		}
	}
}

// Normal implements [Problem]. It allocates nothing.
func (b *Bands) Normal(a, g, p []float64, free []bool) float64 {
	b.evaluate(p, free)
	return b.normal(a, g, free)
}

// Project stores in g, in the order of the free parameters, the scalar products of the model's derivatives at p with r, both
// weighted: J'Wr. r has a value per channel, counts.
func (b *Bands) Project(g, r, p []float64, free []bool) {
	b.evaluate(p, free)
	floats.MulTo(b.resid, r, b.RootW)
	b.project(g, free)
}

// Columns returns the weighted derivatives at the point where the problem was last evaluated, one slice for each of the free
// parameters then. Read only.
func (b *Bands) Columns() [][]float64 { return b.used }

// Squares returns the problem at its present counts and weights as a general one, for [General]. It shares the memory of b: one
// of the two is solved at a time.
func (b *Bands) Squares() Squares {
	all := make([]bool, b.Len())
	for i := range all {
		all[i] = true
	}
	n := b.Len()
	return Squares{
		Rows: len(b.X), Params: n,
		Residuals: func(r, p []float64) {
			b.Curve(r, p)
			for i, v := range r {
				r[i] = (v - b.Y[i]) * b.RootW[i]
			}
		},
		Jacobian: func(j, p []float64) {
			b.evaluate(p, all)
			for k, column := range b.columns {
				for i, v := range column {
					j[i*n+k] = v
				}
			}
		},
	}
}
