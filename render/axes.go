package render

import (
	"math"

	"bandgrid/render/plot"
)

func (p *panel) drawAxes(f *plot.Figure) {
	st, b := p.st, p.box
	base := b.Y + b.H
	if p.frame.tickX {
		for i, v := range p.x.At {
			x := p.place(v, 0).X
			f.Line(st.Ink, st.Stroke, plot.Point{X: x, Y: base}, plot.Point{X: x, Y: base + st.Tick})
			f.Text(plot.Text{At: plot.Point{X: x, Y: base + st.Tick + 0.95*st.Small}, String: p.x.Label[i], Size: st.Small, Align: plot.Middle, Color: st.Ink})
		}
		base += st.Tick + 1.15*st.Small
	}
	if p.frame.tickY {
		for i, v := range p.y.At {
			y := p.place(0, v).Y
			f.Line(st.Ink, st.Stroke, plot.Point{X: b.X - st.Tick, Y: y}, plot.Point{X: b.X, Y: y})
			f.Text(plot.Text{At: plot.Point{X: b.X - st.Tick - 0.3*st.Small, Y: y + 0.36*st.Small}, String: p.y.Label[i], Size: st.Small, Align: plot.Right, Color: st.Ink})
		}
		f.Text(plot.Text{At: plot.Point{X: b.X - st.Tick - 0.3*st.Small - p.widest(p.y) - 0.35*st.Body, Y: b.Y + b.H/2}, String: p.y.Axis("y", "um"), Size: st.Body,
			Align: plot.Middle, Upward: true, Color: st.Ink})
	}
	p.drawScale(f, base)
}

// drawScale draws the title of the x axis and the scale bar: at the right end of the same row, or on the next one.
func (p *panel) drawScale(f *plot.Figure, base float64) {
	st, b := p.st, p.box
	title := p.titleX()
	tw, sw := plot.TextWidth(title, st.Body, false), p.scaleWidth()
	baseline := base + 1.1*st.Body
	text := plot.Text{At: plot.Point{X: b.X + b.W/2, Y: baseline}, String: title, Size: st.Body, Align: plot.Middle, Color: st.Ink}
	barX := b.X + b.W - sw
	switch {
	case p.scaleRow():
		text.At.X, text.Align = b.X, plot.Left
		if tw <= b.W {
			text.At.X, text.Align = b.X+b.W/2, plot.Middle
		}
		barX = b.X
		baseline += 1.5 * st.Body
	case b.W/2+tw/2+st.Body > b.W-sw:
		text.At.X, text.Align = b.X, plot.Left
	}
	f.Text(text)
	length := p.scaleLength() / p.frame.width() * b.W
	if p.frame.lineY { // the only length on paper that is to scale is the column's
		return
	}
	thick := 0.22 * st.Body
	f.Rect(plot.Box{X: barX, Y: baseline - 0.36*st.Body - thick/2, W: length, H: thick}, st.Ink)
	f.Text(plot.Text{At: plot.Point{X: barX + length + 0.4*st.Body, Y: baseline}, String: p.scaleLabel(), Size: st.Body, Color: st.Ink})
}

// keyWidth is that of the widest entry of the key.
func (p *panel) keyWidth() float64 {
	name, amount := p.keyColumns()
	if len(p.keys) == 0 {
		return 0
	}
	return 1.9*p.st.Body + name + p.st.Body + amount
}

func (p *panel) keyColumns() (name, amount float64) {
	for _, k := range p.keys {
		name = max(name, plot.TextWidth(k.name, p.st.Body, false))
		amount = max(amount, plot.TextWidth(k.amount, p.st.Body, false))
	}
	return name, amount
}

func (p *panel) drawSwatch(f *plot.Figure, k key, x, baseline float64) {
	box := plot.Box{X: x, Y: baseline - 0.86*p.st.Body, W: 1.35 * p.st.Body, H: p.st.Body}
	if k.hatched {
		f.Add(p.hatch(box))
	} else {
		f.Rect(box, k.fill)
	}
	f.Frame(box, p.st.Ink, 0.6*p.st.Stroke)
}

