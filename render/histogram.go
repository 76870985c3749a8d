package render

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"bandgrid/mapio/survey"
	"bandgrid/render/palette"
	"bandgrid/render/plot"
)

// bins are the counts of a histogram, one row of counts for each class of layer number that occurs.
type bins struct {
	low, width float64
	counts     [][7]int // per bin: layer numbers 0 to 5, then undetermined
	outside    int      // values beyond the axis
}

// Histogram draws how often values occur, in pixels, coloured by layer number as on the map. The axis holds all values but the
// outermost half per cent at each end; how many lie beyond is said.
func Histogram(s *survey.Survey, quantity string, opt Options) (*plot.Figure, error) {
	c, err := newCells(s, quantity, opt)
	if err != nil {
		return nil, err
	}
	st := plot.Light(opt.FontPt)
	width := max(opt.width(), leastWidth*st.Body)
	f := &plot.Figure{W: width, H: 0.8 * width, Ground: st.Ground, DPI: opt.dpi(), Meta: c.meta("Histogram")}
	h := &histogram{cells: c, st: st, f: f, bins: c.bin(opt.Range)}
	h.draw()
	f.Scale(opt.width() / width)
	return f, nil
}

// bin counts. The width of bins follows the rule of Freedman and Diaconis (Z. Wahrscheinlichkeitstheorie verw. Geb. 57, 453
// (1981); from memory), rounded up to a value that ticks can meet, so that there are about 16 to 60: its rule alone is too coarse
// where several layer numbers make several peaks. Counts have bins of whole numbers.
func (c *cells) bin(asked [2]float64) bins {
	if discrete(c.q.Name) {
		b := bins{low: -0.5, width: 1, counts: make([][7]int, 6)}
		for n, count := range c.classes {
			b.counts[n][n] = count
		}
		return b
	}
	var values []float64
	for i, v := range c.q.Values {
		if c.state[i] == valued {
			values = append(values, float64(v))
		}
	}
	if len(values) == 0 {
		return bins{}
	}
	slices.Sort(values)
	low, high := span([]float64{percentile(values, 0.005), percentile(values, 0.995)}, [2]float64{}, "")
	low, high = min(low, percentile(values, 0.005)), max(high, percentile(values, 0.995))
	if (asked[0] != 0 || asked[1] != 0) && asked[0] < asked[1] {
		low, high = asked[0], asked[1]
	}
	width := 2 * (percentile(values, 0.75) - percentile(values, 0.25)) / math.Cbrt(float64(len(values)))
	width = plot.Step(min((high-low)/40, max((high-low)/60, width)))
	b := bins{width: width}
	if b.low = math.Floor(low/width) * width; whole(values) {
		b.width = max(1, math.Round(width))
		b.low, high = math.Round(low)-0.5, math.Round(high)
		if high-b.low < 1 { // a single value: in the middle
			b.low, high = b.low-1, high+1
		}
	}
	b.counts = make([][7]int, int(math.Floor((high-b.low)/b.width*(1+1e-12)))+1)
	layers := c.s.Map("layer_number")
	for i, v := range c.q.Values {
		if c.state[i] != valued {
			continue
		}
		k := int(math.Floor((float64(v) - b.low) / b.width))
		if k < 0 || k >= len(b.counts) {
			b.outside++
			continue
		}
		b.counts[k][layerOf(layers, i)]++
	}
	return b
}

func whole(values []float64) bool {
	for _, v := range values {
		if v != math.Trunc(v) || math.Abs(v) > 1e6 {
			return false
		}
	}
	return true
}

// layerOf is the class that a pixel is coloured by; 6 is undetermined.
func layerOf(layers *survey.Quantity, i int) int {
	if layers == nil || math.IsNaN(float64(layers.Values[i])) {
		return 6
	}
	return class(layers.Values[i])
}

// A histogram is being drawn.
type histogram struct {
	*cells
	st plot.Style
	f  *plot.Figure
	bins
}

func (h *histogram) draw() {
	st, f := h.st, h.f
	m := st.Margin
	keys := h.layerKeys()
	x := plot.MakeTicks(h.low(), h.high(), 7)
	for n := 7; n > 1 && !discrete(h.q.Name); n-- {
		x = plot.MakeTicks(h.low(), h.high(), n)
		if len(x.At) < 2 || labelWidth(x, st)+0.9*st.Small < (x.At[1]-x.At[0])/(h.high()-h.low())*0.8*f.W {
			break
		}
	}
	title := x.Axis(h.title, h.q.Unit)
	if discrete(h.q.Name) {
		title = "Layer number"
	}
	lines := plot.Wrap(title, st.Body, f.W-2*m, false)
	top := h.most()
	y := plot.MakeTicks(0, top*1.06, max(2, min(6, int(f.H/(4.5*st.Small)))))
	left := m + 1.3*st.Body + labelWidth(y, st) + st.Tick + 0.3*st.Small
	box := plot.Box{X: left, Y: m, W: f.W - left - m - 0.5*labelWidth(x, st)}
	legend := h.drawKeys(keys, box.X, f.W-m-box.X)
	box.Y += legend
	box.H = f.H - box.Y - m - st.Tick - 1.25*st.Small - 1.3*st.Body*float64(len(lines))
	h.drawBars(box, top*1.06)
	for i, v := range y.At {
		at := box.Y + box.H*(1-v/(top*1.06))
		f.Line(st.Ink, st.Stroke, plot.Point{X: box.X - st.Tick, Y: at}, plot.Point{X: box.X, Y: at})
		f.Text(plot.Text{At: plot.Point{X: box.X - st.Tick - 0.3*st.Small, Y: at + 0.36*st.Small}, String: y.Label[i], Size: st.Small, Align: plot.Right, Color: st.Ink})
	}
	f.Text(plot.Text{At: plot.Point{X: box.X - st.Tick - 0.3*st.Small - labelWidth(y, st) - 0.35*st.Body, Y: box.Y + box.H/2}, String: y.Axis("Pixels", ""),
		Size: st.Body, Align: plot.Middle, Upward: true, Color: st.Ink})
	base := box.Y + box.H
	if discrete(h.q.Name) {
		x.At, x.Label = []float64{0, 1, 2, 3, 4, 5}, []string{"bare", "1", "2", "3", "4", "5+"}
	}
	for i, v := range x.At {
		at := box.X + (v-h.low())/(h.high()-h.low())*box.W
		f.Line(st.Ink, st.Stroke, plot.Point{X: at, Y: base}, plot.Point{X: at, Y: base + st.Tick})
		f.Text(plot.Text{At: plot.Point{X: at, Y: base + st.Tick + 0.95*st.Small}, String: x.Label[i], Size: st.Small, Align: plot.Middle, Color: st.Ink})
	}
	for i, line := range lines {
		f.Text(plot.Text{At: plot.Point{X: box.X + box.W/2, Y: base + st.Tick + 1.25*st.Small + (1+1.3*float64(i))*st.Body}, String: line, Size: st.Body,
			Align: plot.Middle, Color: st.Ink})
	}
	f.Frame(box, st.Ink, st.Stroke)
}

