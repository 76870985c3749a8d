package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
	"bandgrid/mapio/scan"
)

// shaped draws spectra of one band of a shape over a level, and fits them with the recipe.
func shaped(t *testing.T, recipe Recipe, shape line.Shape, truth []float64, level float64, n int) map[string]*pulls {
	axis := evenAxis(2550, 2850, 1.2)
	y := make([]float64, len(axis))
	shape.Eval(y, nil, axis, truth)
	draw := func(r *rand.Rand, counts []float32) {
		for i, v := range y {
			counts[i] = float32(level + v + r.NormFloat64()*math.Sqrt(level+v+16))
		}
	}
	plan, err := NewPlan(recipe, axis, 532, Detector{})
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(61, 1))
	sample := make([]scan.Pixel, 200)
	for i := range sample {
		sample[i] = scan.Pixel{X: float64(i), Counts: make([]float32, len(axis))}
		draw(r, sample[i].Counts)
	}
	if plan, err = plan.Learn(t.Context(), sample, 0); err != nil {
		t.Fatal(err)
	}
	f := NewFitter(plan)
	sums := map[string]*pulls{"2d_position": {}, "2d_width": {}, "2d_height": {}, "2d_area": {}}
	counts, v, se := make([]float32, len(axis)), make([]float32, len(plan.Columns)), make([]float32, len(plan.Columns))
	width := shape.FWHM(truth)
	if recipe.InstrumentWidth > 0 {
		width = truth[line.Width] // the natural one
	}
	want := map[string]float64{"2d_position": truth[line.Position], "2d_height": truth[line.Height], "2d_width": width, "2d_area": shape.Area(truth)}
	for range n {
		draw(r, counts)
		f.Fit(counts, v, se)
		for i, c := range plan.Columns {
			if p := sums[c.Name]; p != nil {
				p.add(v[i], se[i], want[c.Name])
			}
		}
	}
	return sums
}

// TestShapes fits bands of every shape that a recipe may ask for with that shape.
func TestShapes(t *testing.T) {
	t.Parallel()
	for _, test := range []struct {
		name       string
		instrument float64
		shape      line.Shape
		truth      []float64
	}{
		{"lorentzian", 0, line.Lorentzian{}, []float64{900, 2676, 29}},
		{"lorentzian", 6, line.Voigt{Instrument: 6}, []float64{900, 2676, 24}},
		{"gaussian", 0, line.Gaussian{}, []float64{900, 2676, 29}},
		{"voigt", 0, line.FreeVoigt{}, []float64{3000, 2676, 20, 14}},
		{"pseudo-voigt", 0, line.PseudoVoigt{}, []float64{3000, 2676, 29, 0.5}},
		{"fano", 0, line.BreitWignerFano{}, []float64{1500, 2676, 29, -0.1}},
	} {
		recipe := Graphene()
		recipe.InstrumentWidth = test.instrument
		recipe.Windows = recipe.Windows[1:]
		recipe.Ratios = nil
		band := &recipe.Windows[0].Bands[0]
		band.Shape, band.Makeup = test.name, test.name == "lorentzian"
		const n = 600
		for name, p := range shaped(t, recipe, test.shape, test.truth, 300, n) {
			t.Logf("%s, instrument %g: %-11s bias %+.3f, pull width %.3f", test.name, test.instrument, name, p.bias(), p.width())
			// Four standard errors of n spectra. Errors may be up to a quarter too large: shapes with a further parameter are weaker.
			if p.n < n || !(math.Abs(p.bias()) <= 4/math.Sqrt(n)) || !(p.width() <= 1+4/math.Sqrt(2*n) && p.width() >= 0.75) {
				t.Errorf("%s, instrument %g: %s: %g of %d found, bias %+.3f, pull width %.3f", test.name, test.instrument, name, p.n, n, p.bias(), p.width())
			}
		}
	}
}

// TestWeightsDoNotBiasHeights has a band over next to nothing, where weights from the counts themselves pull heights down, since a channel that
// is low by chance counts more (Nucl. Instrum. Methods 221, 437 (1984)). The same spectra fitted with such weights show it.
func TestWeightsDoNotBiasHeights(t *testing.T) {
	t.Parallel()
	const n, height, level = 1500, 60., 2.
	axis := evenAxis(2550, 2850, 1.2)
	plan, err := NewPlan(Graphene(), axis, 532, Detector{Gain: 1, ReadNoise: 1})
	if err != nil {
		t.Fatal(err)
	}
	at := 0
	for i, c := range plan.Columns {
		if c.Name == "2d_area" {
			at = i
		}
	}
	f := NewFitter(plan)
	raw := lsq.NewBands(axis, 1, line.Lorentzian{})
	solver := lsq.NewSolver(raw.Len())
	lo, hi, free := make([]float64, raw.Len()), make([]float64, raw.Len()), make([]bool, raw.Len())
	for i := range lo {
		lo[i], hi[i], free[i] = math.Inf(-1), math.Inf(1), true
	}
	r := rand.New(rand.NewPCG(71, 1))
	counts, v, se := make([]float32, len(axis)), make([]float32, len(plan.Columns)), make([]float32, len(plan.Columns))
	want := math.Pi / 2 * height * 29
	var ours, theirs pulls
	for range n {
		for i, x := range axis {
			u := 2 * (x - 2676) / 29
			m := level + height/(1+u*u)
			counts[i] = float32(poisson(r, m) + r.NormFloat64())
			raw.Y[i], raw.RootW[i] = float64(counts[i]), 1/math.Sqrt(math.Max(float64(counts[i]), 1)+1)
		}
		f.Fit(counts, v, se)
		ours.add(v[at], se[at], want)
		raw.SetWeights()
		p := []float64{level, 0, height, 2676, 29}
		solver.Minimize(raw, p, lo, hi, free, len(axis), lsq.Settings{})
		theirs.add(float32(line.Lorentzian{}.Area(p[2:])), se[at], want)
	}
	t.Logf("area: bias %+.3f of the scatter; with weights from the counts %+.3f", ours.bias(), theirs.bias())
	if limit := 4 / math.Sqrt(n); !(math.Abs(ours.bias()) <= limit) || !(theirs.bias() < -2*limit) {
		t.Errorf("area: bias %+.3f of the scatter, %.3f is allowed; with weights from the counts %+.3f", ours.bias(), limit, theirs.bias())
	}
}

// poisson draws from the Poisson distribution of mean m by waiting times.
func poisson(r *rand.Rand, m float64) float64 {
	k := -1.
	for s := 0.; s <= m; k++ {
		s += r.ExpFloat64()
	}
	return k
}
