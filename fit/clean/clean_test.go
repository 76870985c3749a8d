package clean

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

func TestMedian(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for n := 1; n < 60; n++ {
		v := make([]float64, n)
		for i := range v {
			v[i] = float64(r.IntN(10)) // many equal values
		}
		sorted := slices.Sorted(slices.Values(v))
		want := (sorted[(n-1)/2] + sorted[n/2]) / 2
		if got := Median(v); got != want {
			t.Errorf("n=%d: median %g, want %g", n, got, want)
		}
	}
	if got := Median(nil); !math.IsNaN(got) {
		t.Errorf("median of nothing is %g", got)
	}
}

func TestNoise(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 1))
	const n = 20000
	y, sigma, skip := make([]float64, n), make([]float64, n), make([]bool, n)
	for i := range y {
		u := 2 * (float64(i%400) - 200) / 14
		sigma[i] = 3 + float64(i)/n
		y[i] = 300 + 400/(1+u*u) + sigma[i]*2*r.NormFloat64()
		if i%97 == 0 {
			y[i] += 5000
			skip[i] = true
		}
	}
	// A median of n terms scatters by 1.17/√n of the value, a little more as neighbouring terms share channels; the bands add
	// curvature to a few terms.
	if got := Noise(y, sigma, skip, make([]float64, n)); !(math.Abs(got-2) <= 0.05) {
		t.Errorf("noise %g times sigma, want 2", got)
	}
}

// made returns a noisy spectrum with a band of the given FWHM in channels and height in units of the noise, which is 1.
func made(r *rand.Rand, n int, width, height float64) []float64 {
	y := make([]float64, n)
	for i := range y {
		u := 2 * (float64(i) - float64(n)/2 - r.Float64()) / width
		y[i] = 100 + height/(1+u*u) + r.NormFloat64()
	}
	return y
}

func TestSharp(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	for range 300 {
		y := made(r, 400, 3, 200) // narrower than any band of a film at usual dispersion
		skip := make([]bool, len(y))
		if got := Sharp(y, 1, skip); got != 0 {
			t.Fatalf("%d channels of a band three channels wide were taken for a spike", got)
		}
		at := 20 + r.IntN(100)
		y[at] += 60
		y[at+1] += 25
		if got := Sharp(y, 1, skip); got < 2 || !skip[at] || !skip[at+1] {
			t.Fatalf("a spike of 60 and 25 times the noise: %d channels marked", got)
		}
		if got := Sharp(y, 1, skip); got != 0 {
			t.Fatalf("marked twice")
		}
	}
}

func TestResidual(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 1))
	const n = 400
	false1 := 0
	for range 500 {
		res := make([]float64, n)
		for i := range res {
			res[i] = r.NormFloat64()
		}
		skip := make([]bool, n)
		false1 += Residual(res, 6, skip)
		res[50], res[51] = 14, 9
		res[100] = -20               // a dead channel is no cosmic ray
		for i := 200; i < 220; i++ { // misfit of a band
			res[i] += 9 * math.Exp(-math.Pow(float64(i-210)/5, 2))
		}
		got := Residual(res, 6, skip)
		if !skip[50] || !skip[51] || skip[100] || got > 6 {
			t.Fatalf("%d channels marked; the spike: %v %v", got, skip[50], skip[51])
		}
	}
	if false1 > 0 { // 200,000 channels beyond six standard deviations: 2e-4 expected
		t.Errorf("%d channels marked in noise", false1)
	}
}

func TestHarmless(t *testing.T) {
	r := []float64{0, 1, 5, 1, 0, 9, 2, 0}
	suspect := []bool{false, true, true, false, false, true, true, false}
	skip := slices.Clone(suspect)
	if got := Harmless(r, 6, suspect, skip); got != 2 {
		t.Errorf("%d channels came back, want 2", got)
	}
	if want := []bool{false, false, false, false, false, true, true, false}; !slices.Equal(skip, want) || !slices.Equal(suspect, want) {
		t.Errorf("skip %v, want %v", skip, want)
	}
}

func TestDifferences(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 1))
	const n = 1000
	found, false1 := 0, 0
	for range 200 {
		y, skip := make([]float64, n), make([]bool, n)
		for i := range y {
			u := (float64(i) - 500) / 12 // a band 24 channels wide and 300 times the noise
			y[i] = 200*math.Sin(float64(i)/300) + 300/(1+u*u) + r.NormFloat64()
		}
		at := 30 + r.IntN(400)
		y[at] += 40
		y[at+1] += 30 * r.Float64()
		skip[700] = true
		y[700] = 1e9 // left out already
		marked := Differences(y, skip, 8, make([]float64, 2*n))
		if skip[at] {
			found++
		}
		for i, s := range skip {
			if s && (i < at-1 || i > at+3) && i != 700 {
				false1++
			}
		}
		if marked > 5 {
			t.Errorf("%d channels marked", marked)
		}
	}
	if found < 198 || false1 > 1 { // 200,000 channels
		t.Errorf("%d of 200 rays found, %d other channels marked", found, false1)
	}
	if got := Differences(make([]float64, 10), make([]bool, 10), 8, make([]float64, 20)); got != 0 {
		t.Errorf("%d channels marked in a constant", got)
	}
}
