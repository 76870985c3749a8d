// Package survey holds the result of a run, in memory and on disk: quantities on the grid, regions, and what was done to get
// them. It is what fit fills in, what render draws, and what later verbs open again; it knows nothing of how the numbers are
// made.
package survey

import (
	"encoding/json"
	"slices"

	"bandgrid/mapio/scan"
)

// A Quantity is one number per cell of the grid. Its name is the same in code, JSON, files, figures and text.
type Quantity struct {
	Name        string `json:"-"`
	Unit        string `json:"unit"` // "cm-1", "counts", "nm", ...; empty for a pure number
	Description string `json:"description"`
	// Of names, for a ratio, the quantities above and below the line: means over regions are ratios of their means.
	Of     []string  `json:"of,omitempty"`
	Values []float32 `json:"-"` // Rows x Cols, row 0 lowest y, column 0 lowest x; NaN where there is none
	SE     []float32 `json:"-"` // standard errors, likewise; nil where the quantity has none
}

// Pixels counts what became of a run's pixels.
type Pixels struct {
	Expected int `json:"expected"`                // cells of the grid
	Read     int `json:"read"`                    // pixels found in the run, readable or not
	Fitted   int `json:"fitted"`                  // cells with a converged fit
	Failed   int `json:"failed"`                  // pixels that could not be read or fitted
	Repeated int `json:"repeated"`                // pixels measured again later in the run: the last complete one counts
	Missing  int `json:"missing"`                 // cells without a pixel
	Holes    int `json:"channels_without_counts"` // in the windows: saturated, or the run has none; they were left out
	Holed    int `json:"pixels_with_such"`
	Excluded int `json:"excluded"` // pixels left out since they lie in an area that was excluded
}

// A RunFile says which file a survey was made from.
type RunFile struct {
	Name   string `json:"name"`   // without folder
	SHA256 string `json:"sha256"` // of the file's bytes as they lie on disk
	Bytes  int64  `json:"bytes"`
	Format string `json:"format"` // as recognised
}

// Info is survey.json but for the maps' arrays.
type Info struct {
	Program string          `json:"program"` // "bandgrid" and its version
	Runs    []RunFile       `json:"runs"`    // one, or two where a second run holds the other window
	Laser   float64         `json:"laser_nm"`
	Axis    AxisInfo        `json:"axis"`
	Grid    scan.Grid       `json:"grid"`
	Pixels  Pixels          `json:"pixels"`
	Recipe  json.RawMessage `json:"recipe"`            // as used, in full
	Learned []Learned       `json:"learned,omitempty"` // for each of the runs
	Drift   *Drift          `json:"drift,omitempty"`   // of the axis, where a line was followed
	// Calibration says in words what was corrected on axis and response; empty where nothing was.
	Calibration []string          `json:"calibration,omitempty"`
	Settings    map[string]any    `json:"settings"` // interpretation and display settings: spot, film, minimum area ...
	Notes       map[string]string `json:"notes,omitempty"`
	Warnings    []string          `json:"warnings"`
	Verdicts    []Verdict         `json:"verdicts,omitempty"` // on the limits that were given
	// FitWarnings is how many of them, the first, come from reading and fitting; the others are of the interpretation.
	FitWarnings int                 `json:"fit_warnings"`
	Complete    bool                `json:"complete"` // false where part of the input was unusable or the run was interrupted
	Quantities  map[string]Quantity `json:"quantities"`
}

// AxisInfo describes the shift axis.
type AxisInfo struct {
	Channels int     `json:"channels"`
	From     float64 `json:"from_cm-1"`
	To       float64 `json:"to_cm-1"`
}

// A Survey is the result of one run.
type Survey struct {
	Info
	X, Y    []float32  // stage position of each cell, um: as measured, or the cell's centre where the pixel is missing
	Maps    []Quantity // in the order in which reports list them
	Regions []Region   // the whole map first, then by falling area
	Spikes  []Spike    // channels left out because of cosmic rays, in order of acquisition; not read back
}

// Map returns the quantity of that name, or nil.
func (s *Survey) Map(name string) *Quantity {
	if i := slices.IndexFunc(s.Maps, func(q Quantity) bool { return q.Name == name }); i >= 0 {
		return &s.Maps[i]
	}
	return nil
}

// Drop removes quantities.
func (s *Survey) Drop(names ...string) {
	s.Maps = slices.DeleteFunc(s.Maps, func(q Quantity) bool { return slices.Contains(names, q.Name) })
}

// Put adds a quantity, or replaces the one of its name.
func (s *Survey) Put(q Quantity) {
	if old := s.Map(q.Name); old != nil {
		*old = q
		return
	}
	s.Maps = append(s.Maps, q)
}

// A Region is a connected area of one layer number, the whole map, or a named area.
type Region struct {
	ID        string  // "all" for the whole map, else "1", "2", ... or the given name
	Layer     float64 // layer number; NaN for the whole map and named areas
	Pixels    int
	Area      float64 // um2
	AreaSE    float64 // um2, from the boundary
	CX, CY    float64 // centroid, um
	MinX      float64 // bounding box, um, outer edges of the cells
	MinY      float64
	MaxX      float64
	MaxY      float64
	Perimeter float64 // um, along cell edges
	Inscribed float64 // radius of the largest inscribed circle, um
	Stats     []Stat  // one per quantity
	Cells     []int32 // indices into the maps, rising; not written to regions.csv
}

// A Spike is a channel that was left out because of a cosmic ray.
type Spike struct{ X, Y, Shift float32 } // um, um, cm-1

// A Stat summarises one quantity over a region, its boundary ring left out where the region is large enough.
type Stat struct {
	Quantity string
	N        int     // pixels with a value
	Median   float64 // NaN where N is 0, like all below
	Spread   float64 // robust: 1.4826 times the median absolute deviation
	Mean     float64 // of a ratio: the ratio of the means
	MeanSE   float64 // NaN where N is below 2
	P5, P95  float64 // 5th and 95th percentile
}
