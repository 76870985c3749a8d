package region

import "math"

// A box is a rectangle of cells with a border of one cell around a region.
type box struct {
	col, row   int // of the map, of the box's lower left cell; may be -1
	cols, rows int
	inside     []bool // cells that count as inside for the distance
	d          []float64
}

// distance stores in b.d the Euclidean distance, um, of each cell's centre to the nearest centre of a cell that is not inside;
// +Inf where all are inside. Two passes of lower envelopes of parabolas, linear in the number of cells: Theory Comput. 8, 415
// (2012), https://doi.org/10.4086/toc.2012.v008a019.
func (b *box) distance(dx, dy float64) {
	n := max(b.cols, b.rows)
	f, out := make([]float64, n), make([]float64, n)
	v, z := make([]int, n), make([]float64, n+1)
	b.d = make([]float64, len(b.inside))
	for i, in := range b.inside {
		if in {
			b.d[i] = math.Inf(1)
		}
	}
	for c := range b.cols {
		for r := range b.rows {
			f[r] = b.d[r*b.cols+c]
		}
		envelope(out[:b.rows], f[:b.rows], v, z, dy)
		for r := range b.rows {
			b.d[r*b.cols+c] = out[r]
		}
	}
	for r := range b.rows {
		row := b.d[r*b.cols : (r+1)*b.cols]
		copy(f, row)
		envelope(row, f[:b.cols], v, z, dx)
	}
	for i, d2 := range b.d {
		b.d[i] = math.Sqrt(d2)
	}
}

// envelope stores in out the minimum over k of f[k] + ((i-k) step)². v and z are scratch memory.
func envelope(out, f []float64, v []int, z []float64, step float64) {
	top := -1
	s2 := step * step
	for q := range f {
		if math.IsInf(f[q], 1) {
			continue
		}
		at := math.Inf(-1)
		for top >= 0 {
			k := v[top]
			at = ((f[q]-f[k])/s2 + float64(q*q-k*k)) / float64(2*(q-k))
			if at > z[top] {
				break
			}
			top--
			at = math.Inf(-1)
		}
		top++
		v[top], z[top] = q, at
	}
	if top < 0 {
		for i := range out {
			out[i] = math.Inf(1)
		}
		return
	}
	k := 0
	for i := range out {
		for k < top && z[k+1] < float64(i) {
			k++
		}
		d := float64(i-v[k]) * step
		out[i] = f[v[k]] + d*d
	}
}