func labelWidth(t plot.Ticks, st plot.Style) float64 {
	w := 0.0
	for _, label := range t.Label {
		w = max(w, plot.TextWidth(label, st.Small, false))
	}
	return w
}

func (h *histogram) low() float64 { return h.bins.low }

func (h *histogram) high() float64 {
	if len(h.counts) == 0 {
		return h.bins.low + 1
	}
	return h.bins.low + h.width*float64(len(h.counts))
}

// most is the highest bar.
func (h *histogram) most() float64 {
	most := 1
	for _, bin := range h.counts {
		sum := 0
		for _, n := range bin {
			sum += n
		}
		most = max(most, sum)
	}
	return float64(most)
}

func layerColor(class int) color.NRGBA {
	if class < len(palette.Layers) {
		return palette.Layers[class]
	}
	return palette.Undetermined
}

func (h *histogram) drawBars(box plot.Box, top float64) {
	for i, bin := range h.counts {
		sum := 0
		x0, x1 := box.X+box.W*float64(i)/float64(len(h.counts)), box.X+box.W*float64(i+1)/float64(len(h.counts))
		if discrete(h.q.Name) {
			x0, x1 = x0+0.15*(x1-x0), x1-0.15*(x1-x0)
		}
		for class, n := range bin {
			if n == 0 {
				continue
			}
			y0, y1 := box.Y+box.H*(1-float64(sum)/top), box.Y+box.H*(1-float64(sum+n)/top)
			sum += n
			h.f.Rect(plot.Box{X: x0, Y: y1, W: x1 - x0, H: y0 - y1}, layerColor(class))
		}
		if sum > 0 { // pale classes need an edge
			y := box.Y + box.H*(1-float64(sum)/top)
			h.f.Frame(plot.Box{X: x0, Y: y, W: x1 - x0, H: box.Y + box.H - y}, h.st.Soft, 0.4*h.st.Stroke)
		}
	}
}

// layerKeys are the classes that the bars show, and how many values lie beyond the axis.
func (h *histogram) layerKeys() []key {
	var present [7]bool
	for _, bin := range h.counts {
		for class, n := range bin {
			present[class] = present[class] || n > 0
		}
	}
	var list []key
	if h.s.Map("layer_number") != nil && !discrete(h.q.Name) {
		for class, is := range present {
			switch {
			case is && class < 6:
				list = append(list, key{name: LayerName(class), fill: layerColor(class)})
			case is:
				list = append(list, key{name: "undetermined", fill: layerColor(class)})
			}
		}
	}
	if h.outside > 0 {
		list = append(list, key{name: fmt.Sprintf("%d beyond the axis", h.outside)})
	}
	if len(h.counts) == 0 {
		list = append(list, key{name: "no values"})
	}
	return list
}

// drawKeys draws the key in rows above the bars and returns its height.
func (h *histogram) drawKeys(keys []key, left, room float64) (height float64) {
	st := h.st
	x, row := 0.0, 0
	for i, k := range keys {
		swatch := 1.6 * st.Body
		if k.fill.A == 0 {
			swatch = 0
		}
		w := swatch + plot.TextWidth(k.name, st.Small, false)
		if i > 0 && x+w > room {
			x, row = 0, row+1
		}
		baseline := st.Margin + (float64(row)*1.5+0.9)*st.Small
		if swatch > 0 {
			box := plot.Box{X: left + x, Y: baseline - 0.8*st.Small, W: 1.2 * st.Body, H: 0.9 * st.Small}
			h.f.Rect(box, k.fill)
			h.f.Frame(box, st.Ink, 0.6*st.Stroke)
		}
		h.f.Text(plot.Text{At: plot.Point{X: left + x + swatch, Y: baseline}, String: k.name, Size: st.Small, Color: st.Ink})
		x += w + 1.2*st.Body
	}
	if len(keys) == 0 {
		return 0
	}
	return (float64(row+1)*1.5 + 0.3) * st.Small
}
