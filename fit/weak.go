package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// A weak is what stands in for a band that is too weak to be located: only its height is estimated, with a fixed profile.
//
// The band's true place differs from the expected one, and a profile at the expected place would on average see too little of
// it. The mean of the profiles at all the places where the band may be does not: over the map, the estimate is right. For one
// pixel it is not, and miss says by how much.
type weak struct {
	position, width float64   // expected, cm-1
	profile         []float64 // mean of profiles of unit height, one value per channel
	miss            float64   // standard deviation of the estimate over the height, from the unknown place alone
	// further places to look at when the band does not show at the expected one: profiles of unit norm, free of background
	elsewhere []place
	filters   [][]float64
}

// weaken makes the profiles of all bands.
func (w *windowPlan) weaken() {
	w.weak = nil
	if len(w.x) < 2 {
		return
	}
	basis := orthonormal(w.basis)
	for k, b := range w.Bands {
		w.weak = append(w.weak, newWeak(b, w.shapes[k], w.x, basis))
	}
}

func newWeak(b Band, shape line.Shape, x []float64, basis [][]float64) weak {
	k := weak{position: b.Position, width: b.Width, profile: make([]float64, len(x))}
	p := make([]float64, shape.Len())
	for j, f := range b.furthers() {
		p[line.Len+j] = f.start
	}
	at := func(dst []float64, position, width float64) {
		p[line.Height], p[line.Position], p[line.Width] = 1, position, max(width, b.Widths[0])
		shape.Eval(dst, nil, x, p)
	}
	// Both differences taken as normal, on a lattice of half standard deviations.
	one := make([]float64, len(x))
	each := func(do func(weight float64)) {
		const reach = 5
		for i := -reach; i <= reach; i++ {
			for j := -reach; j <= reach; j++ {
				u, v := float64(i)/2, float64(j)/2
				at(one, b.Position+u*b.Spread[0], b.Width+v*b.Spread[1])
				do(math.Exp(-(u*u + v*v) / 2))
			}
		}
	}
	sum := 0.0
	each(func(weight float64) {
		floats.AddScaled(k.profile, weight, one)
		sum += weight
	})
	floats.Scale(1/sum, k.profile)
	clean := append([]float64(nil), k.profile...)
	project(clean, basis)
	norm := floats.Dot(clean, clean)
	each(func(weight float64) {
		d := floats.Dot(clean, one)/norm - 1
		k.miss += weight / sum * d * d
	})
	k.miss = math.Sqrt(k.miss)
	// A band that may be far from its expected place is looked for there too.
	if !b.Search && b.Shift[1]-b.Shift[0] > 2*b.Width {
		for position := b.Position + b.Shift[0]; position <= b.Position+b.Shift[1]; position += b.Width / 3 {
			filter := make([]float64, len(x))
			at(filter, position, b.Width)
			project(filter, basis)
			floats.Scale(1/floats.Norm(filter, 2), filter)
			k.elsewhere = append(k.elsewhere, place{position, b.Width})
			k.filters = append(k.filters, filter)
		}
	}
	return k
}

// project takes the part that the orthonormal basis spans out of v.
func project(v []float64, basis [][]float64) {
	for _, e := range basis {
		floats.AddScaled(v, -floats.Dot(e, v), e)
	}
}
