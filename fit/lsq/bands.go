package lsq

import (
	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// Bands is a sum of bands over a polynomial background. Its parameters are the background's coefficients, lowest power first,
// then height, position and width of each band.
//
// The background's variable is t = (x - middle)/half-width of the channels given, so t runs from -1 to 1 and the coefficients
// have the unit of counts.
type Bands struct {
	X     []float64 // shift of each channel, cm-1, ascending
	Y     []float64 // counts; any finite value where the weight is zero
	RootW []float64 // square root of each channel's weight; change it with SetWeights

	order   int // of the background
	bands   int
	powers  [][]float64 // t^k
	columns [][]float64 // weighted derivatives by each parameter
	used    [][]float64 // the columns of the free parameters
	curve   []float64
	profile []float64
	resid   []float64
}

// NewBands returns the problem for channels at x with a background of that order and a number of bands.
func NewBands(x []float64, order, bands int) *Bands {
	n := len(x)
	b := &Bands{
		X: x, Y: make([]float64, n), RootW: make([]float64, n), order: order, bands: bands,
		curve: make([]float64, n), profile: make([]float64, n), resid: make([]float64, n),
	}
	mid, half := (x[0]+x[n-1])/2, (x[n-1]-x[0])/2
	for k := range order + 1 {
		power := make([]float64, n)
		for i, v := range x {
			power[i] = 1
			if k > 0 {
				power[i] = b.powers[k-1][i] * (v - mid) / half
			}
		}
		b.powers = append(b.powers, power)
	}
	for range b.Len() {
		b.columns = append(b.columns, make([]float64, n))
	}
	b.used = make([][]float64, 0, b.Len())
	return b
}

// Len is the number of parameters.
func (b *Bands) Len() int { return b.order + 1 + line.Len*b.bands }

// Background is the number of background coefficients; they come first.
func (b *Bands) Background() int { return b.order + 1 }

// Band returns the place of the first parameter (height) of band k.
func (b *Bands) Band(k int) int { return b.order + 1 + line.Len*k }

// Powers returns the background's basis functions, one slice per coefficient. Read only.
func (b *Bands) Powers() [][]float64 { return b.powers }

// SetWeights must be called after RootW was changed.
func (b *Bands) SetWeights() {
	for k, power := range b.powers {
		floats.MulTo(b.columns[k], power, b.RootW)
	}
}

// Curve stores the model at p in dst, len(b.X).
func (b *Bands) Curve(dst, p []float64) {
	b.Base(dst, p)
	for k := range b.bands {
		line.Lorentzian{}.Eval(b.profile, nil, nil, nil, b.X, p[b.Band(k):])
		floats.Add(dst, b.profile)
	}
}

// Base stores the background at p in dst.
func (b *Bands) Base(dst, p []float64) {
	clear(dst)
	for k, power := range b.powers {
		floats.AddScaled(dst, p[k], power)
	}
}

// Normal implements [Problem]. It allocates nothing.
func (b *Bands) Normal(a, g, p []float64, free []bool) float64 {
	b.Base(b.curve, p)
	for k := range b.bands {
		i := b.Band(k)
		c := b.columns[i : i+line.Len]
		line.Lorentzian{}.Eval(b.profile, c[line.Height], c[line.Position], c[line.Width], b.X, p[i:])
		floats.Add(b.curve, b.profile)
		for j := range c {
			if free[i+j] {
				floats.Mul(c[j], b.RootW)
			}
		}
	}
	floats.SubTo(b.resid, b.Y, b.curve)
	floats.Mul(b.resid, b.RootW)
	b.used = b.used[:0]
	for i, c := range b.columns {
		if free[i] {
			b.used = append(b.used, c)
		}
	}
	n := len(b.used)
	for i, ci := range b.used {
		for j, cj := range b.used[:i+1] {
			a[i*n+j] = floats.Dot(ci, cj)
		}
		g[i] = floats.Dot(ci, b.resid)
	}
	return floats.Dot(b.resid, b.resid)
}
