package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/mapio/scan"
)

// A band of a test spectrum, written out here so that the tests do not lean on the code they test.
type lorentz struct{ height, position, width float64 }

// spectrum stores a spectrum with shot noise of a detector with the given gain (electrons per count) and read noise (counts).
func spectrum(counts []float32, axis scan.Axis, r *rand.Rand, gain, read, level, slope float64, bands ...lorentz) {
	for i, x := range axis {
		m := level + slope*(x-1500)
		for _, b := range bands {
			u := 2 * (x - b.position) / b.width
			m += b.height / (1 + u*u)
		}
		// Above some hundred electrons a normal deviate has the mean and variance of shot noise, which is all that matters here.
		counts[i] = float32(m + r.NormFloat64()*math.Sqrt(m/gain+read*read))
	}
}

func evenAxis(from, to, step float64) scan.Axis {
	var a scan.Axis
	for x := from; x <= to; x += step {
		a = append(a, x)
	}
	return a
}

func newTestFitter(t testing.TB, axis scan.Axis, d Detector) (*Fitter, map[string]int, []float32, []float32) {
	plan, err := NewPlan(Graphene(), axis, 532, d)
	if err != nil {
		t.Fatal(err)
	}
	column := map[string]int{}
	for i, c := range plan.Columns {
		column[c.Name] = i
	}
	return NewFitter(plan), column, make([]float32, len(plan.Columns)), make([]float32, len(plan.Columns))
}

// pulls collects (estimate - truth)/standard error, and the errors themselves.
type pulls struct {
	n, sum, sum2, err, err2 float64
	all                     []float64
}

func (p *pulls) add(estimate, se float32, truth float64) {
	e := float64(estimate) - truth
	z := e / float64(se)
	p.n++
	p.sum += z
	p.sum2 += z * z
	p.err += e
	p.err2 += e * e
	p.all = append(p.all, z)
}

// within is the share of pulls up to z.
func (p *pulls) within(z float64) float64 {
	n := 0.0
	for _, v := range p.all {
		if math.Abs(v) <= z {
			n++
		}
	}
	return n / p.n
}

// bias is the mean error in units of the errors' scatter. Unlike the mean pull it is not skewed where the standard error
// follows the estimate, as that of a width does.
func (p *pulls) bias() float64 {
	mean := p.err / p.n
	return mean / math.Sqrt(p.err2/p.n-mean*mean)
}

func (p *pulls) mean() float64  { return p.sum / p.n }
func (p *pulls) width() float64 { return math.Sqrt(p.sum2/p.n - p.mean()*p.mean()) }

