package lsq

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/floats"

	"bandgrid/fit/line"
)

// An eliminated problem is that of Bands, all Lorentzian, with heights and background solved for at each step: variable
// projection (SIAM J. Numer. Anal. 10, 413 (1973)) with Kaufman's derivative (BIT 15, 49 (1975)), both from memory. Its
// parameters are position and width of each band. It is here to measure whether it pays.
type eliminated struct {
	b        *Bands
	linear   [][]float64 // weighted: background, then profiles of unit height
	slopes   [][]float64 // weighted derivatives of the model by position and width, heights included
	y        []float64   // weighted counts
	r        []float64
	gram     []float64
	c        []float64 // background and heights
	cross    [][]float64
	d        [line.Len][]float64
	unit     []float64
	evaluate int
}

func newEliminated(b *Bands) *eliminated {
	v := func() []float64 { return make([]float64, len(b.X)) }
	e := &eliminated{b: b, y: v(), r: v(), unit: v()}
	n := b.Background() + len(b.shapes)
	for range n {
		e.linear = append(e.linear, v())
	}
	for range 2 * len(b.shapes) {
		e.slopes = append(e.slopes, v())
		e.cross = append(e.cross, make([]float64, n))
	}
	e.gram, e.c = make([]float64, n*n), make([]float64, n)
	for k := range e.d {
		e.d[k] = v()
	}
	return e
}

func (e *eliminated) Normal(a, g, p []float64, _ []bool) float64 {
	e.evaluate++
	b, bg := e.b, e.b.Background()
	n := len(e.linear)
	for k := range bg {
		copy(e.linear[k], b.columns[k]) // weighted powers
	}
	for k := range b.shapes {
		line.Lorentzian{}.Eval(e.unit, e.d[:], b.X, []float64{1, p[2*k], p[2*k+1]})
		floats.MulTo(e.linear[bg+k], e.unit, b.RootW)
		floats.MulTo(e.slopes[2*k], e.d[line.Position], b.RootW)
		floats.MulTo(e.slopes[2*k+1], e.d[line.Width], b.RootW)
	}
	floats.MulTo(e.y, b.Y, b.RootW)
	for i, ci := range e.linear {
		for j, cj := range e.linear[:i+1] {
			e.gram[i*n+j] = floats.Dot(ci, cj)
		}
		e.c[i] = floats.Dot(ci, e.y)
	}
	if !factor(e.gram, n) {
		return math.NaN()
	}
	solve(e.gram, n, e.c)
	copy(e.r, e.y)
	for i, ci := range e.linear {
		floats.AddScaled(e.r, -e.c[i], ci)
	}
	m := len(e.slopes)
	for k, s := range e.slopes {
		h := e.c[bg+k/2]
		for i, ci := range e.linear {
			e.cross[k][i] = h * floats.Dot(ci, s)
		}
		for i := range n { // L⁻¹ of it
			for j := range i {
				e.cross[k][i] -= e.gram[i*n+j] * e.cross[k][j]
			}
			e.cross[k][i] /= e.gram[i*n+i]
		}
		for l, t := range e.slopes[:k+1] {
			a[k*m+l] = h*e.c[bg+l/2]*floats.Dot(s, t) - floats.Dot(e.cross[k], e.cross[l])
		}
		g[k] = h * floats.Dot(s, e.r)
	}
	return floats.Dot(e.r, e.r)
}

// counted counts evaluations.
type counted struct {
	Problem
	n int
}

func (c *counted) Normal(a, g, p []float64, free []bool) float64 {
	c.n++
	return c.Problem.Normal(a, g, p, free)
}

// BenchmarkElimination fits the same spectra, from the same starts and to the same tolerance, with all parameters and with the
// linear ones eliminated. evals/fit is how often the normal equations are made; each costs about the same in both.
func BenchmarkElimination(b *testing.B) {
	for _, w := range []struct {
		name   string
		x      []float64
		places []usual
	}{{"dg", window(1200, 1750, 1.3), dAndG}, {"2d", window(2550, 2850, 1.3), twoD}} {
		problem := NewBands(w.x, 1, lorentzians(len(w.places))...)
		const n = 64
		var y, root, starts [][]float64
		lo, hi, free := unbounded(problem.Len())
		solver := NewSolver(problem.Len())
		for i := range n {
			p := draw(rand.New(rand.NewPCG(uint64(i), 78)), problem, w.places)
			for k := range w.places {
				free[problem.Band(k)+line.Position], free[problem.Band(k)+line.Width] = false, false
			}
			solver.Minimize(problem, p, lo, hi, free, len(w.x), Settings{})
			y, root, starts = append(y, slices.Clone(problem.Y)), append(root, slices.Clone(problem.RootW)), append(starts, p)
		}
		for k := range free {
			free[k] = true
		}
		load := func(i int) {
			copy(problem.Y, y[i])
			copy(problem.RootW, root[i])
			problem.SetWeights()
		}
		sums := [2][n]float64{}
		for mode, name := range []string{"all", "nonlinear"} {
			b.Run("window="+w.name+"/parameters="+name, func(b *testing.B) {
				c := counted{Problem: problem}
				if mode == 1 {
					c.Problem = newEliminated(problem)
				}
				p := make([]float64, 0, problem.Len())
				i := 0
				for b.Loop() {
					load(i % n)
					p = append(p[:0], starts[i%n]...)
					if mode == 1 {
						p = p[:0]
						for k := range w.places {
							at := problem.Band(k)
							p = append(p, starts[i%n][at+line.Position], starts[i%n][at+line.Width])
						}
					}
					res := solver.Minimize(&c, p, lo[:len(p)], hi[:len(p)], free[:len(p)], len(w.x)-problem.Len()+len(p), Settings{})
					sums[mode][i%n] = res.Sum
					i++
				}
				b.ReportMetric(float64(c.n)/float64(b.N), "evals/fit")
			})
		}
		for i := range n {
			if a, e := sums[0][i], sums[1][i]; a > 0 && e > 0 && !(math.Abs(a-e) <= 1e-4*a) {
				b.Logf("%s: spectrum %d: sums of squares %.3f and %.3f: different optima", w.name, i, a, e)
			}
		}
	}
}
