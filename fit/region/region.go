// Package region finds connected areas of one layer number on a map and summarises every quantity over them.
//
//	err := region.Find(s, region.Options{MinArea: 2, Ring: 0.4})
//
// fills in s.Regions: the whole map first, then the areas by falling size.
package region

import (
	"errors"
	"math"
	"slices"
	"strconv"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// Options steer [Find]; the zero value works.
type Options struct {
	// MinArea is the smallest area, um2, that is a region of its own; default: four cells. Smaller specks and holes are absorbed
	// into the region that they border most.
	MinArea float64
	// Ring is the width, um, of the ring along a region's boundary that is left out of its statistics, since the spot covers two
	// materials there; default: one step. Negative: none. The ring stays in where fewer than ten cells would be left.
	Ring float64
}

// leastCells is the smallest number of cells that a region keeps when its ring is left out.
const leastCells = 10

// Classes of cells beside the layer numbers 0 to 5.
const (
	missing      int8 = -2 // not measured, or not readable
	undetermined int8 = -1
)

// Find makes s.Regions from the quantity layer_number. Regions are 4-connected; missing pixels belong to none. Scattered
// points have no neighbours, so they give the whole map only, without an area.
func Find(s *survey.Survey, opt Options) error {
	if s.Grid.Cells() == 0 {
		return errors.New("the survey has no pixels")
	}
	class := classes(s)
	s.Regions = s.Regions[:0]
	m := newMeasure(s, class, opt.Ring)
	all := make([]int32, 0, len(class))
	for c, k := range class {
		if k != missing {
			all = append(all, int32(c))
		}
	}
	s.Regions = append(s.Regions, m.region("all", math.NaN(), all, false))
	if s.Grid.Layout == scan.Points || s.Map("layer_number") == nil {
		return nil
	}
	least := 4
	if opt.MinArea > 0 {
		least = int(math.Ceil(opt.MinArea/s.Grid.CellArea() - 1e-9))
	}
	absorb(class, s.Grid, least)
	parts := components(class, s.Grid)
	slices.SortStableFunc(parts, func(a, b part) int { return len(b.cells) - len(a.cells) }) // ties stay in order of first cell
	for _, p := range parts {
		if p.class >= 0 && len(p.cells) >= least {
			id := strconv.Itoa(len(s.Regions))
			s.Regions = append(s.Regions, m.region(id, float64(p.class), p.cells, true))
		}
	}
	return nil
}

// Rectangle summarises the cells whose centres lie within x0 to x1 and y0 to y1, um, under a name of its own. Its boundary is
// drawn by hand, so no ring is left out.
func Rectangle(s *survey.Survey, name string, x0, y0, x1, y1 float64) survey.Region {
	class := classes(s)
	var cells []int32
	for c, k := range class {
		x, y := float64(s.X[c]), float64(s.Y[c])
		if k != missing && x >= min(x0, x1) && x <= max(x0, x1) && y >= min(y0, y1) && y <= max(y0, y1) {
			cells = append(cells, int32(c))
		}
	}
	return newMeasure(s, class, -1).region(name, math.NaN(), cells, false)
}

// classes returns the class of each cell.
func classes(s *survey.Survey) []int8 {
	class := make([]int8, s.Grid.Cells())
	number, status := s.Map("layer_number"), s.Map("status")
	for c := range class {
		class[c] = undetermined
		if number != nil && number.Values[c] >= 0 && number.Values[c] <= 5 {
			class[c] = int8(number.Values[c])
		} else if status != nil && status.Values[c] != status.Values[c] || status == nil && number != nil {
			class[c] = missing
		}
	}
	return class
}

// A part is a connected set of cells of one class.
type part struct {
	class int8
	cells []int32 // rising
}

// components returns the 4-connected parts of all classes but missing, in order of their first cells.
func components(class []int8, g scan.Grid) []part {
	seen := make([]bool, len(class))
	var parts []part
	var stack []int32
	for start, k := range class {
		if seen[start] || k == missing {
			continue
		}
		p := part{class: k}
		seen[start] = true
		stack = append(stack[:0], int32(start))
		for len(stack) > 0 {
			c := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			p.cells = append(p.cells, c)
			for _, n := range neighbours(int(c), g) {
				if n >= 0 && !seen[n] && class[n] == k {
					seen[n] = true
					stack = append(stack, int32(n))
				}
			}
		}
		slices.Sort(p.cells)
		parts = append(parts, p)
	}
	return parts
}

// neighbours returns the four cells beside c, -1 where there is none: left, right, below, above.
func neighbours(c int, g scan.Grid) [4]int {
	n := [4]int{c - 1, c + 1, c - g.Cols, c + g.Cols}
	if c%g.Cols == 0 {
		n[0] = -1
	}
	if (c+1)%g.Cols == 0 {
		n[1] = -1
	}
	if n[2] < 0 {
		n[2] = -1
	}
	if n[3] >= g.Cells() {
		n[3] = -1
	}
	return n
}

// absorb gives each part smaller than least the class of the large neighbour with which it shares most edges. An undetermined
// part is absorbed only where it lies inside one class: between two it is their boundary. This goes on until nothing changes, so
// that a speck inside a speck is absorbed too. Parts without a large neighbour stay as they are.
func absorb(class []int8, g scan.Grid, least int) {
	for {
		parts := components(class, g)
		owner := make([]int32, len(class))
		for i, p := range parts {
			for _, c := range p.cells {
				owner[c] = int32(i)
			}
		}
		type change struct{ part, into int }
		var changes []change
		edges := map[int32]int{}
		for i, p := range parts {
			if len(p.cells) >= least {
				continue
			}
			clear(edges)
			around := missing // the class of the cells around, if it is one
			mixed := false
			for _, c := range p.cells {
				for _, n := range neighbours(int(c), g) {
					if n < 0 || class[n] == missing || owner[n] == int32(i) {
						continue
					}
					mixed = mixed || around != missing && class[n] != around
					around = class[n]
					if len(parts[owner[n]].cells) >= least {
						edges[owner[n]]++
					}
				}
			}
			if p.class == undetermined && mixed {
				continue
			}
			best := int32(-1)
			for k, count := range edges {
				// Ties go to the larger part, then to the earlier one, whatever the order of the map.
				switch {
				case best < 0, count > edges[best]:
					best = k
				case count < edges[best]:
				case len(parts[k].cells) > len(parts[best].cells), len(parts[k].cells) == len(parts[best].cells) && k < best:
					best = k
				}
			}
			if best >= 0 {
				changes = append(changes, change{i, int(best)})
			}
		}
		if len(changes) == 0 {
			return
		}
		for _, ch := range changes {
			for _, c := range parts[ch.part].cells {
				class[c] = parts[ch.into].class
			}
		}
	}
}