func TestPulls(t *testing.T) {
	t.Parallel()
	axis := evenAxis(1200, 2850, 1.3)
	const n = 2000
	truth := map[string]float64{
		"d_height": 250, "d_position": 1345, "d_width": 26,
		"g_height": 400, "g_position": 1584.5, "g_width": 14,
		"dprime_height": 110, "dprime_position": 1621, "dprime_width": 11,
		"2d_height": 900, "2d_position": 2676, "2d_width": 29,
		"d_g_ratio": 250. / 400, "d_g_area_ratio": 250. * 26 / (400 * 14),
		"g_area": math.Pi / 2 * 400 * 14, "2d_area": math.Pi / 2 * 900 * 29,
	}
	for _, d := range []Detector{{}, {Gain: 1, ReadNoise: 4}} {
		f, column, v, se := newTestFitter(t, axis, d)
		r := rand.New(rand.NewPCG(1, 2))
		counts := make([]float32, len(axis))
		sums := map[string]*pulls{}
		for name := range truth {
			sums[name] = new(pulls)
		}
		chi2 := 0.0
		for range n {
			spectrum(counts, axis, r, 1, 4, 300, -0.02, lorentz{250, 1345, 26}, lorentz{400, 1584.5, 14}, lorentz{110, 1621, 11}, lorentz{900, 2676, 29})
			if !f.Fit(counts, v, se) {
				t.Fatal("not fitted")
			}
			if s := Status(v[column["status"]]); s != Converged && s != Converged|Spiked {
				t.Errorf("status %b", s)
			}
			chi2 += float64(v[column["chi2"]]) / n
			for name, want := range truth {
				sums[name].add(v[column[name]], se[column[name]], want)
			}
		}
		// The mean of n pulls scatters by 1/√n, their width by 1/√(2n); four deviations either way.
		for name, p := range sums {
			t.Logf("gain %g: %s bias %+.3f pull %+.3f width %.3f", d.Gain, name, p.bias(), p.mean(), p.width())
			limit, spread := 4/math.Sqrt(n), 4/math.Sqrt(2*n)
			if name == "dprime_width" {
				// On the wing of G its height is four times the noise only: errors of such widths are made large on purpose.
				spread += 0.05
			}
			if !(math.Abs(p.bias()) <= limit) || !(math.Abs(p.width()-1) <= spread) {
				t.Errorf("gain %g: %s: bias %+.3f and pull width %.3f over %d spectra", d.Gain, name, p.bias(), p.width(), n)
			}
		}
		t.Logf("mean chi2 %.4f", chi2)
		if !(math.Abs(chi2-1) <= 0.02) {
			t.Errorf("gain %g: mean reduced chi-square %.4f", d.Gain, chi2)
		}
	}
}

func TestAbsentBands(t *testing.T) {
	t.Parallel()
	axis := evenAxis(1200, 2850, 1.3)
	f, column, v, se := newTestFitter(t, axis, Detector{})
	r := rand.New(rand.NewPCG(3, 4))
	counts := make([]float32, len(axis))
	const n = 3000
	var ratio pulls
	var found, foundPrime int
	mean := 0.0
	for range n {
		spectrum(counts, axis, r, 1, 4, 300, 0, lorentz{400, 1583, 14}, lorentz{900, 2676, 29})
		f.Fit(counts, v, se)
		s := Status(v[column["status"]])
		if s&Absent(1) != 0 || s&Absent(3) != 0 {
			t.Fatalf("G or 2D not found: status %b", s)
		}
		if s&Absent(0) == 0 {
			found++
		} else if !math.IsNaN(float64(v[column["d_position"]])) || !math.IsNaN(float64(v[column["d_width"]])) {
			t.Fatal("the D band is absent but has a position or width")
		}
		if s&Absent(2) == 0 {
			foundPrime++
		}
		mean += float64(v[column["d_g_ratio"]]) / n
		ratio.add(v[column["d_g_ratio"]], se[column["d_g_ratio"]], 0)
	}
	t.Logf("D found %d, D' found %d of %d; D/G mean %.5f, pull %.3f width %.3f", found, foundPrime, n, mean, ratio.mean(), ratio.width())
	// The limit is 4 standard errors: one false band in 30,000.
	if found > 2 || foundPrime > 2 {
		t.Errorf("of %d pristine pixels %d got a D band and %d a D' band", n, found, foundPrime)
	}
	if !(math.Abs(ratio.mean()) <= 4/math.Sqrt(n)) || !(math.Abs(ratio.width()-1) <= 4/math.Sqrt(2*n)) {
		t.Errorf("D/G of a pristine layer: pulls have mean %+.3f and width %.3f", ratio.mean(), ratio.width())
	}

	// Bare substrate: nothing is found, heights are zero within their errors.
	var height pulls
	wrong := 0
	for range n {
		spectrum(counts, axis, r, 1, 4, 300, 0.01)
		f.Fit(counts, v, se)
		s := Status(v[column["status"]])
		for k := range 4 {
			if s&Absent(k) == 0 {
				wrong++
			}
		}
		if !math.IsNaN(float64(v[column["d_g_ratio"]])) && s&Absent(1) != 0 {
			t.Fatal("D/G without a G band")
		}
		height.add(v[column["g_height"]], se[column["g_height"]], 0)
	}
	if wrong > 3 {
		t.Errorf("%d bands found on %d bare pixels", wrong, n)
	}
	if !(math.Abs(height.mean()) <= 4/math.Sqrt(n)) || !(math.Abs(height.width()-1) <= 4/math.Sqrt(2*n)) {
		t.Errorf("G height of bare substrate: pulls have mean %+.3f and width %.3f", height.mean(), height.width())
	}
}

