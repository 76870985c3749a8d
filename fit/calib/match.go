package calib

import (
	"fmt"
	"math"
)

// match pairs the lines found with those of the reference. The axis may be off by up to reach at any place and stretched by up to
// one per cent: for every way to lay two lines found on two lines of the reference within that, the lines that then lie within
// a few wavenumbers are counted; the most wins, strong lines counting more, and among equals the least off. What is unique is
// paired: each line with the nearest.
func match(m Measured, laser, reach float64) ([]pair, error) {
	shifts, deviations := m.Reference.Shifts(laser)
	found := m.Lines
	if len(found) == 0 {
		return nil, fmt.Errorf("%w: none was found", ErrTooFew)
	}
	strongest := 0.0
	for _, f := range found {
		strongest = math.Max(strongest, f.Height)
	}
	const tolerance = 4 // cm-1, for curvature and for how far the two lines are off the rest
	type law struct{ offset, stretch, middle float64 }
	at := func(l law, v float64) float64 { return v + l.offset + l.stretch*(v-l.middle) }
	score := func(l law) (sum float64) {
		used := make([]bool, len(shifts))
		for _, f := range found {
			v := at(l, f.Position)
			best, near := tolerance*1., -1
			for j, s := range shifts {
				if d := math.Abs(v - s); d < best && !used[j] {
					best, near = d, j
				}
			}
			if near >= 0 {
				used[near] = true
				sum += 1 + 0.5*math.Sqrt(f.Height/strongest) - 0.1*best
			}
		}
		return sum - 0.02*math.Abs(l.offset)
	}
	best, law0 := math.Inf(-1), law{}
	try := func(l law) {
		if s := score(l); s > best {
			best, law0 = s, l
		}
	}
	for i, f := range found {
		for j, s := range shifts {
			offset := s - f.Position
			if math.Abs(offset) > reach {
				continue
			}
			try(law{offset, 0, f.Position})
			for k := i + 1; k < len(found); k++ {
				g := found[k]
				if g.Position-f.Position < 100 {
					continue
				}
				for l := j + 1; l < len(shifts); l++ {
					stretch := (shifts[l]-s)/(g.Position-f.Position) - 1
					if math.Abs(stretch) <= 0.01 && math.Abs(shifts[l]-g.Position) <= reach {
						try(law{offset, stretch, f.Position})
					}
				}
			}
		}
	}
	if math.IsInf(best, -1) {
		return nil, fmt.Errorf("%w: no line lies within %g cm-1 of one of the reference", ErrMismatch, reach)
	}
	var pairs []pair
	taken := map[int]int{} // line of the reference -> pair
	for _, f := range found {
		v := at(law0, f.Position)
		near, d := -1, float64(tolerance)
		for j, s := range shifts {
			if e := math.Abs(v - s); e < d {
				near, d = j, e
			}
		}
		if near < 0 {
			continue
		}
		// Two lines of the reference closer than the line is wide cannot be told apart.
		blended := near > 0 && shifts[near]-shifts[near-1] < f.Width/2 || near+1 < len(shifts) && shifts[near+1]-shifts[near] < f.Width/2
		if blended {
			continue
		}
		p := pair{reference: m.Reference.Name, lamp: m.Reference.Lamp, true: shifts[near], measured: f.Position, weight: f.Height, se: math.Hypot(f.SE, deviations[near]), left: d}
		if old, ok := taken[near]; ok {
			if pairs[old].weight < p.weight {
				pairs[old] = p
			}
			continue
		}
		taken[near] = len(pairs)
		pairs = append(pairs, p)
	}
	// A substance shows most of its lines; a lamp may not, and a spectrum need not reach them all.
	if !m.Reference.Lamp {
		inside := 0
		for _, s := range shifts {
			if s > at(law0, found[0].Position)-tolerance && s < at(law0, found[len(found)-1].Position)+tolerance {
				inside++
			}
		}
		if 2*len(pairs) < inside {
			return nil, fmt.Errorf("%w: of its %d lines in this range %d are there", ErrMismatch, inside, len(pairs))
		}
	}
	// Strong lines that the reference does not have speak against it.
	strange, strong := 0, 0
	for _, f := range found {
		if f.Height < 0.2*strongest {
			continue
		}
		strong++
		ok := false
		for _, p := range pairs {
			ok = ok || p.measured == f.Position
		}
		if !ok {
			strange++
		}
	}
	if 3*strange > strong {
		return nil, fmt.Errorf("%w: of %d strong lines %d are not among its lines", ErrMismatch, strong, strange)
	}
	return pairs, nil
}
