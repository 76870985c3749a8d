package fit

import (
	"math"
	"slices"

	"bandgrid/fit/line"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// Explain fits one spectrum and returns it with its fit, window by window; windows that cannot be fitted are left out. It
// allocates: it is for single pixels.
func (f *Fitter) Explain(counts []float32) (t survey.Trace) {
	f.preparer.take(counts)
	for _, w := range f.windows {
		if !w.fit(f.preparer) {
			continue
		}
		n := len(w.x)
		v := survey.TraceWindow{Name: w.Name, Shift: slices.Clone(w.x), Counts: slices.Clone(w.problem.Y),
			Base: make([]float64, n), Curve: make([]float64, n), Left: make([]bool, n)}
		w.problem.Base(v.Base, w.p)
		w.problem.Curve(v.Curve, w.p)
		for i := range n {
			if w.holes[i] {
				v.Counts[i] = math.NaN()
			}
			v.Left[i] = w.skip[i] && !w.holes[i]
		}
		for k, b := range w.Bands {
			if w.found[k] {
				v.Found = append(v.Found, survey.Peak{Name: b.Name, Position: w.p[w.problem.Band(k)+line.Position]})
			}
		}
		t.Windows = append(t.Windows, v)
	}
	return t
}

// Examples chooses pixels of a sample that stand for what the survey found, and explains them: bare substrate, each layer number,
// damaged film, and one with a cosmic ray. Of each kind it takes the usual one, by the height of G. The plan is the one that the
// run was fitted by, and opt holds for the places of the sample as for the run's.
func Examples(s *survey.Survey, plan *Plan, sample []scan.Pixel, opt RunOptions) (list []survey.Trace) {
	number, height, ratio, spikes := s.Map("layer_number"), s.Map("g_height"), s.Map("d_g_ratio"), s.Map("spikes")
	if number == nil || height == nil || spikes == nil {
		return nil
	}
	type kind struct {
		title string
		is    func(c int) bool
	}
	layer := func(n float32) func(int) bool {
		return func(c int) bool { return number.Values[c] == n && !(ratio != nil && ratio.Values[c] > 0.1) }
	}
	kinds := []kind{{"Bare substrate", layer(0)}, {"Single layer", layer(1)}, {"Two layers", layer(2)}, {"Three layers", layer(3)},
		{"Five or more layers", layer(5)},
		{"Damaged film", func(c int) bool { return ratio != nil && ratio.Values[c] > 0.3 }},
		{"With a cosmic ray", func(c int) bool { return spikes.Values[c] > 0 && number.Values[c] > 0 }}}
	f := NewFitter(plan)
	for _, k := range kinds {
		var of []int
		for i := range sample {
			if c := cellOf(s, &sample[i], opt); c >= 0 && k.is(c) {
				of = append(of, i)
			}
		}
		if len(of) == 0 {
			continue
		}
		slices.SortFunc(of, func(a, b int) int {
			if height.Values[cellOf(s, &sample[a], opt)] < height.Values[cellOf(s, &sample[b], opt)] {
				return -1
			}
			return 1
		})
		p := &sample[of[len(of)/2]]
		t := f.Explain(p.Counts)
		t.Title = k.title
		t.X, t.Y, _ = opt.place(p)
		list = append(list, t)
	}
	return list
}

// cellOf returns the cell of the map that a pixel lies on, or -1.
func cellOf(s *survey.Survey, p *scan.Pixel, opt RunOptions) int {
	g := s.Grid
	x, y, left := opt.place(p)
	if left || !(g.DX > 0) || !(g.DY > 0) {
		return -1
	}
	col, row := math.Round((x-g.X0)/g.DX), math.Round((y-g.Y0)/g.DY)
	if !(col >= 0 && col < float64(g.Cols) && row >= 0 && row < float64(g.Rows)) {
		return -1
	}
	return int(row)*g.Cols + int(col)
}
