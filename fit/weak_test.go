package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/mapio/scan"
)

// TestWeakDIsUnbiased has a map whose D/G rises from 0 to 0.3 across the detection limit, with a D band that is not where the
// recipe expects it. At every level the mean of D/G is right.
func TestWeakDIsUnbiased(t *testing.T) {
	t.Parallel()
	ratios := []float64{0, 0.02, 0.04, 0.06, 0.08, 0.1, 0.12, 0.15, 0.2, 0.25, 0.3}
	b := usualBench()
	b.axis = evenAxis(1200, 1760, 1.3)
	b.vary = func(r *rand.Rand, bands []lorentz) []lorentz {
		ratio := ratios[r.IntN(len(ratios))]
		return []lorentz{{400 * ratio, 1349 + 2*r.NormFloat64(), 22 + r.NormFloat64()}, bands[1], {57 * ratio, 1621, 11}, bands[3]}
	}
	f, column := b.learned(t, Graphene(), 21)
	if l := f.plan.Learned.Bands; len(l) == 0 || l[0].Name != "d" || !(math.Abs(l[0].Position-1349) < 1.5) {
		t.Errorf("the place of D was not learnt: %+v", l)
	}
	r := rand.New(rand.NewPCG(22, 1))
	counts := make([]float32, len(b.axis))
	v, se := make([]float32, len(column)), make([]float32, len(column))
	const n = 2000
	for _, ratio := range ratios {
		b.vary = func(r *rand.Rand, bands []lorentz) []lorentz {
			return []lorentz{{400 * ratio, 1349 + 2*r.NormFloat64(), 22 + r.NormFloat64()}, bands[1], {57 * ratio, 1621, 11}, bands[3]}
		}
		var p pulls
		found := 0
		for range n {
			b.draw(r, counts)
			f.Fit(counts, v, se)
			p.add(v[column["d_g_ratio"]], se[column["d_g_ratio"]], ratio)
			if Status(v[column["status"]])&Absent(0) == 0 {
				found++
			}
		}
		mean := p.err / n
		error := math.Sqrt(p.err2/n-mean*mean) / math.Sqrt(n)
		t.Logf("D/G %.2f: found in %5.1f %%, mean %+.5f off, ± %.5f; pull width %.3f, 68 %%: %.3f, 95 %%: %.3f", ratio, 100*float64(found)/n, mean, error, p.width(), p.within(1), p.within(1.96))
		if !(math.Abs(mean) <= 4*error) {
			t.Errorf("D/G %.2f: the mean of %d pixels is off by %+.5f, its standard error is %.5f", ratio, n, mean, error)
		}
		// Just above the limit, where half of the pixels are found, the intervals hold the truth in 91 to 93 %: over four seeds.
		if c := p.within(1.96); !(c >= 0.90 && c <= 0.985) {
			t.Errorf("D/G %.2f: the 95 %% intervals hold the truth in %.1f %%", ratio, 100*c)
		}
	}
}

