package fit

import (
	"context"
	"errors"
	"runtime"
	"slices"
	"sync"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// RunOptions steer [Run]; the zero value works.
type RunOptions struct {
	Workers int // goroutines that decode and fit; default: as many as there are processors
	// FlipX and FlipY turn the sign of the stage positions, for a stage whose axes run the other way.
	FlipX, FlipY bool
	// Leave, where not nil, says which places are left out, um, after the flip: metal, tape. It is called from several goroutines.
	Leave func(x, y float64) bool
	// Progress is called after each block with the number of pixels in it, from several goroutines.
	Progress func(pixels int)
}

func (o *RunOptions) workers() int {
	if o.Workers <= 0 {
		return runtime.GOMAXPROCS(0)
	}
	return o.Workers
}

// place returns where a pixel lies, and whether it is left out.
func (o *RunOptions) place(p *scan.Pixel) (x, y float64, left bool) {
	x, y = p.X, p.Y
	if o.FlipX {
		x = -x
	}
	if o.FlipY {
		y = -y
	}
	return x, y, o.Leave != nil && o.Leave(x, y)
}

// Fits holds what [Run] found, a row per pixel in order of acquisition, until [Fits.Survey] lays it out on the grid.
type Fits struct {
	plan  *Plan
	slabs []*slab
}

// A slab holds the results of one block. How many pixels a block has shows only when it is decoded, so results are kept by
// block and put in order at the end: they depend neither on the number of workers nor on timing.
type slab struct {
	seq      int
	x, y     []float64
	read     []bool // the pixel could be read, and is not left out
	left     int    // pixels that are left out
	spikes   []survey.Spike
	holes    [2]int      // channels without a usable count, and pixels that have such
	last     bool        // the run ends inside the last pixel's last line
	columns  [][]float32 // values, then standard errors, of each of the plan's columns
	problems []*scan.InputError
}

// Run fits every pixel of the scan. Blocks are decoded and fitted by the workers, so at most one block more than there are
// workers is in memory. When the stream ends with an error, or ctx is done, that error is returned together with what was
// fitted until then.
func Run(ctx context.Context, sc *scan.Scan, plan *Plan, opt RunOptions) (*Fits, error) {
	fits := &Fits{plan: plan}
	blocks := make(chan scan.Block)
	var lock sync.Mutex
	var workers sync.WaitGroup
	for range opt.workers() {
		workers.Go(func() {
			w := worker{opt: &opt, fitter: NewFitter(plan), quantities: len(plan.Columns)}
			for block := range blocks {
				s := w.block(block)
				lock.Lock()
				fits.slabs = append(fits.slabs, s)
				lock.Unlock()
				if opt.Progress != nil {
					opt.Progress(len(s.x))
				}
			}
		})
	}
	var failed error
	for block, err := range sc.Blocks(ctx) {
		if failed = err; err != nil {
			break // what is fitted already stays
		}
		blocks <- block
	}
	close(blocks)
	workers.Wait()
	slices.SortFunc(fits.slabs, func(a, b *slab) int { return a.seq - b.seq })
	return fits, failed
}

// A worker fits blocks. Its rows are scratch memory that grows to the largest block.
type worker struct {
	opt        *RunOptions
	fitter     *Fitter
	quantities int
	rows       []float32 // values and standard errors of each pixel, one after the other
}

func (w *worker) block(block scan.Block) *slab {
	s := &slab{seq: block.Seq()}
	w.rows = w.rows[:0]
	q := w.quantities
	for pixel, err := range block.Pixels() {
		i := len(s.x)
		x, y, left := w.opt.place(pixel)
		s.x, s.y, s.read = append(s.x, x), append(s.y, y), append(s.read, err == nil && !left)
		w.rows = slices.Grow(w.rows, 2*q)[:len(w.rows)+2*q]
		row := w.rows[2*q*i:]
		if err != nil || left {
			for k := range row {
				row[k] = float32(nan)
			}
		}
		if left {
			s.left++
			continue
		}
		if err != nil {
			problem, ok := errors.AsType[*scan.InputError](err)
			if !ok {
				problem = &scan.InputError{What: "the pixel cannot be read", Err: err, Remedy: "the pixel is left out"}
			}
			problem.Pixel = i
			s.problems = append(s.problems, problem)
			continue
		}
		s.last = pixel.Open
		w.fitter.Fit(pixel.Counts, row[:q], row[q:])
		for _, shift := range w.fitter.spikes {
			s.spikes = append(s.spikes, survey.Spike{X: float32(x), Y: float32(y), Shift: shift})
		}
		if h := w.fitter.holes; h > 0 {
			s.holes[0] += h
			s.holes[1]++
		}
	}
	n := len(s.x)
	s.columns = make([][]float32, 2*q)
	for k := range s.columns {
		column := make([]float32, n)
		for i := range column {
			column[i] = w.rows[2*q*i+k]
		}
		s.columns[k] = column
	}
	return s
}
