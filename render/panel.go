package render

import (
	"image/color"
	"math"

	"bandgrid/mapio/scan"
	"bandgrid/render/palette"
	"bandgrid/render/plot"
)

// A panel is a map with its title, axes, scale bar and key, laid out in a given space.
type panel struct {
	*cells
	st    plot.Style
	frame frame
	title string
	ticks plot.Ticks // of the colour bar
	keys  []key

	// The layout, mm from the panel's upper left corner.
	lines   []string // of the title
	x, y    plot.Ticks
	box     plot.Box // the map itself
	stacked bool     // colour bar and key stand below the map, not beside it
	width   float64  // used
	letter  string   // of a panel in a sheet; empty for a figure of its own
}

// newPanel lays the map out in w by h mm. Of the two places for the key it takes the one that leaves the map larger.
func newPanel(c *cells, st plot.Style, w, h float64, letter string) *panel {
	beside := layPanel(c, st, w, h, letter, false)
	below := layPanel(c, st, w, h, letter, true)
	if area := beside.box.W * beside.box.H; beside.fits(h) && area >= below.box.W*below.box.H {
		return beside
	}
	return below
}

func layPanel(c *cells, st plot.Style, w, h float64, letter string, below bool) *panel {
	p := &panel{cells: c, st: st, frame: newFrame(c.s), keys: c.keys(), stacked: below, letter: letter}
	if !discrete(c.q.Name) && c.count[valued] > 0 {
		p.ticks = plot.MakeTicks(c.low, c.high, 6)
	}
	p.title = p.ticks.Axis(c.title, c.q.Unit)
	p.box = plot.Box{W: w * 0.6, H: h * 0.6}
	for range 3 { // tick labels depend on the map's size, and the other way round
		left := p.layTicks()
		right := 0.5*p.lastWidth() + 0.2*st.Small
		if !below {
			right = max(right, 2*st.Gap+p.sideWidth())
		}
		top := p.layTitle(w)
		bottom := p.axisHeight()
		if below {
			bottom += p.belowHeight(w - left)
		}
		p.box = p.frame.fit(plot.Box{X: left, Y: top, W: w - left - right, H: min(h-top-bottom, 1.15*w)}, st) // a page is hardly higher than wide
		p.width = left + p.box.W + right
		if below {
			p.width = max(p.width, left+p.barLength(w-left), left+p.flowWidth(w-left))
		}
	}
	p.layTicks()
	return p
}

// layTicks chooses the ticks of both axes and returns the room they need left of the map.
func (p *panel) layTicks() (left float64) {
	p.x, p.y = plot.Ticks{}, plot.Ticks{}
	if p.frame.tickX {
		for n := max(1, min(8, int(p.box.W/(2.5*p.st.Small)))); n >= 1; n-- { // as many as stand clear of each other
			p.x = plot.MakeTicks(p.frame.minX, p.frame.maxX, n)
			if len(p.x.At) < 2 || p.widest(p.x)+0.8*p.st.Small <= (p.x.At[1]-p.x.At[0])/p.frame.width()*p.box.W {
				break
			}
		}
	}
	if p.frame.tickY {
		p.y = plot.MakeTicks(p.frame.minY, p.frame.maxY, max(1, min(8, int(p.box.H/(2.2*p.st.Small)))))
	}
	left = 0.2 * p.st.Small
	if p.frame.tickY {
		left = 1.2*p.st.Body + p.widest(p.y) + p.st.Tick + p.st.Gap
	}
	return max(left, 0.5*p.widest(p.x)+0.2*p.st.Small)
}

func (p *panel) widest(t plot.Ticks) float64 {
	w := 0.0
	for _, label := range t.Label {
		w = max(w, plot.TextWidth(label, p.st.Small, false))
	}
	return w
}

func (p *panel) lastWidth() float64 {
	if n := len(p.x.Label); n > 0 {
		return plot.TextWidth(p.x.Label[n-1], p.st.Small, false)
	}
	return 0
}

func (p *panel) layTitle(w float64) (height float64) {
	indent := 0.0
	if p.letter != "" {
		indent = 1.2 * p.st.Title
	}
	p.lines = plot.Wrap(p.title, p.st.Title, w-indent, true)
	overhang := 0.0 // of the y axis title over a flat map
	if p.frame.tickY {
		overhang = max(0, (plot.TextWidth(p.y.Axis("y", "um"), p.st.Body, false)-p.box.H)/2)
	}
	return float64(len(p.lines))*1.25*p.st.Title + 0.45*p.st.Body + overhang
}

// sideWidth is that of the colour bar with its labels, or of the key, beside the map.
func (p *panel) sideWidth() float64 {
	w := p.keyWidth()
	if len(p.ticks.At) > 0 {
		w = max(w, p.st.Bar+p.st.Tick+0.3*p.st.Small+p.widest(p.ticks))
	}
	return w
}

// fits tells whether what stands beside the map has the height that it needs.
func (p *panel) fits(h float64) bool {
	need := float64(len(p.keys)) * 1.55 * p.st.Body
	if len(p.ticks.At) > 0 {
		need += 7 * p.st.Body
	}
	return p.box.H >= need || discrete(p.q.Name) && p.box.Y+need <= h && need <= 2*p.box.H
}

// axisHeight is the room below the map: ticks, labels, axis title, and the scale bar where it needs a row of its own.
func (p *panel) axisHeight() float64 {
	h := 1.5 * p.st.Body
	if p.frame.tickX {
		h += p.st.Tick + 1.15*p.st.Small
	}
	if p.scaleRow() {
		h += 1.5 * p.st.Body
	}
	return h
}