// drawBeside draws colour bar and key right of the map.
func (p *panel) drawBeside(f *plot.Figure) {
	st := p.st
	x, y := p.box.X+p.box.W+2*st.Gap, p.box.Y
	if len(p.ticks.At) > 0 {
		bar := plot.Box{X: x, Y: y, W: st.Bar, H: p.box.H - float64(len(p.keys))*1.55*st.Body}
		if len(p.keys) > 0 {
			bar.H -= 0.3 * st.Body
		}
		p.drawBar(f, bar, true)
		y += bar.H + 0.3*st.Body
	}
	name, amount := p.keyColumns()
	for i, k := range p.keys {
		baseline := y + (float64(i)*1.55+1.15)*st.Body
		p.drawSwatch(f, k, x, baseline)
		f.Text(plot.Text{At: plot.Point{X: x + 1.9*st.Body, Y: baseline}, String: k.name, Size: st.Body, Color: st.Ink})
		f.Text(plot.Text{At: plot.Point{X: x + 2.9*st.Body + name + amount, Y: baseline}, String: k.amount, Size: st.Body, Align: plot.Right, Color: st.Soft})
	}
}

// barLength is that of a colour bar below the map.
func (p *panel) barLength(room float64) float64 {
	if len(p.ticks.At) == 0 {
		return 0
	}
	return min(room-p.widest(p.ticks), max(p.box.W, 24*p.st.Body))
}

func (p *panel) belowHeight(room float64) float64 {
	h := 0.0
	if len(p.ticks.At) > 0 {
		h += 0.8*p.st.Body + 0.8*p.st.Bar + p.st.Tick + 1.3*p.st.Small
	}
	if len(p.keys) > 0 {
		h += 0.5*p.st.Body + float64(len(p.flow(room)))*1.55*p.st.Body
	}
	return h
}

// entryWidth is that of an entry in a row of entries.
func (p *panel) entryWidth(k key) float64 {
	return 1.9*p.st.Body + plot.TextWidth(k.name+", "+k.amount, p.st.Body, false) + 1.6*p.st.Body
}

// flow breaks the entries of the key into rows.
func (p *panel) flow(room float64) [][]key {
	var rows [][]key
	used := math.Inf(1)
	for _, k := range p.keys {
		w := p.entryWidth(k)
		if used+w-1.6*p.st.Body > room {
			rows = append(rows, nil)
			used = 0
		}
		rows[len(rows)-1] = append(rows[len(rows)-1], k)
		used += w
	}
	return rows
}

func (p *panel) flowWidth(room float64) float64 {
	widest := 0.0
	for _, row := range p.flow(room) {
		w := 0.0
		for _, k := range row {
			w += p.entryWidth(k)
		}
		widest = max(widest, w)
	}
	return max(0, widest-1.6*p.st.Body)
}

// drawBelow draws colour bar and key under the map.
func (p *panel) drawBelow(f *plot.Figure, w float64) {
	st := p.st
	y := p.box.Y + p.box.H + p.axisHeight()
	if len(p.ticks.At) > 0 {
		p.drawBar(f, plot.Box{X: p.box.X, Y: y + 0.8*st.Body, W: p.barLength(w - p.box.X), H: 0.8 * st.Bar}, false)
		y += 0.8*st.Body + 0.8*st.Bar + st.Tick + 1.3*st.Small
	}
	y += 0.5 * st.Body
	for i, row := range p.flow(w - p.box.X) {
		x := p.box.X
		for _, k := range row {
			baseline := y + (float64(i)*1.55+1.1)*st.Body
			p.drawSwatch(f, k, x, baseline)
			f.Text(plot.Text{At: plot.Point{X: x + 1.9*st.Body, Y: baseline}, String: k.name + ", " + k.amount, Size: st.Body, Color: st.Ink})
			x += p.entryWidth(k)
		}
	}
}

