package fit

import (
	"fmt"
	"math"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// Join adds to s the quantities of other, made from a second run over the same grid whose spectra hold other windows. Pixels
// are matched by their place: grids may be shifted against each other by up to a quarter of a step, and the second may cover
// less or more. plan and rest are what the two were fitted by.
//
// Heights and areas of two runs compare only where exposure and response are the same; Join appends a warning that says so.
func Join(s, other *survey.Survey, plan, rest *Plan) error {
	from, err := match(s, other)
	if err != nil {
		return err
	}
	pick := func(values []float32) []float32 {
		if values == nil {
			return nil
		}
		out := make([]float32, len(from))
		for c, i := range from {
			out[c] = float32(nan)
			if i >= 0 {
				out[c] = values[i]
			}
		}
		return out
	}
	n, m := float32(plan.channelCount()), float32(rest.channelCount())
	for _, q := range other.Maps {
		values := pick(q.Values)
		old := s.Map(q.Name)
		if old == nil {
			q.Values, q.SE = values, pick(q.SE)
			s.Maps = append(s.Maps, q)
			continue
		}
		for c, v := range values {
			a := old.Values[c]
			switch {
			case v != v:
			case a != a:
				old.Values[c] = v
			case q.Name == "chi2":
				old.Values[c] = (n*a + m*v) / (n + m)
			case q.Name == "spikes":
				old.Values[c] = a + v
			case q.Name == "status":
				x, y := Status(a), Status(v)
				old.Values[c] = float32((x|y)&^Converged | x&y&Converged)
			}
		}
	}
	both := 0
	for _, i := range from {
		if i >= 0 {
			both++
		}
	}
	if both < len(from) {
		s.Warnings = append(s.Warnings, fmt.Sprintf("the second run covers %d of %d cells of the first", both, len(from)))
	}
	s.Warnings = append(s.Warnings, "ratios between bands of the two runs hold only if exposure, focus and response were the same in both")
	return nil
}

// match returns for each cell of s the cell of other at the same place, or -1.
func match(s, other *survey.Survey) ([]int, error) {
	a, b := s.Grid, other.Grid
	if (a.Layout == scan.Points) != (b.Layout == scan.Points) || a.Layout == scan.Points && a.Cells() != b.Cells() {
		return nil, fmt.Errorf("the two runs do not share a grid: one has %d by %d cells (%s), the other %d by %d (%s)",
			a.Cols, a.Rows, a.Layout, b.Cols, b.Rows, b.Layout)
	}
	from := make([]int, a.Cells())
	matched := 0
	for c := range from {
		from[c] = -1
		i := c // points are in order of place in both
		if a.Layout != scan.Points {
			col := cellAt(a.X0+float64(c%a.Cols)*a.DX, b.X0, b.DX, b.Cols)
			row := cellAt(a.Y0+float64(c/a.Cols)*a.DY, b.Y0, b.DY, b.Rows)
			if col < 0 || row < 0 {
				continue
			}
			i = row*b.Cols + col
		} else if math.Hypot(float64(s.X[c]-other.X[i]), float64(s.Y[c]-other.Y[i])) > max(a.DX, a.DY)/4 {
			continue
		}
		from[c] = i
		matched++
	}
	if 2*matched < len(from) {
		return nil, fmt.Errorf("the second run matches only %d of %d cells of the first: the steps are %g x %g um and %g x %g um, the lower left corners (%g, %g) and (%g, %g)",
			matched, len(from), a.DX, a.DY, b.DX, b.DY, a.X0, a.Y0, b.X0, b.Y0)
	}
	return from, nil
}

// cellAt returns the cell, of n from start on, whose centre lies within a quarter of a step of v, or -1.
func cellAt(v, start, step float64, n int) int {
	k := math.Round((v - start) / step)
	if !(k >= 0 && k < float64(n)) || math.Abs(v-start-k*step) > step/4 {
		return -1
	}
	return int(k)
}