// titleX is the title of the x axis; where the map's short side is drawn wider than to scale it says so.
func (p *panel) titleX() string {
	title := p.frame.titleX
	if p.x.Exp != 0 && !p.frame.lineX {
		title = p.x.Axis("x", "um")
	}
	if p.frame.lineX || p.frame.lineY {
		return title
	}
	switch stretch := p.box.H / p.frame.height() * p.frame.width() / p.box.W; {
	case stretch > 1.05:
		title += ", y stretched " + Significant(stretch, 2) + "×"
	case stretch < 0.95:
		title += ", stretched " + Significant(1/stretch, 2) + "×"
	}
	return title
}

// scaleLength returns the length of the scale bar, um, about a quarter of the map.
func (p *panel) scaleLength() float64 {
	length := plot.Step(p.frame.width() / 5)
	if length > p.frame.width()*0.6 {
		length = plot.Step(p.frame.width() / 11)
	}
	return length
}

func (p *panel) scaleLabel() string {
	length := p.scaleLength()
	switch {
	case length >= 1000:
		return plot.Number(length/1000, 0) + " mm"
	case length < 1:
		return Significant(length*1000, 1) + " nm"
	}
	return plot.Number(length, 0) + " µm"
}

func (p *panel) scaleWidth() float64 {
	return p.scaleLength()/p.frame.width()*p.box.W + 0.4*p.st.Body + plot.TextWidth(p.scaleLabel(), p.st.Body, false)
}

// scaleRow tells whether the scale bar does not fit beside the axis title.
func (p *panel) scaleRow() bool {
	return plot.TextWidth(p.titleX(), p.st.Body, false)+p.scaleWidth()+1.5*p.st.Body > p.box.W
}

// height of the panel as laid out.
func (p *panel) height(w float64) float64 {
	h := p.box.Y + p.box.H + p.axisHeight()
	if p.stacked {
		return h + p.belowHeight(w-p.box.X)
	}
	return max(h, p.box.Y+float64(len(p.keys))*1.55*p.st.Body+0.3*p.st.Body)
}

// draw puts the panel into a figure of its own, w mm wide.
func (p *panel) draw(w float64, outlines bool) *plot.Figure {
	f := &plot.Figure{W: w, H: p.height(w), Ground: p.st.Ground}
	indent := 0.0
	if p.letter != "" {
		f.Text(plot.Text{At: plot.Point{X: 0, Y: p.st.Title}, String: p.letter, Size: p.st.Title, Bold: true, Color: p.st.Ink})
		indent = 1.2 * p.st.Title
	}
	for i, line := range p.lines {
		f.Text(plot.Text{At: plot.Point{X: indent, Y: (float64(i)*1.25 + 1) * p.st.Title}, String: line, Size: p.st.Title, Bold: true, Color: p.st.Ink})
	}
	p.drawCells(f, outlines)
	p.drawAxes(f)
	if p.stacked {
		p.drawBelow(f, w)
	} else {
		p.drawBeside(f)
	}
	return f
}

func (p *panel) drawCells(f *plot.Figure, outlines bool) {
	if p.s.Grid.Layout == scan.Points {
		p.drawPoints(f)
		f.Frame(p.box, p.st.Ink, p.st.Stroke)
		return
	}
	if p.count[missing] > 0 {
		f.Add(p.hatch(p.box))
	}
	f.Add(&plot.Raster{Box: p.box, Cols: p.s.Grid.Cols, Rows: p.s.Grid.Rows, Cells: p.colors(), Mix: !discrete(p.q.Name)})
	if outlines {
		for _, r := range p.s.Regions {
			if r.ID != "all" && len(r.Cells) > 0 {
				f.Add(&plot.Path{Rings: outline(r, p.s.Grid, p.box), Stroke: p.st.Ink, Width: p.st.Stroke})
			}
		}
	}
	f.Frame(p.box, p.st.Ink, p.st.Stroke)
}

// hatch marks cells that were not measured; its lines are so close that each cell shows some.
func (p *panel) hatch(box plot.Box) *plot.Hatch {
	cell := min(p.box.W/float64(p.s.Grid.Cols), p.box.H/float64(p.s.Grid.Rows))
	spacing := min(0.42*p.st.Body, max(0.2*p.st.Body, 0.5*cell))
	return &plot.Hatch{Box: box, Ground: palette.Missing, Line: palette.MissingLine, Spacing: spacing, Width: 0.07 * p.st.Body}
}

// drawPoints draws a disc at each place; one without a value is grey, one that was not measured an empty ring.
func (p *panel) drawPoints(f *plot.Figure) {
	edge := 0.6 * p.st.Stroke
	ink := p.st.Ink
	if len(p.state) > 5000 { // edges would hide what they surround
		ink = color.NRGBA{}
	}
	radius := min(2.2, max(0.45, 0.42*p.s.Grid.DX/p.frame.width()*p.box.W))
	for i := range p.state {
		x, y := float64(p.s.X[i]), float64(p.s.Y[i])
		if math.IsNaN(x) || math.IsNaN(y) {
			continue
		}
		disc := &plot.Path{Rings: [][]plot.Point{plot.Circle(p.place(x, y), radius)}, Closed: true,
			Fill: p.color(i), Stroke: ink, Width: edge}
		if p.state[i] == missing {
			disc.Fill, disc.Stroke = palette.Missing, palette.MissingLine
		}
		f.Add(disc)
	}
}

// place returns where a stage position, um, lies in the panel.
func (p *panel) place(x, y float64) plot.Point {
	return plot.Point{
		X: p.box.X + (x-p.frame.minX)/p.frame.width()*p.box.W,
		Y: p.box.Y + (p.frame.maxY-y)/p.frame.height()*p.box.H,
	}
}
