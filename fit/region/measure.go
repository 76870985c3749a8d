package region

import (
	"math"
	"runtime"
	"slices"
	"sync"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// A measure computes sizes and statistics of sets of cells. Its marks are scratch memory for one region at a time.
type measure struct {
	s          *survey.Survey
	ring       float64
	class      []int8 // of each cell
	in, beside []bool // cells of the region; undetermined cells beside it
	quantities []*survey.Quantity
}

func newMeasure(s *survey.Survey, class []int8, ring float64) *measure {
	m := &measure{s: s, class: class, ring: ring, in: make([]bool, len(class)), beside: make([]bool, len(class))}
	if ring == 0 {
		m.ring = max(s.Grid.DX, s.Grid.DY)
	}
	for i := range s.Maps {
		switch q := &s.Maps[i]; q.Name {
		case "status", "layer_number": // bits and classes have no mean
		default:
			m.quantities = append(m.quantities, q)
		}
	}
	return m
}

// region measures the cells given. boundary says that the region ends where its material does, so that its ring is left out
// and its area has an uncertainty; else its outline was drawn.
func (m *measure) region(id string, layer float64, cells []int32, boundary bool) survey.Region {
	g := m.s.Grid
	r := survey.Region{ID: id, Layer: layer, Pixels: len(cells), Cells: cells, Area: float64(len(cells)) * g.CellArea(), AreaSE: math.NaN(), Inscribed: math.NaN(), Perimeter: math.NaN()}
	if len(cells) == 0 {
		r.CX, r.CY, r.MinX, r.MinY, r.MaxX, r.MaxY = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
		r.Stats = m.stats(nil)
		return r
	}
	m.place(&r)
	used := cells
	if g.Layout != scan.Points {
		for _, c := range cells {
			m.in[c] = true
		}
		used = m.outline(&r, boundary)
		for _, c := range cells {
			m.in[c] = false
		}
	}
	r.Stats = m.stats(used)
	return r
}

// place fills in centroid and bounding box.
func (m *measure) place(r *survey.Region) {
	g := m.s.Grid
	r.MinX, r.MinY, r.MaxX, r.MaxY = math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	for _, c := range r.Cells {
		x, y := g.Center(int(c)%g.Cols, int(c)/g.Cols)
		hx, hy := g.DX/2, g.DY/2
		if g.Layout == scan.Points {
			x, y, hx, hy = float64(m.s.X[c]), float64(m.s.Y[c]), 0, 0
		}
		r.CX += x
		r.CY += y
		r.MinX, r.MaxX = min(r.MinX, x-hx), max(r.MaxX, x+hx)
		r.MinY, r.MaxY = min(r.MinY, y-hy), max(r.MaxY, y+hy)
	}
	r.CX /= float64(len(r.Cells))
	r.CY /= float64(len(r.Cells))
}

// outline fills in perimeter, uncertainty of the area and the largest inscribed circle, and returns the cells that statistics
// use.
//
// The true boundary runs somewhere through the cells that touch it; each of them is covered by an unknown share. Taken as
// uniform and independent, the share has a variance of 1/12. Undetermined cells beside the region do not count to its area, but
// part of them may belong to it: one unknown share of them all, since the same rule left them undetermined.
func (m *measure) outline(r *survey.Region, boundary bool) (used []int32) {
	g := m.s.Grid
	edge := 0
	var doubtful []int // undetermined cells beside the region, marked in m.beside
	r.Perimeter = 0
	for _, c := range r.Cells {
		touches := false
		for side, n := range neighbours(int(c), g) {
			if n >= 0 && m.in[n] {
				continue
			}
			if r.Perimeter += g.DX; side < 2 {
				r.Perimeter += g.DY - g.DX
			}
			touches = touches || n >= 0
			if n >= 0 && !m.beside[n] && m.class[n] == undetermined {
				m.beside[n] = true
				doubtful = append(doubtful, n)
			}
		}
		if touches {
			edge++
		}
	}
	for _, n := range doubtful {
		m.beside[n] = false
	}
	if boundary {
		open := float64(len(doubtful))
		r.AreaSE = g.CellArea() * math.Sqrt((float64(edge)+open*open)/12)
	}
	b := m.box(r.Cells)
	half := (g.DX + g.DY) / 4
	b.fill(g, func(c int) bool { return c >= 0 && m.in[c] })
	b.distance(g.DX, g.DY)
	r.Inscribed = max(0, slices.Max(b.d)-half) // from a centre to the boundary, half a step before the next centre outside
	if !boundary || m.ring < 0 {
		return r.Cells
	}
	// The film goes on beyond the edge of the map, and a pixel that was not measured is no boundary either.
	status := m.s.Map("status")
	b.fill(g, func(c int) bool { return c < 0 || m.in[c] || status != nil && status.Values[c] != status.Values[c] })
	b.distance(g.DX, g.DY)
	for _, c := range r.Cells {
		col, row := int(c)%g.Cols-b.col, int(c)/g.Cols-b.row
		if b.d[row*b.cols+col]-half >= m.ring-1e-9 {
			used = append(used, c)
		}
	}
	if len(used) < leastCells {
		return r.Cells
	}
	return used
}

// box returns the box around cells.
func (m *measure) box(cells []int32) *box {
	cols := m.s.Grid.Cols
	low, high := [2]int{math.MaxInt, math.MaxInt}, [2]int{}
	for _, c := range cells {
		col, row := int(c)%cols, int(c)/cols
		low = [2]int{min(low[0], col), min(low[1], row)}
		high = [2]int{max(high[0], col), max(high[1], row)}
	}
	return &box{col: low[0] - 1, row: low[1] - 1, cols: high[0] - low[0] + 3, rows: high[1] - low[1] + 3}
}

// fill sets b.inside by asking of each cell's index in the map, -1 beyond its edge.
func (b *box) fill(g scan.Grid, inside func(c int) bool) {
	b.inside = make([]bool, b.cols*b.rows)
	for i := range b.inside {
		col, row := b.col+i%b.cols, b.row+i/b.cols
		c := -1
		if col >= 0 && col < g.Cols && row >= 0 && row < g.Rows {
			c = row*g.Cols + col
		}
		b.inside[i] = inside(c)
	}
}

// stats summarises every quantity over cells, all processors at work.
func (m *measure) stats(cells []int32) []survey.Stat {
	list := make([]survey.Stat, len(m.quantities))
	var wait sync.WaitGroup
	next := make(chan int)
	for range min(runtime.GOMAXPROCS(0), len(m.quantities)) {
		wait.Go(func() {
			var sum summary
			for k := range next {
				list[k] = sum.of(m.quantities[k], cells, m.s.Grid)
				if of := m.quantities[k].Of; len(of) == 2 {
					sum.ratio(&list[k], m.quantities[k], m.s.Map(of[0]), m.s.Map(of[1]), cells, m.s.Grid)
				}
			}
		})
	}
	for k := range m.quantities {
		next <- k
	}
	close(next)
	wait.Wait()
	return list
}
