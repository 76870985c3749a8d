package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"bandgrid/fit/clean"
)

// night is the true movement of an axis: 0.8 cm-1 in all, slow waves, and a jump.
func night(n int, jump float64) []float64 {
	d := make([]float64, n)
	for i := range d {
		t := float64(i) / float64(n)
		d[i] = 0.8*t + 0.15*math.Sin(9*t)
		if i >= n*3/5 {
			d[i] += jump
		}
	}
	return d
}

func TestTrack(t *testing.T) {
	for _, jump := range []float64{0, 1.2, -0.5} {
		const n = 2700
		truth := night(n, jump)
		r := rand.New(rand.NewPCG(1, 4))
		y, se := make([]float64, n), make([]float64, n)
		mean := 0.0
		for i := range y {
			se[i] = 0.1 * (1 + r.Float64())
			y[i] = 520.5 + truth[i] + se[i]*r.NormFloat64()
			switch {
			case i%40 == 0:
				y[i] = math.NaN() // not found
			case i%77 == 0:
				y[i] += 4 // something else was found
			}
			mean += truth[i] / n
		}
		d, err := Track(y, se)
		if err != nil {
			t.Fatal(err)
		}
		var off []float64
		var z2 float64
		for i := range truth {
			e := d.Offset[i] - (truth[i] - mean)
			off = append(off, math.Abs(e))
			z2 += e * e / (d.SE[i] * d.SE[i]) / n
		}
		median := clean.Median(off)
		t.Logf("jump %+.1f: median error %.4f cm-1, pulls %.2f wide, step %.4f, jumps %+v", jump, median, math.Sqrt(z2), d.Step, d.Jumps)
		if !(median <= 0.05) || !(math.Sqrt(z2) <= 1.3) {
			t.Errorf("jump %+.1f: median error %.4f cm-1, pulls %.2f wide", jump, median, math.Sqrt(z2))
		}
		if jump == 0 && len(d.Jumps) > 0 {
			t.Errorf("jumps in a smooth drift: %+v", d.Jumps)
		}
		if jump != 0 && (len(d.Jumps) != 1 || math.Abs(float64(d.Jumps[0].Pixel-n*3/5)) > 3 || !(math.Abs(d.Jumps[0].Size-jump) <= 4*d.Jumps[0].SE+0.01)) {
			t.Errorf("jump %+.1f: found %+v", jump, d.Jumps)
		}
	}
}

func TestTrackOfAQuietRun(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 4))
	y, se := make([]float64, 400), make([]float64, 400)
	for i := range y {
		se[i] = 0.1
		y[i] = 520.5 + 0.1*r.NormFloat64()
	}
	d, err := Track(y, se)
	if err != nil {
		t.Fatal(err)
	}
	for i := range y {
		if !(math.Abs(d.Offset[i]) <= 0.05) {
			t.Fatalf("a quiet axis moves by %.3f cm-1", d.Offset[i])
		}
	}
	if _, err := Track(y[:10], se[:10]); err == nil {
		t.Error("ten pixels are enough")
	}
	for i := range y {
		if i%3 > 0 {
			y[i] = math.NaN()
		}
	}
	if _, err := Track(y, se); err == nil {
		t.Error("a line that is mostly missing is followed")
	}
}
