package scan

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
	// Jitter is the root mean square distance of the pixels from their cells' centres, um.
	Jitter float64 `json:"jitter_um"`
}

// Cells is the number of cells, Rows times Cols.
func (g Grid) Cells() int { return g.Rows * g.Cols }
