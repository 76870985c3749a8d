package plot

import (
	"image"
	"image/color"
	"image/draw"
	"math"

	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/vector"
)

// A canvas draws items to pixels.
type canvas struct {
	img *image.RGBA
	dpm float64 // pixels per mm
	z   *vector.Rasterizer
}

// Image draws the figure.
func (f *Figure) Image() *image.RGBA {
	dpm := f.dpi() / 25.4
	w, h := max(1, int(math.Round(f.W*dpm))), max(1, int(math.Round(f.H*dpm)))
	c := &canvas{img: image.NewRGBA(image.Rect(0, 0, w, h)), dpm: dpm, z: vector.NewRasterizer(w, h)}
	draw.Draw(c.img, c.img.Bounds(), image.NewUniform(f.Ground), image.Point{}, draw.Src)
	for _, item := range f.Items {
		switch item := item.(type) {
		case *Path:
			c.path(item)
		case *Text:
			c.text(item)
		case *Raster:
			c.raster(item)
		case *Hatch:
			c.hatch(item)
		}
	}
	return c.img
}

func (f *Figure) dpi() float64 {
	if f.DPI == 0 {
		return 150
	}
	return f.DPI
}

// outline collects contours in pixels and fills them at once.
type outline struct {
	ops                    []segment
	minX, minY, maxX, maxY float64
}

func newOutline() *outline {
	return &outline{minX: math.Inf(1), minY: math.Inf(1), maxX: math.Inf(-1), maxY: math.Inf(-1)}
}

func (o *outline) add(op sfnt.SegmentOp, n int, args [3]Point) {
	for _, p := range args[:n] {
		o.minX, o.maxX = min(o.minX, p.X), max(o.maxX, p.X)
		o.minY, o.maxY = min(o.minY, p.Y), max(o.maxY, p.Y)
	}
	o.ops = append(o.ops, segment{op, args})
}

func (o *outline) polygon(points ...Point) {
	for i, p := range points {
		op := sfnt.SegmentOpLineTo
		if i == 0 {
			op = sfnt.SegmentOpMoveTo
		}
		o.add(op, 1, [3]Point{p})
	}
}

// rect adds a rectangle given by two corners, turning the same way whatever their order.
func (o *outline) rect(x0, y0, x1, y1 float64) {
	x0, x1, y0, y1 = min(x0, x1), max(x0, x1), min(y0, y1), max(y0, y1)
	o.polygon(Point{x0, y0}, Point{x1, y0}, Point{x1, y1}, Point{x0, y1})
}

func (c *canvas) fill(o *outline, ink color.NRGBA) {
	if len(o.ops) == 0 || ink.A == 0 {
		return
	}
	area := image.Rect(int(math.Floor(max(o.minX, -1))), int(math.Floor(max(o.minY, -1))),
		int(math.Ceil(min(o.maxX, 1e5)))+1, int(math.Ceil(min(o.maxY, 1e5)))+1).Intersect(c.img.Bounds())
	if area.Empty() {
		return
	}
	c.z.Reset(area.Dx(), area.Dy())
	at := func(p Point) (x, y float32) {
		return float32(p.X - float64(area.Min.X)), float32(p.Y - float64(area.Min.Y))
	}
	for i, s := range o.ops {
		ax, ay := at(s.args[0])
		switch s.op {
		case sfnt.SegmentOpMoveTo:
			if i > 0 {
				c.z.ClosePath()
			}
			c.z.MoveTo(ax, ay)
		case sfnt.SegmentOpLineTo:
			c.z.LineTo(ax, ay)
		case sfnt.SegmentOpQuadTo:
			bx, by := at(s.args[1])
			c.z.QuadTo(ax, ay, bx, by)
		case sfnt.SegmentOpCubeTo:
			bx, by := at(s.args[1])
			cx, cy := at(s.args[2])
			c.z.CubeTo(ax, ay, bx, by, cx, cy)
		}
	}
	c.z.ClosePath()
	c.z.Draw(c.img, area, image.NewUniform(ink), image.Point{})
}

// pixel returns a place in pixels.
func (c *canvas) pixel(p Point) Point { return Point{p.X * c.dpm, p.Y * c.dpm} }

func (c *canvas) path(p *Path) {
	if p.Fill.A != 0 {
		o := newOutline()
		for _, ring := range p.Rings {
			if isRect(ring) { // its edges lie on those of pixels, as those of rasters do
				a, b := c.pixel(ring[0]), c.pixel(ring[2])
				o.rect(math.Round(a.X), math.Round(a.Y), math.Round(b.X), math.Round(b.Y))
				continue
			}
			points := make([]Point, len(ring))
			for i, q := range ring {
				points[i] = c.pixel(q)
			}
			o.polygon(points...)
		}
		c.fill(o, p.Fill)
	}
	if p.Stroke.A != 0 {
		o := newOutline()
		for _, ring := range p.Rings {
			for i := 1; i < len(ring); i++ {
				c.stroke(o, ring[i-1], ring[i], p.Width)
			}
			if n := len(ring); p.Closed && n > 2 {
				c.stroke(o, ring[n-1], ring[0], p.Width)
			}
		}
		c.fill(o, p.Stroke)
	}
}

func isRect(ring []Point) bool {
	return len(ring) == 4 && (ring[0].Y == ring[1].Y && ring[1].X == ring[2].X && ring[2].Y == ring[3].Y && ring[3].X == ring[0].X ||
		ring[0].X == ring[1].X && ring[1].Y == ring[2].Y && ring[2].X == ring[3].X && ring[3].Y == ring[0].Y)
}

