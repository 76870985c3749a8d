package fit

import (
	"errors"
	"fmt"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// ErrNoPixel says that a run held no pixel that could be used.
var ErrNoPixel = errors.New("no pixel could be read")

// Unreadable says which pixels of a run could not be read.
type Unreadable struct {
	Pixels int
	First  []*scan.InputError // the first of them, in order of acquisition
}

// Unreadable lists the pixels that could not be read, at most limit of them one by one.
func (f *Fits) Unreadable(file string, limit int) (u Unreadable) {
	first := 0
	for _, s := range f.slabs {
		for _, p := range s.problems {
			if u.Pixels++; len(u.First) < limit {
				at := *p
				at.File = file
				at.Pixel += first // counted within its block so far
				u.First = append(u.First, &at)
			}
		}
		first += len(s.x)
	}
	return u
}

// Len is the number of pixels found in the run, readable or not.
func (f *Fits) Len() (n int) {
	for _, s := range f.slabs {
		n += len(s.x)
	}
	return n
}

// Survey finds the grid and lays the results out on it: grid, pixel counts, positions and maps of the survey are filled in.
// Where a place was measured more than once, the last complete pixel counts. It may be called once, since it frees the results
// as it goes. The error is ErrNoPixel, or says why no grid could be found.
func (f *Fits) Survey() (*survey.Survey, error) {
	var x, y []float64
	var read []bool
	for _, s := range f.slabs {
		x, y, read = append(x, s.x...), append(y, s.y...), append(read, s.read...)
	}
	good, left := 0, 0
	for _, ok := range read {
		if ok {
			good++
		}
	}
	var holes [2]int
	for _, s := range f.slabs {
		left += s.left
		holes[0] += s.holes[0]
		holes[1] += s.holes[1]
	}
	if good == 0 {
		return nil, ErrNoPixel
	}
	grid, cell, err := scan.FindGrid(x, y)
	if err != nil {
		return nil, err
	}
	s := &survey.Survey{}
	s.Grid = grid
	s.Pixels = survey.Pixels{Expected: grid.Cells(), Read: len(x)}

	chosen, seen := f.choose(cell, read, grid.Cells())
	if i := f.cutOff(seen); i >= 0 {
		read[i] = false
		s.Warnings = append(s.Warnings, fmt.Sprintf("the run ends in mid-line in pixel %d; that pixel is left out, as its last number may be cut off", i))
		chosen, seen = f.choose(cell, read, grid.Cells())
	}
	for _, slab := range f.slabs {
		s.Spikes = append(s.Spikes, slab.spikes...)
	}
	s.X, s.Y = make([]float32, grid.Cells()), make([]float32, grid.Cells())
	onCell := 0
	for c, i := range chosen {
		if i >= 0 {
			s.X[c], s.Y[c] = float32(x[i]), float32(y[i])
			onCell++
			continue
		}
		s.X[c], s.Y[c] = float32(grid.X0+float64(c%grid.Cols)*grid.DX), float32(grid.Y0+float64(c/grid.Cols)*grid.DY)
		if !seen[c] {
			s.Pixels.Missing++
		}
	}
	// What is neither on a cell by itself nor replaced by a later pixel of the same cell could not be read.
	unread := 0
	for i, ok := range read {
		if !ok && (cell[i] < 0 || chosen[cell[i]] < 0) {
			unread++
		}
	}
	unread -= left
	s.Pixels.Repeated, s.Pixels.Excluded = len(x)-onCell-unread-left, left
	f.maps(s, chosen)
	s.Pixels.Failed = unread
	s.Pixels.Holes, s.Pixels.Holed = holes[0], holes[1]
	status := s.Map("status")
	for _, i := range status.Values {
		switch {
		case i != i:
		case Status(i)&Unfit != 0:
			s.Pixels.Failed++
		case Status(i)&Converged != 0:
			s.Pixels.Fitted++
		}
	}
	return s, nil
}

// choose returns for each cell the last pixel that could be read, -1 where there is none, and whether any pixel lies there.
func (f *Fits) choose(cell []int32, read []bool, cells int) (chosen []int32, seen []bool) {
	chosen, seen = make([]int32, cells), make([]bool, cells)
	for c := range chosen {
		chosen[c] = -1
	}
	for i, c := range cell {
		if c < 0 {
			continue
		}
		seen[c] = true
		if read[i] {
			chosen[c] = int32(i)
		}
	}
	return chosen, seen
}

// cutOff returns the pixel in which the run breaks off, or -1. A last line without an end is taken for cut off only where the
// grid is not complete: many programs leave the last line of a complete file without an end.
func (f *Fits) cutOff(seen []bool) int {
	if len(f.slabs) == 0 || !f.slabs[len(f.slabs)-1].last {
		return -1
	}
	for _, ok := range seen {
		if !ok {
			return f.Len() - 1
		}
	}
	return -1
}

// maps puts the columns on the grid, one after the other, and frees them.
func (f *Fits) maps(s *survey.Survey, chosen []int32) {
	total := f.Len()
	flat := make([]float32, total)
	gather := func(k int) []float32 {
		at := flat[:0]
		for _, slab := range f.slabs {
			at = append(at, slab.columns[k]...)
			slab.columns[k] = nil
		}
		values := make([]float32, len(chosen))
		for c, i := range chosen {
			values[c] = float32(nan)
			if i >= 0 {
				values[c] = at[i]
			}
		}
		return values
	}
	q := len(f.plan.Columns)
	for k, c := range f.plan.Columns {
		quantity := survey.Quantity{Name: c.Name, Unit: c.Unit, Description: c.Description, Of: c.Of, Values: gather(k)}
		if se := gather(q + k); c.HasSE {
			quantity.SE = se
		}
		s.Maps = append(s.Maps, quantity)
	}
}
