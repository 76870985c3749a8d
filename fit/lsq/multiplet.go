package lsq

import (
	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// Multiplet is a sum of bands of one shape and one common width over a background. Its parameters are the
// background's coefficients, the common width, then height and position of each component.
type Multiplet struct {
	channels
	shape  line.Shape
	n      int
	byW    []float64 // derivative of one component by its width
	of     [line.Len]float64
	onlyOf [line.Len][]float64
}

// NewMultiplet returns the problem of n components for channels at x over a background made of the functions given. The shape has
// no parameters but height, position and width.
func NewMultiplet(x []float64, background [][]float64, n int, shape line.Shape) *Multiplet {
	if shape.Len() != line.Len {
		panic("lsq: a multiplet's components have height, position and width only")
	}
	return &Multiplet{channels: newChannels(x, background, 1+2*n), shape: shape, n: n, byW: make([]float64, len(x))}
}

// Len is the number of parameters.
func (m *Multiplet) Len() int { return len(m.columns) }

// Width returns the place of the common width.
func (m *Multiplet) Width() int { return len(m.basis) }

// Component returns the place of the height of component k; its position follows.
func (m *Multiplet) Component(k int) int { return len(m.basis) + 1 + 2*k }

// Normal implements [Problem]. It allocates nothing.
func (m *Multiplet) Normal(a, g, p []float64, free []bool) float64 {
	m.Base(m.curve, p)
	w := m.Width()
	clear(m.columns[w])
	for k := range m.n {
		i := m.Component(k)
		m.of = [line.Len]float64{p[i], p[i+1], p[w]}
		m.onlyOf = [line.Len][]float64{m.columns[i], m.columns[i+1], m.byW}
		m.shape.Eval(m.profile, m.onlyOf[:], m.X, m.of[:])
		floats.Add(m.curve, m.profile)
		floats.Add(m.columns[w], m.byW)
		floats.Mul(m.columns[i], m.RootW)
		floats.Mul(m.columns[i+1], m.RootW)
	}
	floats.Mul(m.columns[w], m.RootW)
	return m.normal(a, g, free)
}
