package lsq

import (
	"flag"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"
	"testing"

	"bandgrid/fit/line"
)

// pixels is how many spectra TestBandsEqualTheGeneralCore fits. As many as were asked for once and for all:
// go test ./fit/lsq -run General -pixels 100000 -v
var pixels = flag.Int("pixels", 2000, "spectra in the comparison of the two solvers")

// A usual band is where a fit starts, and how far it may go.
type usual struct {
	position, width float64
	shift, widths   [2]float64
}

var (
	dAndG = []usual{
		{1341, 24, [2]float64{-35, 35}, [2]float64{6, 200}},
		{1581.6, 15, [2]float64{-45, 30}, [2]float64{3, 120}},
		{1619, 13, [2]float64{-10, 15}, [2]float64{4, 40}},
	}
	twoD = []usual{{2670, 30, [2]float64{-50, 70}, [2]float64{8, 160}}}
)

// draw fills a problem with a noisy spectrum of random bands and returns the usual places as the start of its fit. G and 2D are 20
// to 240 times as high as the noise, D is 0.4 to 2.5 of G, D' a thirteenth to a third of D, as kinds of defects have it (Nano Lett.
// 12, 3925 (2012)), but at least 8 times the noise: a band that is lost in it has no position, and is not left free in a fit.
func draw(r *rand.Rand, b *Bands, places []usual) []float64 {
	truth, start := make([]float64, b.Len()), make([]float64, b.Len())
	level := 20 * math.Exp(r.Float64()*math.Log(100))
	truth[0], truth[1] = level, level*0.2*(2*r.Float64()-1)
	noise := math.Sqrt(level + 16)
	g := noise * 20 * math.Exp(r.Float64()*math.Log(12))
	d := g * (0.4 + 2.1*r.Float64())
	heights := []float64{d, g, max(8*noise, d/(3+10*r.Float64()))}
	if len(places) == 1 {
		heights[0] = g
	}
	for k, at := range places {
		i := b.Band(k)
		truth[i+line.Height] = heights[k]
		truth[i+line.Position] = at.position + 3*r.NormFloat64()
		truth[i+line.Width] = at.width * math.Exp(0.2*r.NormFloat64())
		start[i+line.Position], start[i+line.Width] = at.position, at.width
	}
	b.Curve(b.Y, truth)
	for i, m := range b.Y {
		s := math.Sqrt(m + 16)
		b.RootW[i] = 1 / s
		b.Y[i] += s * r.NormFloat64()
	}
	b.SetWeights()
	return start
}

func window(low, high, step float64) (x []float64) {
	for v := low; v <= high; v += step {
		x = append(x, v)
	}
	return x
}

// TestBandsEqualTheGeneralCore fits the same spectra, with the same weights and from the same start, by the normal equations that
// the pool uses, poor fits from further starts as there, and by the general core, which the certified problems test. What differs is the worst parameter of a
// spectrum, in standard errors.
func TestBandsEqualTheGeneralCore(t *testing.T) {
	for _, w := range []struct {
		name   string
		x      []float64
		places []usual
	}{{"D and G", window(1200, 1750, 1.3), dAndG}, {"2D", window(2550, 2850, 1.3), twoD}} {
		n := *pixels / 2
		worst := make([]float64, n)
		lost := make([]bool, n)
		var wait sync.WaitGroup
		var retried atomic.Int32
		workers := runtime.GOMAXPROCS(0)
		for first := range workers {
			wait.Go(func() {
				b := NewBands(w.x, 1, lorentzians(len(w.places))...)
				solver, general := NewSolver(b.Len()), NewGeneral(len(w.x), b.Len())
				lo, hi, free := unbounded(b.Len())
				for k, u := range w.places {
					i := b.Band(k)
					lo[i+line.Position], hi[i+line.Position] = u.position+u.shift[0], u.position+u.shift[1]
					lo[i+line.Width], hi[i+line.Width] = u.widths[0], u.widths[1]
				}
				squares := b.Squares()
				squares.Lower, squares.Upper = lo, hi
				cov := make([]float64, b.Len()*b.Len())
				for i := first; i < n; i += workers {
					p := draw(rand.New(rand.NewPCG(uint64(i), 77)), b, w.places)
					for k := range w.places {
						free[b.Band(k)+line.Position], free[b.Band(k)+line.Width] = false, false
					}
					solver.Minimize(b, p, lo, hi, free, len(w.x), Settings{})
					for k := range free {
						free[k] = true
					}
					q := slices.Clone(p)
					ours := solver.Minimize(b, p, lo, hi, free, len(w.x), Settings{})
					for _, scale := range []float64{0.45, 2.2} { // as the pool does
						if ours.Sum > 2*float64(len(w.x)) {
							copy(p, q)
							for k := range w.places {
								p[b.Band(k)+line.Width] *= scale
							}
							retried.Add(1)
							ours = solver.Minimize(b, p, lo, hi, free, len(w.x), Settings{})
						}
					}
					theirs := general.Minimize(squares, q, GeneralSettings{})
					if ours.End != Converged || theirs.End != Converged || !general.Covariance(cov) {
						lost[i] = true
						continue
					}
					for k := range p {
						if p[k] == q[k] { // at a bound
							continue
						}
						worst[i] = max(worst[i], math.Abs(p[k]-q[k])/math.Sqrt(cov[k*len(p)+k]))
					}
				}
			})
		}
		wait.Wait()
		count := 0
		for _, l := range lost {
			if l {
				count++
			}
		}
		over := 0
		for _, v := range worst {
			if !(v <= 1e-3) {
				over++
			}
		}
		sorted := slices.Sorted(slices.Values(worst))
		t.Logf("%s: %d spectra; worst parameter differs by %.1e standard errors in the median, %.1e in 99.9 %%, %.1e at most; %d above 1e-3, %d not converged, %d further starts of poor fits",
			w.name, n, sorted[n/2], sorted[n*999/1000], sorted[n-1], over, count, retried.Load())
		if over > 0 || count > 0 {
			t.Errorf("%s: %d of %d spectra differ by more than 1e-3 standard errors, %d did not converge", w.name, over, n, count)
		}
	}
}
