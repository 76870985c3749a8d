package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// A locator finds where in its range a strong band lies, and about how wide it is, by comparing the spectrum with profiles of
// many positions and widths (a matched filter). The profiles are made orthogonal to the background, so that neither its level
// nor its slope matters. The comparison takes one scalar product a profile.
type locator struct {
	places []place
	flat   []float64 // all profiles, one after the other
	score  []float64
	n      int // channels
}

// A place is a start for a band.
type place struct{ position, width float64 }

// narrowest is the smallest width that the band may have at that channel spacing, cm-1. What is narrower than two channels cannot
// be told from a cosmic ray. (Undersampled besides: the bound on the position's error is half as large again there.)
func (b Band) narrowest(spacing float64) float64 {
	if b.Narrow {
		return max(b.Widths[0], spacing/2)
	}
	return min(max(b.Widths[0], 2*spacing), b.Width)
}

// newLocator makes profiles for a band of the window on its channels x.
func newLocator(x []float64, powers [][]float64, b Band, shape line.Shape) *locator {
	l := &locator{n: len(x)}
	basis := orthonormal(powers)
	spacing := (x[len(x)-1] - x[0]) / float64(len(x)-1)
	low := max(b.Position+b.Shift[0], x[0])
	high := min(b.Position+b.Shift[1], x[len(x)-1])
	profile, p := make([]float64, len(x)), make([]float64, shape.Len())
	for j, f := range b.furthers() {
		p[line.Len+j] = f.start
	}
	// A profile that is off by half its width, or by a factor 1.3 in width, still has more than 80 % of the score.
	for width := b.narrowest(spacing); width <= b.Widths[1]; width *= 1.6 {
		steps := int(math.Ceil((high-low)/(width/2))) + 1
		for k := range steps {
			position := low + (high-low)*(float64(k)+0.5)/float64(steps)
			p[line.Height], p[line.Position], p[line.Width] = 1, position, width
			shape.Eval(profile, nil, x, p)
			project(profile, basis)
			norm := floats.Norm(profile, 2)
			if !(norm > 1e-6) {
				continue
			}
			floats.Scale(1/norm, profile)
			l.places = append(l.places, place{position, width})
			l.flat = append(l.flat, profile...)
		}
	}
	l.score = make([]float64, len(l.places))
	return l
}

// best returns the place that explains most of y, and the best one that is at least a width away from it.
func (l *locator) best(y []float64) (first, second place) {
	for k := range l.places {
		l.score[k] = floats.Dot(l.flat[k*l.n:(k+1)*l.n], y)
	}
	i := floats.MaxIdx(l.score)
	first = l.places[i]
	other := math.Inf(-1)
	second = first
	for k, p := range l.places {
		if math.Abs(p.position-first.position) > first.width && l.score[k] > other {
			other, second = l.score[k], p
		}
	}
	return first, second
}

// orthonormal returns an orthonormal basis of the functions given (Gram-Schmidt, twice for accuracy).
func orthonormal(functions [][]float64) [][]float64 {
	var basis [][]float64
	for _, f := range functions {
		e := append([]float64(nil), f...)
		for range 2 {
			for _, b := range basis {
				floats.AddScaled(e, -floats.Dot(b, e), b)
			}
		}
		floats.Scale(1/floats.Norm(e, 2), e)
		basis = append(basis, e)
	}
	return basis
}
