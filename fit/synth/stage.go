package synth

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
)

// A Stage says where pixels lie and in which order they are measured.
type Stage struct {
	Cols int     `json:"cols"`  // default 1
	Rows int     `json:"rows"`  // default 1
	DX   float64 `json:"dx_um"` // step between columns; default 1
	DY   float64 `json:"dy_um"` // step between rows; default dx_um
	X0   float64 `json:"x0_um"` // stage position of column 0
	Y0   float64 `json:"y0_um"` // of row 0

	Order  string  `json:"order"`     // "raster" (default) or "serpentine": every other line runs backwards
	Fast   string  `json:"fast"`      // axis along which lines run: "x" (default) or "y"
	Corner string  `json:"corner"`    // where it starts: "lower-left" (default), "lower-right", "upper-left", "upper-right"
	Jitter float64 `json:"jitter_um"` // standard deviation of x and of y about the grid; the run reports where the stage was

	// The sample as it lies on the stage: stage position = rotation of the object's coordinates about the origin, then offset.
	OffsetX  float64 `json:"offset_x_um"`
	OffsetY  float64 `json:"offset_y_um"`
	Rotation float64 `json:"rotation_deg"` // counterclockwise

	Missing  float64 `json:"missing"`  // fraction of pixels never measured
	Repeated float64 `json:"repeated"` // fraction of pixels measured twice, the second time right after the first
	// Cut ends the run after this fraction of its pixels; default 0: not at all. A text then ends in the middle of the next
	// pixel's line.
	Cut float64 `json:"cut"`
}

func (s *Stage) prepare() error {
	if s.Cols == 0 {
		s.Cols = 1
	}
	if s.Rows == 0 {
		s.Rows = 1
	}
	setDefault(&s.DX, 1)
	setDefault(&s.DY, s.DX)
	if s.Order == "" {
		s.Order = "raster"
	}
	if s.Fast == "" {
		s.Fast = "x"
	}
	if s.Corner == "" {
		s.Corner = "lower-left"
	}
	switch {
	case s.Cols < 0 || s.Rows < 0 || s.Cols > 1<<20 || s.Rows > 1<<20 || s.Cols*s.Rows > 1<<26:
		return fmt.Errorf("%d x %d pixels; at most 67 million are possible", s.Cols, s.Rows)
	case !(s.DX > 0 && s.DY > 0):
		return fmt.Errorf("steps of %g and %g um; both must be positive", s.DX, s.DY)
	case s.Order != "raster" && s.Order != "serpentine":
		return fmt.Errorf("order is %q; raster and serpentine are known", s.Order)
	case s.Fast != "x" && s.Fast != "y":
		return fmt.Errorf("fast is %q; x and y are known", s.Fast)
	case s.Corner != "lower-left" && s.Corner != "lower-right" && s.Corner != "upper-left" && s.Corner != "upper-right":
		return fmt.Errorf("corner is %q; lower-left, lower-right, upper-left and upper-right are known", s.Corner)
	case !(s.Jitter >= 0):
		return errors.New("jitter_um must not be negative")
	case !(s.Missing >= 0 && s.Missing < 1 && s.Repeated >= 0 && s.Repeated <= 1 && s.Cut >= 0 && s.Cut <= 1):
		return errors.New("missing, repeated and cut are fractions")
	}
	return nil
}

// order returns the cell (row times Cols plus column) of each pixel in order of acquisition.
func (s *Stage) order(seed uint64) []int32 {
	lines, length := s.Rows, s.Cols
	if s.Fast == "y" {
		lines, length = s.Cols, s.Rows
	}
	right := s.Corner == "lower-right" || s.Corner == "upper-right"
	upper := s.Corner == "upper-left" || s.Corner == "upper-right"
	r := rand.New(rand.NewPCG(seed, streamStage))
	cells := make([]int32, 0, lines*length)
	for line := range lines {
		for k := range length {
			if s.Order == "serpentine" && line%2 == 1 {
				k = length - 1 - k
			}
			col, row := k, line
			if s.Fast == "y" {
				col, row = line, k
			}
			if right {
				col = s.Cols - 1 - col
			}
			if upper {
				row = s.Rows - 1 - row
			}
			missing, repeated := r.Float64() < s.Missing, r.Float64() < s.Repeated
			if missing {
				continue
			}
			cells = append(cells, int32(row*s.Cols+col))
			if repeated {
				cells = append(cells, int32(row*s.Cols+col))
			}
		}
	}
	return cells
}

// onSample turns a stage position into the coordinates of the objects.
func (s *Stage) onSample(x, y float64) (float64, float64) {
	x, y = x-s.OffsetX, y-s.OffsetY
	if s.Rotation == 0 {
		return x, y
	}
	sin, cos := math.Sincos(s.Rotation * math.Pi / 180)
	return cos*x + sin*y, cos*y - sin*x
}

// Streams of random numbers that are not a pixel's: pixels are numbered from 0, these from the other end.
const (
	streamStage   = math.MaxUint64 - iota // order of acquisition
	streamObjects                         // and one less for each object
)
