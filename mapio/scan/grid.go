package scan

import "math"

// A Layout says how pixels lie on the stage.
type Layout string

const (
	Raster Layout = "raster" // rows and columns, acquired in any order
	Line   Layout = "line"   // one row or column of at least two points
	Points Layout = "points" // no grid: maps have one row, in order of y then x
)

// A Grid is the raster that a run's coordinates lie on. Row 0 has the lowest y and column 0 the lowest x, whatever corner the
// stage started from.
type Grid struct {
	Layout Layout  `json:"layout"`
	Cols   int     `json:"cols"`
	Rows   int     `json:"rows"`
	X0     float64 `json:"x0_um"` // centre of column 0
	Y0     float64 `json:"y0_um"` // centre of row 0
	DX     float64 `json:"dx_um"` // step between columns, > 0; for a single column, and for points, a typical distance
	DY     float64 `json:"dy_um"` // step between rows, > 0; likewise
	// Rise is by how much y rises from column to column of a line that runs obliquely, um (DY then is the distance along the
	// line); 0 otherwise.
	Rise float64 `json:"rise_um,omitempty"`
	// Jitter is the root mean square distance of the pixels from their cells' centres, um.
	Jitter float64 `json:"jitter_um"`
}

// Cells is the number of cells, Rows times Cols.
func (g Grid) Cells() int { return g.Rows * g.Cols }

// Center returns the centre of a cell, um. For scattered points it means nothing: their places are those measured.
func (g Grid) Center(col, row int) (x, y float64) {
	return g.X0 + float64(col)*g.DX, g.Y0 + float64(row)*g.DY + float64(col)*g.Rise
}

// CellArea is the area of one cell, um2: on a line that of a square with the step as its side; NaN for scattered points.
func (g Grid) CellArea() float64 {
	switch {
	case g.Layout == Points:
		return math.NaN()
	case g.Rise != 0:
		return g.DX*g.DX + g.Rise*g.Rise
	}
	return g.DX * g.DY
}

// Bounds returns the outer edges of the cells, um. For scattered points it means nothing.
func (g Grid) Bounds() (minX, minY, maxX, maxY float64) {
	endX, endY := g.Center(g.Cols-1, g.Rows-1)
	return g.X0 - g.DX/2, min(g.Y0, endY) - g.DY/2, endX + g.DX/2, max(g.Y0, endY) + g.DY/2
}
