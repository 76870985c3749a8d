package fit

import (
	"math"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// judge sets free the bands that exceed their detection limit and takes back those that ran into a bound or vanished. It
// reports whether anything changed. At the start only bands that were searched for are judged: the weak ones are tested
// against residuals that the strong ones no longer disturb.
func (w *window) judge(start bool) (changed bool) {
	for k, band := range w.Bands {
		i := w.problem.Band(k)
		z := w.p[i] / w.se(i)
		switch {
		case w.found[k]:
			bound := w.atBound(i+line.Position) || w.atBound(i+line.Width)
			// Set free, the height has a larger error, as it trades against the width; half the limit keeps bands at the limit from
			// flickering.
			if !bound && z > band.Detect/2 {
				continue
			}
			if bound {
				w.status |= AtBound
			}
			w.found[k], w.barred[k], changed = false, true, true
			w.expect(k)
		case w.barred[k] || start && !band.Search:
		case z > band.Detect:
			if w.weakly(k) {
				w.put(k, place{w.weak[k].position, w.weak[k].width})
			}
			w.found[k], changed = true, true
		case !w.weakly(k): // located in noise: back to the expected place
			w.expect(k)
			changed = true
		case w.weak[k].elsewhere != nil:
			if at, ok := w.elsewhere(k); ok {
				w.put(k, at)
				w.found[k], changed = true, true
			}
		}
	}
	return changed
}

func (w *window) atBound(i int) bool {
	return w.p[i] <= w.lo[i] || w.p[i] >= w.hi[i]
}

func (w *window) anyFound() bool {
	for _, f := range w.found {
		if f {
			return true
		}
	}
	return false
}

// elsewhere looks in the residuals for a band that is not at its expected place. It must stand out by two standard errors more
// than there, since several places are tried.
func (w *window) elsewhere(k int) (place, bool) {
	w.problem.Curve(w.curve, w.p)
	root := math.Sqrt(w.phi)
	for i, m := range w.curve {
		w.r[i] = 0
		if !w.skip[i] {
			w.r[i] = (w.problem.Y[i] - m) / (w.sigma[i] * root)
		}
	}
	best, at := w.Bands[k].Detect+2, -1
	for i, filter := range w.weak[k].filters {
		if score := floats.Dot(filter, w.r); score > best {
			best, at = score, i
		}
	}
	if at < 0 {
		return place{}, false
	}
	return w.weak[k].elsewhere[at], true
}
