package render

import (
	"math"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// A frame is the part of the stage that a map shows, um, and how its axes are named.
type frame struct {
	minX, minY, maxX, maxY float64
	titleX, titleY         string
	tickX, tickY           bool
	cell                   float64 // larger step of the grid, um
	lineX, lineY           bool    // one row, or one column: its thickness on paper means nothing
}

func (f frame) width() float64  { return f.maxX - f.minX }
func (f frame) height() float64 { return f.maxY - f.minY }

// place writes a stage position.
func place(um float64) string { return plot.Number(math.Round(um*1000)/1000, decimals(um)) }

// decimals are as many as a position in um needs, three at most.
func decimals(um float64) int {
	for n := range 3 {
		if p := um * math.Pow10(n); math.Abs(p-math.Round(p)) < 1e-3 {
			return n
		}
	}
	return 3
}

func newFrame(s *survey.Survey) frame {
	g := s.Grid
	f := frame{titleX: "x (µm)", titleY: "y (µm)", tickX: true, tickY: true, cell: max(g.DX, g.DY)}
	if g.Layout == scan.Points {
		f.aroundPoints(s)
		return f
	}
	f.minX, f.minY, f.maxX, f.maxY = g.Bounds()
	if !(f.maxX > f.minX) || !(f.maxY > f.minY) { // a grid without steps: cells of 1 um, so that there is something to see
		f.minX, f.minY, f.maxX, f.maxY, f.cell = g.X0-0.5, g.Y0-0.5, g.X0-0.5+float64(g.Cols), g.Y0-0.5+float64(g.Rows), 1
	}
	switch {
	case g.Rise != 0:
		step := math.Hypot(g.DX, g.Rise)
		f.minX, f.maxX = -step/2, (float64(g.Cols)-0.5)*step
		f.minY, f.maxY = -step/2, step/2
		f.titleX, f.tickY, f.lineX = "distance along the line (µm)", false, true
	case g.Rows == 1 && g.Cols > 1:
		f.titleX += " at y = " + place(g.Y0) + " µm"
		f.tickY, f.lineX = false, true
	case g.Cols == 1 && g.Rows > 1:
		f.titleX, f.tickX, f.lineY = "x = "+place(g.X0)+" µm", false, true
	}
	return f
}

// aroundPoints takes in all places with a margin of one typical distance.
func (f *frame) aroundPoints(s *survey.Survey) {
	f.minX, f.minY, f.maxX, f.maxY = math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	for i := range s.X {
		if x, y := float64(s.X[i]), float64(s.Y[i]); !math.IsNaN(x) && !math.IsNaN(y) {
			f.minX, f.maxX = min(f.minX, x), max(f.maxX, x)
			f.minY, f.maxY = min(f.minY, y), max(f.maxY, y)
		}
	}
	if f.minX > f.maxX {
		f.minX, f.minY, f.maxX, f.maxY = 0, 0, 0, 0
	}
	margin := max(f.cell, 0.04*max(f.width(), f.height()))
	if margin == 0 {
		margin = 1
	}
	f.minX, f.minY, f.maxX, f.maxY = f.minX-margin, f.minY-margin, f.maxX+margin, f.maxY+margin
}

// fit returns the box of the map at equal aspect in the room given, from its upper left corner. A line is drawn as a strip that
// can be seen; so is a map whose short side would be thinner than that.
func (f frame) fit(room plot.Box, st plot.Style) plot.Box {
	thin := 2.2 * st.Body // of a strip
	room.W, room.H = max(room.W, thin), max(room.H, thin)
	scale := min(room.W/f.width(), room.H/f.height())
	switch { // one coarse cell needs no whole page
	case f.lineX:
		scale = room.W / f.width()
	case f.lineY:
		scale = room.H / f.height()
	case f.cell > 0:
		scale = min(scale, 25/f.cell)
	}
	w, h := scale*f.width(), scale*f.height()
	if f.lineX {
		h = thin
	} else if f.lineY {
		w = thin
	}
	return plot.Box{X: room.X, Y: room.Y, W: min(room.W, max(w, min(thin, 0.4*h+thin/3))), H: min(room.H, max(h, min(thin, 0.4*w+thin/3)))}
}
