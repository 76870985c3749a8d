package render

import (
	"fmt"
	"strings"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// A slide is 16 to 9 and ten inches wide.
const (
	slideWidth  = 254.0
	slideHeight = slideWidth * 9 / 16
)

// StandardQuantities are those that a survey is looked at by first.
var StandardQuantities = []string{"layer_number", "d_g_ratio", "g_position", "2d_width"}

// FurtherQuantities follow them in a report, but are not on the overview.
var FurtherQuantities = []string{"strain", "hole_density"}

// Overview draws a sheet of maps with letters under a line that says what was measured; a slide of 254 mm by default. Quantities
// that the survey lacks are left out.
func Overview(s *survey.Survey, quantities []string, opt Options) (*plot.Figure, error) {
	var list []*cells
	for _, name := range quantities {
		if s.Map(name) == nil {
			continue
		}
		panelOpt := opt
		panelOpt.Range = [2]float64{} // one range cannot hold for different quantities
		c, err := newCells(s, name, panelOpt)
		if err != nil {
			return nil, err
		}
		list = append(list, c)
	}
	if len(list) == 0 {
		return nil, fmt.Errorf("the survey has none of the quantities %s", strings.Join(quantities, ", "))
	}
	st := plot.Light(opt.FontPt)
	sheet := &plot.Figure{W: slideWidth, H: slideHeight, Ground: st.Ground, DPI: opt.dpi(),
		Meta: append([][2]string{{"Software", s.Program}, {"Title", "Overview"}, {"Quantity", strings.Join(quantities, " ")}}, runMeta(s)...)}
	top := header(sheet, s, st)
	best := arrange(list, st, sheet.W-2*st.Margin, sheet.H-top-st.Margin)
	for i, p := range best.panels {
		at := plot.Point{X: st.Margin + float64(i%best.cols)*(best.w+2*st.Margin), Y: top + float64(i/best.cols)*(best.h+st.Margin)}
		sheet.Place(p.draw(best.w, opt.Outlines), at)
	}
	if opt.WidthMM > 0 {
		sheet.Scale(opt.WidthMM / slideWidth)
	}
	return sheet, nil
}

// header writes the run, the laser line and the grid, and returns where the panels begin.
func header(f *plot.Figure, s *survey.Survey, st plot.Style) (top float64) {
	var runs []string
	for _, r := range s.Runs {
		runs = append(runs, r.Name)
	}
	room := f.W - 2*st.Margin
	baseline := st.Margin
	for _, line := range plot.Wrap(strings.Join(runs, " with "), 1.2*st.Title, room, true) {
		baseline += 1.2 * st.Title
		f.Text(plot.Text{At: plot.Point{X: st.Margin, Y: baseline}, String: line, Size: 1.2 * st.Title, Bold: true, Color: st.Ink})
	}
	baseline += 0.2 * st.Title
	for _, line := range plot.Wrap(Measured(s), st.Body, room, false) {
		baseline += 1.25 * st.Body
		f.Text(plot.Text{At: plot.Point{X: st.Margin, Y: baseline}, String: line, Size: st.Body, Color: st.Soft})
	}
	baseline += 0.6 * st.Body
	f.Line(st.Soft, st.Stroke, plot.Point{X: st.Margin, Y: baseline}, plot.Point{X: f.W - st.Margin, Y: baseline})
	return baseline + 0.9*st.Body
}

// Measured says in a line what was measured: laser line, grid and step.
func Measured(s *survey.Survey) string {
	var parts []string
	if s.Laser > 0 {
		parts = append(parts, fmt.Sprintf("%.6g nm", s.Laser))
	}
	switch g := s.Grid; {
	case g.Layout == scan.Points:
		parts = append(parts, fmt.Sprintf("%d scattered points", g.Cells()))
	case g.Layout == scan.Line:
		parts = append(parts, fmt.Sprintf("line of %d points, step %.4g µm", g.Cells(), lineStep(g)))
	case g.DX == g.DY:
		parts = append(parts, fmt.Sprintf("%d × %d pixels, step %.4g µm", g.Cols, g.Rows, g.DX))
	default:
		parts = append(parts, fmt.Sprintf("%d × %d pixels, steps %.4g and %.4g µm", g.Cols, g.Rows, g.DX, g.DY))
	}
	if s.Axis.Channels > 0 {
		parts = append(parts, fmt.Sprintf("%d channels from %.0f to %.0f cm⁻¹", s.Axis.Channels, s.Axis.From, s.Axis.To))
	}
	return strings.Join(parts, ", ")
}

func lineStep(g scan.Grid) float64 {
	if g.Cols > 1 && g.Rise == 0 {
		return g.DX
	}
	return g.DY
}

// An arrangement is panels in cols columns, each w by h mm.
type arrangement struct {
	panels []*panel
	cols   int
	w, h   float64
	area   float64 // of all maps on paper, mm2
}

// arrange chooses the number of columns with which the maps come out largest.
func arrange(list []*cells, st plot.Style, w, h float64) arrangement {
	var best arrangement
	for cols := 1; cols <= len(list); cols++ {
		rows := (len(list) + cols - 1) / cols
		a := arrangement{cols: cols, w: (w - float64(cols-1)*2*st.Margin) / float64(cols), h: (h - float64(rows-1)*st.Margin) / float64(rows)}
		over := false
		for i, c := range list {
			letter := ""
			if len(list) > 1 {
				letter = string(rune('a' + i))
			}
			p := newPanel(c, st, a.w, a.h, letter)
			a.panels = append(a.panels, p)
			a.area += p.box.W * p.box.H
			over = over || p.height(a.w) > a.h+0.01 || p.width > a.w+0.01
		}
		if over {
			a.area *= 1e-3 // only if nothing else is left
		}
		if a.area > best.area {
			best = a
		}
	}
	return best
}