// drawBar draws the colour bar. An end beyond which values lie is a point, the usual sign for it.
func (p *panel) drawBar(f *plot.Figure, b plot.Box, upright bool) {
	st := p.st
	colors := &plot.Raster{Box: b}
	point := 0.75 * min(b.W, b.H)
	low, high := b.Y+b.H, b.Y // the ends of the straight part: along y, or along x
	if !upright {
		low, high = b.X, b.X+b.W
	}
	sign := 1.0
	if upright {
		sign = -1
	}
	if p.below > 0 {
		low += sign * point
	}
	if p.above > 0 {
		high -= sign * point
	}
	for i := range 256 {
		colors.Cells = append(colors.Cells, p.ramp.At(float64(i)/255))
	}
	at := func(along, across float64) plot.Point { // across: 0 to 1
		if upright {
			return plot.Point{X: b.X + across*b.W, Y: along}
		}
		return plot.Point{X: along, Y: b.Y + across*b.H}
	}
	if upright {
		colors.Cols, colors.Rows = 1, 256
		colors.Box = plot.Box{X: b.X, Y: high, W: b.W, H: low - high}
	} else {
		colors.Cols, colors.Rows = 256, 1
		colors.Box = plot.Box{X: low, Y: b.Y, W: high - low, H: b.H}
	}
	f.Add(colors)
	ring := []plot.Point{at(low, 0)}
	if p.below > 0 {
		tip := at(low-sign*point, 0.5)
		f.Add(&plot.Path{Rings: [][]plot.Point{{at(low, 0), tip, at(low, 1)}}, Closed: true, Fill: p.ramp.At(0)})
		ring = append(ring, tip)
	}
	ring = append(ring, at(low, 1), at(high, 1))
	if p.above > 0 {
		tip := at(high+sign*point, 0.5)
		f.Add(&plot.Path{Rings: [][]plot.Point{{at(high, 0), tip, at(high, 1)}}, Closed: true, Fill: p.ramp.At(1)})
		ring = append(ring, tip)
	}
	ring = append(ring, at(high, 0))
	f.Add(&plot.Path{Rings: [][]plot.Point{ring}, Closed: true, Stroke: st.Ink, Width: 0.7 * st.Stroke})
	ticks := p.barTicks(math.Abs(high-low), upright)
	for i, v := range ticks.At {
		along := low + (v-p.low)/(p.high-p.low)*(high-low)
		tick, label := at(along, 1), ticks.Label[i]
		if upright {
			f.Line(st.Ink, st.Stroke, tick, plot.Point{X: tick.X + st.Tick, Y: tick.Y})
			f.Text(plot.Text{At: plot.Point{X: tick.X + st.Tick + 0.3*st.Small, Y: tick.Y + 0.36*st.Small}, String: label, Size: st.Small, Color: st.Ink})
		} else {
			f.Line(st.Ink, st.Stroke, tick, plot.Point{X: tick.X, Y: tick.Y + st.Tick})
			f.Text(plot.Text{At: plot.Point{X: tick.X, Y: tick.Y + st.Tick + 0.95*st.Small}, String: label, Size: st.Small, Align: plot.Middle, Color: st.Ink})
		}
	}
}

// barTicks are as many ticks as a bar of that length holds, with the exponent that the title names.
func (p *panel) barTicks(length float64, upright bool) plot.Ticks {
	for n := 6; n > 1; n-- {
		t := plot.MakeTicks(p.low, p.high, n)
		if len(t.At) < 2 {
			return t
		}
		room := (t.At[1] - t.At[0]) / (p.high - p.low) * length
		if upright && room >= 1.7*p.st.Small || !upright && room >= p.widest(t)+0.8*p.st.Small {
			return t
		}
	}
	return plot.MakeTicks(p.low, p.high, 1)
}
