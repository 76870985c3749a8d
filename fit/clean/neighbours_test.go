package clean

import (
	"math"
	"math/rand/v2"
	"testing"
)

// pixels returns five spectra with noise 1: a broad band whose height differs by share, and a line 3 cm-1 wide, its height
// given for each. spacing is in cm-1 per channel.
func pixels(r *rand.Rand, n int, spacing float64, lines [5]float64) [][]float64 {
	var all [][]float64
	for p := range 5 {
		y := make([]float64, n)
		at := 0.4*float64(n)*spacing + 0.2*r.NormFloat64() + spacing*r.Float64()
		height := 40 * (0.6 + 0.8*r.Float64())
		for i := range y {
			x := float64(i) * spacing
			u, v := 2*(x-0.7*float64(n)*spacing)/28, 2*(x-at)/3
			y[i] = 300 + 50*math.Sin(x/300) + height/(1+u*u) + lines[p]/(1+v*v) + r.NormFloat64()
		}
		all = append(all, y)
	}
	return all
}

func TestNeighboursFindRays(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 7))
	const n, maps = 1000, 1500
	for _, k := range []int{1, 2, 4} {
		h := NewNeighbours(n)
		found, false1 := 0, 0
		for range maps {
			all := pixels(r, n, 1, [5]float64{})
			y, skip := all[4], make([]bool, n)
			at := 5 + r.IntN(n-10)
			y[at] += 8 + 40*r.Float64()
			y[at+1] += 12 * r.Float64()
			h.Mark(y, 1, 5, all[:k], skip)
			if skip[at] {
				found++
			}
			for i, s := range skip {
				if s && (i < at-1 || i > at+2) {
					false1++
				}
			}
		}
		rate := float64(false1) / (n * maps)
		t.Logf("%d neighbours: %d of %d rays, %.1e of other channels", k, found, maps, rate)
		if found < maps*99/100 || !(rate <= 1e-5) {
			t.Errorf("%d neighbours: %d of %d rays found, %d other channels marked", k, found, maps, false1)
		}
	}
}

// TestNeighboursSpareSilicon has a line 50 times the noise that is 3 cm-1 wide, also where it is weaker next door.
func TestNeighboursSpareSilicon(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 7))
	const n = 300
	for _, spacing := range []float64{0.6, 1, 2} {
		for _, next := range [][2]float64{{50, 50}, {35, 35}, {20, 20}, {80, 80}, {50, 0}} { // the last: an edge, one side without
			h := NewNeighbours(n)
			touched := 0
			for range 1000 {
				all := pixels(r, n, spacing, [5]float64{next[0], next[1], next[0], next[1], 50})
				for _, others := range [][][]float64{all[:1], all[:2], all[:4]} {
					skip := make([]bool, n)
					h.Mark(all[4], 1, 5, others, skip)
					for i := n*4/10 - 2; i < n*4/10+4; i++ { // more channels would count what noise does anywhere
						if skip[i] {
							touched++
						}
					}
				}
			}
			if touched > 0 {
				t.Errorf("%g cm-1 per channel, %v next door: %d channels of the line marked", spacing, next, touched)
			}
		}
	}
}

func TestNeighboursOfOddSpectra(t *testing.T) {
	for _, n := range []int{0, 1, 2, 5, 40} {
		flat, none, ray, skip := make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
		for i := range none {
			none[i] = math.NaN()
		}
		if n > 0 {
			ray[n/2] = 100
		}
		h := NewNeighbours(n)
		for name, got := range map[string]int{
			"no neighbour": h.Mark(ray, 1, 5, nil, skip), "all NaN next door": h.Mark(ray, 1, 5, [][]float64{none}, skip),
			"all NaN": h.Mark(none, 1, 5, [][]float64{flat}, skip), "constant": h.Mark(flat, 1, 5, [][]float64{flat}, skip),
			"no noise": h.Mark(ray, math.NaN(), 5, [][]float64{flat}, skip),
		} {
			if got != 0 {
				t.Errorf("%d channels, %s: %d marked", n, name, got)
			}
		}
		if got := h.Mark(ray, 1, 5, [][]float64{none, flat}, skip); n == 40 && (got != 1 || !skip[20]) {
			t.Errorf("the ray in %d channels: %d marked", n, got)
		}
	}
}

func BenchmarkNeighbours(b *testing.B) {
	all := pixels(rand.New(rand.NewPCG(3, 7)), 1024, 1, [5]float64{50, 50, 50, 50, 50})
	h, skip := NewNeighbours(1024), make([]bool, 1024)
	b.ReportAllocs()
	for b.Loop() {
		h.Mark(all[4], 1, 5, all[:4], skip)
	}
}
