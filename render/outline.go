package render

import (
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// outline returns the edges of a region's cells where it ends, as lines in the map's box; edges in a row are one line.
func outline(r survey.Region, g scan.Grid, box plot.Box) [][]plot.Point {
	inside := make(map[int32]bool, len(r.Cells))
	for _, c := range r.Cells {
		inside[c] = true
	}
	dx, dy := box.W/float64(g.Cols), box.H/float64(g.Rows)
	at := func(col, row int) plot.Point { // the lower left corner of a cell
		return plot.Point{X: box.X + float64(col)*dx, Y: box.Y + box.H - float64(row)*dy}
	}
	var level, upright runs
	for _, c := range r.Cells { // rising, so runs along a row come in order
		col, row := int(c)%g.Cols, int(c)/g.Cols
		if row == 0 || !inside[c-int32(g.Cols)] {
			level.add(row, col)
		}
		if row == g.Rows-1 || !inside[c+int32(g.Cols)] {
			level.add(row+1, col)
		}
		if col == 0 || !inside[c-1] {
			upright.add(col, row)
		}
		if col == g.Cols-1 || !inside[c+1] {
			upright.add(col+1, row)
		}
	}
	var lines [][]plot.Point
	for _, e := range level.list {
		lines = append(lines, []plot.Point{at(e.from, e.line), at(e.to, e.line)})
	}
	for _, e := range upright.list {
		lines = append(lines, []plot.Point{at(e.line, e.from), at(e.line, e.to)})
	}
	return lines
}

// runs joins edges that follow each other on one line of the grid.
type runs struct {
	list []run
	open map[int]int // line to its last run
}

type run struct{ line, from, to int }

func (r *runs) add(line, at int) {
	if i, ok := r.open[line]; ok && r.list[i].to == at {
		r.list[i].to++
		return
	}
	if r.open == nil {
		r.open = map[int]int{}
	}
	r.open[line] = len(r.list)
	r.list = append(r.list, run{line, at, at + 1})
}
