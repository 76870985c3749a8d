package synth

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// phi is the normal distribution's cumulative function.
func phi(z float64) float64 { return math.Erfc(-z/math.Sqrt2) / 2 }

// below returns the probability that expand gives at most v, by looking for the normal number at which it passes v.
func below(mean, read, v float64) float64 {
	low, high := -8.0, 8.0
	for range 60 {
		if mid := (low + high) / 2; expand(mean, read, mid) <= v {
			low = mid
		} else {
			high = mid
		}
	}
	return phi(low)
}

func TestManyElectronsAgainstExact(t *testing.T) {
	for _, mean := range []float64{manyElectrons, 130.5, 300, 1000, 10000} {
		for _, read := range []float64{0, 0.3, wholeBelow, 3, 10} {
			exact := distuv.Poisson{Lambda: mean}
			reach := 7 * math.Sqrt(mean+read*read)
			worst := 0.0
			for v := math.Floor(mean - reach); v < mean+reach; v += max(1, math.Floor(reach/100)) {
				var want float64
				got := below(mean, read, v)
				if read < wholeBelow { // whole electrons; electrons adds no read noise to them
					want = exact.CDF(v)
				} else {
					got = below(mean, read, v+0.3) // between two whole numbers
					for k := math.Floor(v - 8*read); k <= v+8*read+1; k++ {
						if k >= 0 {
							want += exact.Prob(k) * phi((v+0.3-k)/read)
						}
					}
					if v-8*read > 0 {
						want += exact.CDF(math.Floor(v-8*read) - 1)
					}
				}
				worst = max(worst, math.Abs(got-want))
			}
			t.Logf("mean %g, read noise %g: largest difference %.1e", mean, read, worst)
			if !(worst <= 3e-6) {
				t.Errorf("mean %g, read noise %g: the distributions differ by %.1e, documented are 3e-6", mean, read, worst)
			}
		}
	}
}

func TestPoissonAgainstExact(t *testing.T) {
	const n = 200000
	r := rand.New(rand.NewPCG(5, 6))
	for _, mean := range []float64{0.01, 0.7, 3, 9.99, 10, 12.3, 40, 99.9} {
		counts := make([]int, 400)
		for range n {
			counts[int(poisson(r, mean))]++
		}
		// Largest difference of the cumulative distributions; 1.95/√n is exceeded once in 1000 times by chance.
		exact := distuv.Poisson{Lambda: mean}
		sum, worst := 0, 0.0
		for k, c := range counts {
			sum += c
			worst = max(worst, math.Abs(float64(sum)/n-exact.CDF(float64(k))))
		}
		if !(worst <= 1.95/math.Sqrt(n)) {
			t.Errorf("mean %g: the distribution is off by %.4f", mean, worst)
		}
	}
	if poisson(r, 0) != 0 || poisson(r, math.NaN()) != 0 {
		t.Error("no light must give no electrons")
	}
}

// Mean, variance and correlation of the detector's noise, for few and for many electrons.
func TestDetectorNoise(t *testing.T) {
	const channels, pixels = 500, 400
	for _, test := range []struct{ level, gain, read, correlation float64 }{
		{300, 2, 5, 0}, {300, 2, 5, 0.3}, {300, 1, 0, 0.5}, {20, 0.8, 3, 0.4}, {5, 1, 0, 0}, {1000, 4, 0, 0},
	} {
		s := Uniform(pixels, Object{}, Instrument{Channels: channels, Background: test.level, Gain: test.gain,
			ReadNoise: test.read, Correlation: test.correlation, Offset: 100}, 11)
		g := s.NewGenerator()
		counts := make([]float32, channels)
		var sum, square, lag, far float64
		for i := range pixels {
			g.Pixel(i, counts)
			for k, v := range counts {
				d := float64(v) - test.level - 100
				sum += d
				square += d * d
				if k > 0 {
					lag += d * (float64(counts[k-1]) - test.level - 100)
				}
				if k > 1 {
					far += d * (float64(counts[k-2]) - test.level - 100)
				}
			}
		}
		const n = channels * pixels
		variance := test.level/test.gain + test.read*test.read/test.gain/test.gain
		// Whole electrons on whole counts (gain 1) add nothing by rounding, else 1/12.
		if test.gain != 1 || test.read > 0 || test.correlation > 0 {
			variance += 1. / 12
		}
		// Five standard errors; neighbours' correlation widens that of the mean, and of the square by less than √1.5; the fourth
		// moment of a Poisson number adds 1/mean.
		if tol := 5 * math.Sqrt(variance*(1+2*test.correlation)/n); !(math.Abs(sum/n) <= tol) {
			t.Errorf("%+v: mean off by %.4f, %.4f allowed", test, sum/n, tol)
		}
		tol := 5 * math.Sqrt((2+1/(test.level*test.gain))*1.5/n)
		if got := square / n / variance; !(math.Abs(got-1) <= tol) {
			t.Errorf("%+v: variance %.4f times what it should be, within %.4f", test, got, tol)
		}
		// Rounding is not correlated, which lowers the correlation by its share of the variance.
		want := test.correlation * (1 - 1./12/variance)
		if got := lag / square * channels / (channels - 1); !(math.Abs(got-want) <= 5*math.Sqrt(1.5/n)) {
			t.Errorf("%+v: neighbours correlate by %.4f, want %.4f", test, got, want)
		}
		if got := far / square; !(math.Abs(got) <= 5*math.Sqrt(1.5/n)) {
			t.Errorf("%+v: next but one neighbours correlate by %.4f", test, got)
		}
	}
}

func TestSaturation(t *testing.T) {
	s := Uniform(2, Object{}, Instrument{Channels: 50, Background: 70000, Saturation: 65535}, 1)
	counts := make([]float32, 50)
	s.NewGenerator().Pixel(1, counts)
	for k, v := range counts {
		if v != 65535 {
			t.Fatalf("channel %d has %g counts, want the full well", k, v)
		}
	}
}

func TestSpikeRate(t *testing.T) {
	const pixels = 20000
	s := Uniform(pixels, Object{}, Instrument{Channels: 60, Noiseless: true, Background: 10}, 4)
	s.Spikes = Spikes{Rate: 0.05}
	if err := s.Prepare(); err != nil {
		t.Fatal(err)
	}
	g := s.NewGenerator()
	counts := make([]float32, 60)
	events := 0
	for i := range pixels {
		_, _, truth := g.Pixel(i, counts)
		hit := map[int32]bool{}
		last := int32(-2)
		for _, k := range truth.Spikes {
			hit[k] = true
			if k != last+1 {
				events++
			}
			last = k
		}
		for k, v := range counts {
			if (v > 10.5) != hit[int32(k)] && v > 13 {
				t.Fatalf("pixel %d channel %d has %g counts; the truth says hit %v", i, k, v, hit[int32(k)])
			}
			if hit[int32(k)] && v <= 10 {
				t.Fatalf("pixel %d channel %d is said to be hit but has %g counts", i, k, v)
			}
		}
	}
	// 1000 expected, five standard deviations; two tracks that touch count once, 1 in 1000.
	if !(math.Abs(float64(events)-1000) <= 5*math.Sqrt(1000)+2) {
		t.Errorf("%d spikes, 1000 expected", events)
	}
}
