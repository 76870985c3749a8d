package fit

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"bandgrid/fit/calib"
	"bandgrid/fit/clean"
	"bandgrid/mapio/survey"
)

// Track follows a band through the run, in order of acquisition, and takes its movement out of the positions of all bands, with
// its standard error added to theirs; see [calib.Track]. It is a global step on what was fitted: call it before
// [Fits.Survey]. The error says why the band cannot be followed; then nothing is changed.
func (f *Fits) Track(band string) (*survey.Drift, error) {
	at := slices.IndexFunc(f.plan.Columns, func(c Column) bool { return c.Name == band+"_position" })
	if at < 0 {
		var names []string
		for _, c := range f.plan.Columns {
			if name, ok := strings.CutSuffix(c.Name, "_position"); ok {
				names = append(names, name)
			}
		}
		return nil, fmt.Errorf("%q is not a band that this run was fitted with; those are %s", band, strings.Join(names, ", "))
	}
	q := len(f.plan.Columns)
	n := f.Len()
	position, se := make([]float64, 0, n), make([]float64, 0, n)
	for _, s := range f.slabs {
		for i, v := range s.columns[at] {
			position, se = append(position, float64(v)), append(se, float64(s.columns[q+at][i]))
		}
	}
	d, err := calib.Track(position, se)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", band, err)
	}
	first := 0
	for _, s := range f.slabs {
		for k, c := range f.plan.Columns {
			if !strings.HasSuffix(c.Name, "_position") {
				continue
			}
			values, errors := s.columns[k], s.columns[q+k]
			for i := range values { // NaN stays NaN
				values[i] -= float32(d.Offset[first+i])
				errors[i] = float32(math.Hypot(float64(errors[i]), d.SE[first+i]))
			}
		}
		first += len(s.x)
	}
	out := &survey.Drift{Band: band, Step: d.Step, Range: slices.Max(d.Offset) - slices.Min(d.Offset), Error: clean.Median(slices.Clone(d.SE))}
	for _, j := range d.Jumps {
		out.Jumps = append(out.Jumps, survey.Jump(j))
	}
	for i := 0; i < n; i += max(1, n/300) {
		out.Pixel, out.Shift = append(out.Pixel, i), append(out.Shift, d.Offset[i])
	}
	return out, nil
}
