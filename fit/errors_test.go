package fit

import (
	"cmp"
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
	"bandgrid/mapio/scan"
)

// A bench makes spectra with known truth and collects what the fit says of them.
type bench struct {
	axis        scan.Axis
	bands       []lorentz
	level       float64
	gain, read  float64
	correlation float64                                       // of neighbouring channels, from a moving average of two
	distort     func(r *rand.Rand, b lorentz) (f distortion)  // nil: bands as in the model
	sample      int                                           // spectra to learn from; 0: 300
	vary        func(r *rand.Rand, bands []lorentz) []lorentz // nil: the same bands each time
}

// A distortion is a relative error of a band's shape: added to the profile of unit height at u half widths from its position.
type distortion func(u float64) float64

// draw stores one spectrum and returns its bands.
func (b *bench) draw(r *rand.Rand, counts []float32) []lorentz {
	bands := b.bands
	if b.vary != nil {
		bands = b.vary(r, bands)
	}
	n := len(b.axis)
	m := make([]float64, n)
	for i := range m {
		m[i] = b.level
	}
	for _, band := range bands {
		var f distortion
		if b.distort != nil {
			f = b.distort(r, band)
		}
		for i, x := range b.axis {
			u := 2 * (x - band.position) / band.width
			m[i] += band.height / (1 + u*u)
			if f != nil {
				m[i] += band.height * f(u)
			}
		}
	}
	// A moving average of two white deviates, c z(i) + s z(i+1) with c² + s² = 1, has correlation cs.
	c := math.Sqrt((1 + math.Sqrt(1-4*b.correlation*b.correlation)) / 2)
	s := math.Sqrt(1 - c*c)
	z := r.NormFloat64()
	for i, v := range m {
		next := r.NormFloat64()
		counts[i] = float32(v + (c*z+s*next)*math.Sqrt(v/b.gain+b.read*b.read))
		z = next
	}
	return bands
}

// learned returns a fitter that has looked at a sample.
func (b *bench) learned(t testing.TB, recipe Recipe, seed uint64) (*Fitter, map[string]int) {
	t.Helper()
	plan, err := NewPlan(recipe, b.axis, 532, Detector{})
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(seed, 99))
	sample := make([]scan.Pixel, cmp.Or(b.sample, 300))
	for i := range sample {
		sample[i] = scan.Pixel{X: float64(i), Counts: make([]float32, len(b.axis))}
		b.draw(r, sample[i].Counts)
	}
	if plan, err = plan.Learn(t.Context(), sample, 2); err != nil {
		t.Fatal(err)
	}
	column := map[string]int{}
	for i, c := range plan.Columns {
		column[c.Name] = i
	}
	return NewFitter(plan), column
}

// run fits n spectra and collects the pulls of the quantities of truth.
func (b *bench) run(t testing.TB, recipe Recipe, n int, seed uint64) map[string]*pulls {
	f, column := b.learned(t, recipe, seed)
	r := rand.New(rand.NewPCG(seed, 1))
	counts := make([]float32, len(b.axis))
	v, se := make([]float32, len(column)), make([]float32, len(column))
	names := [...]string{"d", "g", "dprime", "2d"}
	sums := map[string]*pulls{}
	add := func(name string, want float64) {
		if sums[name] == nil {
			sums[name] = new(pulls)
		}
		if x := v[column[name]]; x == x {
			sums[name].add(x, se[column[name]], want)
		}
	}
	for range n {
		bands := b.draw(r, counts)
		f.Fit(counts, v, se)
		for k, band := range bands {
			add(names[k]+"_height", band.height)
			add(names[k]+"_position", band.position)
			add(names[k]+"_width", band.width)
			add(names[k]+"_area", math.Pi/2*band.height*band.width)
		}
		if bands[1].height > 0 {
			add("d_g_ratio", bands[0].height/bands[1].height)
		}
	}
	return sums
}

func usualBench() *bench {
	return &bench{axis: evenAxis(1200, 2850, 1.3), level: 300, gain: 1, read: 4,
		bands: []lorentz{{250, 1345, 26}, {400, 1584.5, 14}, {0, 1621, 11}, {900, 2676, 29}}}
}