// stroke adds one piece of a line. Upright and level pieces lie on whole pixels, so that frames and ticks are sharp.
func (c *canvas) stroke(o *outline, from, to Point, width float64) {
	a, b := c.pixel(from), c.pixel(to)
	w := max(1, width*c.dpm)
	if from.X == to.X || from.Y == to.Y {
		w = math.Round(w)
		left := math.Floor(w / 2)
		ax, ay := math.Round(a.X)-left, math.Round(a.Y)-left
		bx, by := math.Round(b.X)-left, math.Round(b.Y)-left
		o.rect(min(ax, bx), min(ay, by), max(ax, bx)+w, max(ay, by)+w)
		return
	}
	dx, dy := b.X-a.X, b.Y-a.Y
	long := math.Hypot(dx, dy)
	nx, ny := -dy/long*w/2, dx/long*w/2
	o.polygon(Point{a.X - nx, a.Y - ny}, Point{b.X - nx, b.Y - ny}, Point{b.X + nx, b.Y + ny}, Point{a.X + nx, a.Y + ny})
	if w > 1.5 {
		o.polygon(Circle(b, w/2)...)
	}
}

func (c *canvas) text(t *Text) {
	o := newOutline()
	line, width := faceOf(t.Bold).set(t.String)
	size := t.Size * c.dpm
	origin := c.pixel(t.At)
	start := -width * float64(t.Align) / 2
	for _, g := range line {
		for _, s := range g.segments {
			n := 1
			switch s.op {
			case sfnt.SegmentOpQuadTo:
				n = 2
			case sfnt.SegmentOpCubeTo:
				n = 3
			}
			var args [3]Point
			for i := range n {
				x, y := (start+g.x+g.scale*s.args[i].X)*size, (g.y+g.scale*s.args[i].Y)*size
				if t.Upward {
					args[i] = Point{origin.X - y, origin.Y - x}
				} else {
					args[i] = Point{origin.X + x, origin.Y - y}
				}
			}
			o.add(s.op, n, args)
		}
	}
	c.fill(o, t.Color)
}

func (c *canvas) hatch(h *Hatch) {
	a, b := c.pixel(Point{h.Box.X, h.Box.Y}), c.pixel(Point{h.Box.X + h.Box.W, h.Box.Y + h.Box.H})
	area := image.Rect(int(math.Round(a.X)), int(math.Round(a.Y)), int(math.Round(b.X)), int(math.Round(b.Y))).Intersect(c.img.Bounds())
	// Distance from a line is along x+y: each pixel's cover is that of a line of the width, softened over one pixel.
	spacing, width := h.Spacing*c.dpm*math.Sqrt2, max(1, h.Width*c.dpm)*math.Sqrt2
	for y := area.Min.Y; y < area.Max.Y; y++ {
		for x := area.Min.X; x < area.Max.X; x++ {
			along := math.Mod(float64(x+y), spacing)
			off := min(along, spacing-along)
			cover := min(1, max(0, (width/2-off)/math.Sqrt2+0.5))
			c.img.SetRGBA(x, y, blend(h.Ground, h.Line, cover))
		}
	}
}

func blend(a, b color.NRGBA, t float64) color.RGBA {
	mix := func(a, b uint8) uint8 { return uint8(math.Round(float64(a) + (float64(b)-float64(a))*t)) }
	return color.RGBA{mix(a.R, b.R), mix(a.G, b.G), mix(a.B, b.B), 255}
}

// A share is a cell's part of a pixel.
type share struct {
	cell   int
	weight float64
}

// shares returns, for each of n pixels, the cells that it shows.
func shares(n, cells int, mix, flip bool) [][]share {
	list := make([][]share, n)
	each := float64(cells) / float64(n)
	for i := range list {
		from, to := float64(i)*each, float64(i+1)*each
		if !mix || each <= 1 {
			list[i] = []share{{min(cells-1, int((from+to)/2)), 1}}
		} else {
			for k := int(from); k < cells && float64(k) < to; k++ {
				if w := min(to, float64(k+1)) - max(from, float64(k)); w > 1e-9 {
					list[i] = append(list[i], share{k, w})
				}
			}
		}
		if flip {
			for j := range list[i] {
				list[i][j].cell = cells - 1 - list[i][j].cell
			}
		}
	}
	return list
}

func (c *canvas) raster(r *Raster) {
	a, b := c.pixel(Point{r.Box.X, r.Box.Y}), c.pixel(Point{r.Box.X + r.Box.W, r.Box.Y + r.Box.H})
	area := image.Rect(int(math.Round(a.X)), int(math.Round(a.Y)), int(math.Round(b.X)), int(math.Round(b.Y)))
	area.Max.X, area.Max.Y = max(area.Max.X, area.Min.X+1), max(area.Max.Y, area.Min.Y+1)
	across, down := shares(area.Dx(), r.Cols, r.Mix, false), shares(area.Dy(), r.Rows, r.Mix, true)
	bounds := c.img.Bounds()
	for y, rows := range down {
		for x, cols := range across {
			at := image.Pt(area.Min.X+x, area.Min.Y+y)
			if !at.In(bounds) {
				continue
			}
			var red, green, blue, alpha, total float64
			for _, row := range rows {
				for _, col := range cols {
					p := r.Cells[row.cell*r.Cols+col.cell]
					w := row.weight * col.weight
					total += w
					w *= float64(p.A) / 255
					red, green, blue, alpha = red+w*float64(p.R), green+w*float64(p.G), blue+w*float64(p.B), alpha+w
				}
			}
			if alpha == 0 {
				continue
			}
			under := c.img.RGBAAt(at.X, at.Y)
			top := color.NRGBA{uint8(math.Round(red / alpha)), uint8(math.Round(green / alpha)), uint8(math.Round(blue / alpha)), 255}
			c.img.SetRGBA(at.X, at.Y, blend(color.NRGBA(under), top, alpha/total))
		}
	}
}
