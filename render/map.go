package render

import (
	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// leastWidth is the width of the narrowest figure, in ems of its body text, whose text has its own size; text of a narrower one
// shrinks with it.
const leastWidth = 21

// Map draws one quantity over the stage, x and y to one scale, row 0 at the bottom. Cells that were not measured are hatched,
// those without a value grey; the key names both.
func Map(s *survey.Survey, quantity string, opt Options) (*plot.Figure, error) {
	c, err := newCells(s, quantity, opt)
	if err != nil {
		return nil, err
	}
	st := plot.Light(opt.FontPt)
	width := max(opt.width(), leastWidth*st.Body)
	inner := width - 2*st.Margin
	p := newPanel(c, st, inner, 2.2*inner, "")
	f := &plot.Figure{W: width, Ground: st.Ground, DPI: opt.dpi(), Meta: c.meta("Map")}
	drawn := p.draw(inner, opt.Outlines)
	f.H = drawn.H + 2*st.Margin
	f.Place(drawn, plot.Point{X: st.Margin, Y: st.Margin})
	f.Scale(opt.width() / width)
	return f, nil
}