func TestErrorsWithCorrelatedChannels(t *testing.T) {
	t.Parallel()
	b := usualBench()
	b.correlation = 0.3
	const n = 2000
	for name, p := range b.run(t, Graphene(), n, 5) {
		if name[:2] == "dp" {
			continue // D' is absent
		}
		t.Logf("%-12s %4.0f bias %+.3f pull width %.3f, 68 %%: %.3f, 95 %%: %.3f", name, p.n, p.bias(), p.width(), p.within(1), p.within(1.96))
		// Four standard errors of bias and width, and 2 % of the width for the estimate of the correlation's effect.
		if !(math.Abs(p.bias()) <= 4/math.Sqrt(n)) || !(math.Abs(p.width()-1) <= 4/math.Sqrt(2*n)+0.02) {
			t.Errorf("%s: bias %+.3f, pull width %.3f", name, p.bias(), p.width())
		}
	}
}

// TestErrorsWidenWithModelError has bands that differ from the Lorentzian by 1 % of their height: a smooth random function of
// the distance in half widths, a new one for each spectrum. At 10,000 counts that is as much as the noise of a channel, but
// alike in neighbouring channels.
func TestErrorsWidenWithModelError(t *testing.T) {
	t.Parallel()
	for _, height := range []float64{1000, 3000, 10000} {
		b := usualBench()
		b.sample = SampleSize
		b.bands = []lorentz{{height / 2, 1345, 26}, {height, 1584.5, 14}, {0, 1621, 11}, {height, 2676, 29}}
		b.distort = func(r *rand.Rand, _ lorentz) distortion {
			var a, phase [3]float64
			for k := range a {
				a[k], phase[k] = r.NormFloat64(), 2*math.Pi*r.Float64()
			}
			// Standard deviation 1 at the centre, falling like the band, with periods of 8, 4 and 2.7 half widths.
			return func(u float64) float64 {
				s := 0.0
				for k := range a {
					s += a[k] * math.Sqrt(2./3) * math.Cos(phase[k]+float64(k+1)*u*math.Pi/4)
				}
				return 0.01 * s / (1 + u*u/4)
			}
		}
		const n = 1000
		for name, p := range b.run(t, Graphene(), n, 6) {
			if name[:2] == "dp" {
				continue
			}
			t.Logf("height %5.0f: %-12s bias %+.3f pull width %.3f, 68 %%: %.3f, 95 %%: %.3f", height, name, p.bias(), p.width(), p.within(1), p.within(1.96))
			// Where the misfit is as large as the noise it must show. Where it is a third of it, errors may be somewhat too small.
			// Areas hardly change with these distortions, so their errors are too large.
			most := 1.1
			if height < 10000 {
				most = 1.3
			}
			if w := p.width(); !(w <= most) || !(p.within(1.96) >= 0.85) {
				t.Errorf("height %.0f: %s: pull width %.3f, at most %.1f is wanted", height, name, w, most)
			}
		}
	}
}

func TestCoverageOfWeakBands(t *testing.T) {
	t.Parallel()
	for _, ratio := range []float64{0.5, 1, 2, 3, 4} { // height over noise of a channel
		b := usualBench()
		noise := math.Sqrt(b.level + b.read*b.read)
		h := ratio * noise
		b.bands = []lorentz{{h, 1345, 26}, {400, 1584.5, 14}, {h, 1621, 11}, {h, 2676, 29}}
		const n = 2000
		for name, p := range b.run(t, Graphene(), n, 7) {
			if name[:2] == "g_" {
				continue
			}
			if p.n < n/3 {
				continue // a band that shows in few spectra shows where chance has favoured it
			}
			t.Logf("height/noise %.1f: %-16s %4.0f bias %+.3f pull width %.3f, 68 %%: %.3f, 95 %%: %.3f", ratio, name, p.n, p.bias(), p.width(), p.within(1), p.within(1.96))
			// The shares of 2000 spectra scatter by 1 and 0.5 %. Errors of weak bands may be too large, not too small.
			if a, b := p.within(1), p.within(1.96); !(a >= 0.62 && a <= 0.92) || !(b >= 0.92) {
				t.Errorf("height/noise %.1f: %s: the intervals hold the truth in %.1f and %.1f %%", ratio, name, 100*a, 100*b)
			}
		}
	}
}