// TestFalsePositives counts bands that are found where there is none, and compares with the stated rates.
func TestFalsePositives(t *testing.T) {
	t.Parallel()
	// At 4 standard errors of a normal deviate one false band in 31,600 is due; to see the rate in a test, lower limits are set,
	// and the tail is compared at each.
	const n = 20000
	axis := evenAxis(1200, 1760, 1.5)
	for _, limit := range []float64{2.5, 4} {
		recipe := Graphene()
		for w := range recipe.Windows {
			for k := range recipe.Windows[w].Bands {
				if b := &recipe.Windows[w].Bands[k]; !b.Search {
					b.Detect = limit
				}
			}
		}
		b := &bench{axis: axis, level: 300, gain: 1, read: 4, bands: []lorentz{{0, 1345, 26}, {400, 1584.5, 14}, {0, 1621, 11}, {900, 2676, 29}}}
		f, column := b.learned(t, recipe, 31)
		r := rand.New(rand.NewPCG(uint64(10*limit), 3))
		counts := make([]float32, len(axis))
		v, se := make([]float32, len(column)), make([]float32, len(column))
		var z [2]int
		var ratio pulls
		for range n {
			b.draw(r, counts)
			f.Fit(counts, v, se)
			s := Status(v[column["status"]])
			for i, bit := range []int{0, 2} {
				if s&Absent(bit) == 0 {
					z[i]++
				}
			}
			ratio.add(v[column["d_g_ratio"]], se[column["d_g_ratio"]], 0)
		}
		want := n * math.Erfc(limit/math.Sqrt2) / 2
		mean := ratio.err / n
		error := math.Sqrt(ratio.err2/n-mean*mean) / math.Sqrt(n)
		t.Logf("limit %.1f: D found %d times, D' %d, %.1f expected of each of %d; mean D/G %+.6f ± %.6f", limit, z[0], z[1], want, n, mean, error)
		for i, got := range z {
			// Four standard deviations of a Poisson count, and a few per cent for the scale of the noise, which enters the tail squared.
			if d := 4*math.Sqrt(want+1) + 0.1*want; !(math.Abs(float64(got)-want) <= d) {
				t.Errorf("limit %.1f: %s found %d times, %.1f expected", limit, []string{"D", "D'"}[i], got, want)
			}
		}
		if !(math.Abs(mean) <= 4*error) {
			t.Errorf("limit %.1f: mean D/G of a pristine layer %+.6f, its standard error is %.6f", limit, mean, error)
		}
	}
}

// TestFalseStrongBands counts G and 2D bands on bare substrate, where the search tries many places.
func TestFalseStrongBands(t *testing.T) {
	t.Parallel()
	const n = 20000
	b := &bench{axis: evenAxis(1200, 2850, 1.5), level: 300, gain: 1, read: 4}
	f, column := b.learned(t, Graphene(), 41)
	r := rand.New(rand.NewPCG(42, 3))
	counts := make([]float32, len(b.axis))
	v, se := make([]float32, len(column)), make([]float32, len(column))
	var found [2]int
	for range n {
		b.draw(r, counts)
		f.Fit(counts, v, se)
		s := Status(v[column["status"]])
		for i, bit := range []int{1, 3} {
			if s&Absent(bit) == 0 {
				found[i]++
			}
		}
	}
	t.Logf("bare substrate: G found %d times, 2D %d of %d", found[0], found[1], n)
	// Stated: less than one in 10,000.
	if found[0] > 6 || found[1] > 6 {
		t.Errorf("G found %d times and 2D %d times on %d bare pixels", found[0], found[1], n)
	}
}

// TestLearnDoesNotDependOnOrder gives the pixels of a scan in three orders.
func TestLearnDoesNotDependOnOrder(t *testing.T) {
	t.Parallel()
	b := usualBench()
	plan, err := NewPlan(Graphene(), b.axis, 532, Detector{})
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(51, 1))
	sample := make([]scan.Pixel, 60)
	for i := range sample {
		sample[i] = scan.Pixel{X: float64(i % 10), Y: float64(i / 10), Counts: make([]float32, len(b.axis))}
		b.draw(r, sample[i].Counts)
	}
	first, err := plan.Learn(t.Context(), sample, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, workers := range []int{2, 8} {
		r.Shuffle(len(sample), func(i, j int) { sample[i], sample[j] = sample[j], sample[i] })
		again, err := plan.Learn(t.Context(), sample, workers)
		if err != nil {
			t.Fatal(err)
		}
		if again.noise != first.noise || again.Learned.Bands[0] != first.Learned.Bands[0] {
			t.Errorf("with %d workers and another order: %+v, before %+v", workers, again.noise, first.noise)
		}
	}
	if first.Learned.NoiseChannels == 0 {
		t.Error("nothing was learnt of the noise")
	}
}