func TestFitAllocatesNothing(t *testing.T) {
	axis := evenAxis(1200, 2850, 1.3)
	f, _, v, se := newTestFitter(t, axis, Detector{})
	r := rand.New(rand.NewPCG(5, 6))
	counts := make([]float32, len(axis))
	spectrum(counts, axis, r, 1, 4, 300, 0, lorentz{100, 1350, 30}, lorentz{400, 1583, 14}, lorentz{900, 2676, 29}, lorentz{900, 2640, 29})
	counts[100] += 9000 // a spike, and a poor fit: all paths are taken
	if got := testing.AllocsPerRun(20, func() { f.Fit(counts, v, se) }); got != 0 {
		t.Errorf("%g allocations per pixel", got)
	}
}

func BenchmarkFit(b *testing.B) {
	axis := evenAxis(1200, 2850, 1.2)
	for _, c := range []struct {
		name  string
		bands []lorentz
	}{
		{"pristine", []lorentz{{400, 1583, 14}, {900, 2676, 29}}},
		{"defective", []lorentz{{250, 1345, 26}, {400, 1584, 14}, {100, 1621, 11}, {900, 2676, 29}}},
		{"bare", nil},
	} {
		b.Run("pixel="+c.name, func(b *testing.B) {
			f, _, v, se := newTestFitter(b, axis, Detector{})
			r := rand.New(rand.NewPCG(7, 8))
			pixels := make([][]float32, 64)
			for i := range pixels {
				pixels[i] = make([]float32, len(axis))
				spectrum(pixels[i], axis, r, 1, 4, 300, 0, c.bands...)
			}
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				f.Fit(pixels[i%len(pixels)], v, se)
				i++
			}
			b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "pixels/s")
		})
	}
}

// BenchmarkPreparation measures what each preparation adds to the fit of a pixel.
func BenchmarkPreparation(b *testing.B) {
	axis := evenAxis(1000, 3000, 2)
	response := make([]float64, len(axis))
	for i := range response {
		response[i] = 1 - 0.0003*float64(i)
	}
	for _, c := range []struct {
		name    string
		prepare Preparation
		method  string
	}{{"none", Preparation{}, ""}, {"dark", Preparation{Dark: []float64{100}}, ""}, {"response", Preparation{Response: response}, ""},
		{"als", Preparation{}, "als"}, {"arpls", Preparation{}, "arpls"}, {"snip", Preparation{}, "snip"}} {
		b.Run("step="+c.name, func(b *testing.B) {
			recipe := Graphene()
			recipe.Baseline.Method = c.method
			plan, err := NewPlan(recipe, axis, 532, Detector{Gain: 1, ReadNoise: 4})
			if err != nil {
				b.Fatal(err)
			}
			plan.Preparation = c.prepare
			f := NewFitter(plan)
			v, se := make([]float32, len(plan.Columns)), make([]float32, len(plan.Columns))
			r := rand.New(rand.NewPCG(7, 9))
			pixels := make([][]float32, 32)
			for i := range pixels {
				pixels[i] = make([]float32, len(axis))
				spectrum(pixels[i], axis, r, 1, 4, 400, 0, lorentz{250, 1345, 26}, lorentz{400, 1584, 14}, lorentz{900, 2676, 29})
			}
			b.ReportAllocs()
			i := 0
			for b.Loop() {
				f.Fit(pixels[i%len(pixels)], v, se)
				i++
			}
		})
	}
}