// TestScatterAgainstCramerRao compares the scatter of positions with the least that any unbiased estimate can have: from the
// Fisher matrix of all fitted parameters at the truth, with derivatives by finite differences.
func TestScatterAgainstCramerRao(t *testing.T) {
	t.Parallel()
	b := usualBench()
	const n = 3000
	sums := b.run(t, Graphene(), n, 8)
	for _, w := range []struct {
		band     string
		low, top float64
		bands    []lorentz
		of       int
	}{
		{"g", 1200, 1750, []lorentz{b.bands[0], b.bands[1], {0, 1619, 13}}, 1},
		{"2d", 2550, 2850, b.bands[3:], 0},
	} {
		bound := cramerRao(t, b, w.low, w.top, w.bands, w.of)
		p := sums[w.band+"_position"]
		scatter := math.Sqrt(p.err2/p.n - p.err*p.err/p.n/p.n)
		t.Logf("%s position: scatter %.4f cm-1, bound %.4f, ratio %.3f", w.band, scatter, bound, scatter/bound)
		// The scatter of n estimates is known to 1/√(2n), 1.3 %.
		if !(scatter <= 1.1*bound) || !(scatter >= 0.94*bound) {
			t.Errorf("%s position: scatter %.4f cm-1, bound %.4f", w.band, scatter, bound)
		}
	}
}

// cramerRao returns the bound on the standard error of the position of one of the bands over a straight line. Bands of height
// 0 have only a height to estimate.
func cramerRao(t *testing.T, b *bench, low, top float64, bands []lorentz, of int) float64 {
	var x []float64
	for _, v := range b.axis {
		if v >= low && v <= top {
			x = append(x, v)
		}
	}
	q := []float64{b.level, 0}
	var free []bool
	for _, band := range bands {
		q = append(q, band.height, band.position, band.width)
	}
	for i := range q {
		free = append(free, i < 2 || (i-2)%3 == 0 || bands[(i-2)/3].height > 0)
	}
	model := func(i int) float64 {
		m := q[0] + q[1]*(x[i]-1500)
		for k := 2; k < len(q); k += 3 {
			u := 2 * (x[i] - q[k+1]) / q[k+2]
			m += q[k] / (1 + u*u)
		}
		return m
	}
	jac := make([]float64, len(x)*len(q))
	for j := range q {
		if !free[j] {
			continue
		}
		at, h := q[j], 1e-4*(1+math.Abs(q[j]))
		for i := range x {
			q[j] = at + h
			up := model(i)
			q[j] = at - h
			jac[i*len(q)+j] = (up - model(i)) / (2 * h)
			q[j] = at
		}
	}
	solver := lsq.NewGeneral(len(x), len(q))
	lower, upper := make([]float64, len(q)), make([]float64, len(q))
	for j, f := range free {
		lower[j], upper[j] = q[j], q[j]
		if f {
			lower[j], upper[j] = math.Inf(-1), math.Inf(1)
		}
	}
	sigma := make([]float64, len(x))
	for i := range x {
		sigma[i] = math.Sqrt(model(i)/b.gain + b.read*b.read)
	}
	solver.Minimize(lsq.Squares{Rows: len(x), Params: len(q), Lower: lower, Upper: upper,
		Residuals: func(r, p []float64) {
			for i := range r {
				r[i] = 0
				for j := range p {
					r[i] += jac[i*len(q)+j] * (p[j] - q[j]) / sigma[i]
				}
			}
		},
		Jacobian: func(d, _ []float64) {
			for i := range x {
				for j := range q {
					d[i*len(q)+j] = jac[i*len(q)+j] / sigma[i]
				}
			}
		}}, append([]float64(nil), q...), lsq.GeneralSettings{})
	cov := make([]float64, len(q)*len(q))
	if !solver.Covariance(cov) {
		t.Fatal("the Fisher matrix has no inverse")
	}
	j := 2 + 3*of + line.Position
	return math.Sqrt(cov[j*len(q)+j])
}
