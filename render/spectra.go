package render

import (
	"errors"
	"fmt"
	"math"

	"bandgrid/mapio/survey"
	"bandgrid/render/palette"
	"bandgrid/render/plot"
)

// Spectra draws single pixels with their fits, a row for each and a column for each window: counts as dots, the fit and the
// background as lines, channels left out as rings.
func Spectra(traces []survey.Trace, opt Options) (*plot.Figure, error) {
	columns := windowsOf(traces)
	if len(columns) == 0 {
		return nil, errors.New("there is no spectrum to draw")
	}
	st := plot.Light(opt.FontPt)
	width := max(opt.width(), leastWidth*st.Body)
	row := 8.5*st.Body + 2*st.Body // panel and title
	f := &plot.Figure{W: width, Ground: st.Ground, DPI: opt.dpi(), Meta: [][2]string{{"Title", "Spectra with their fits"}}}
	f.H = st.Margin + row*float64(len(traces)) + st.Tick + 2.6*st.Body + st.Margin
	total := 0.0
	for _, c := range columns {
		total += math.Max(c.high-c.low, 100)
	}
	d := &spectra{st: st, f: f}
	left := st.Margin + 1.6*st.Body + d.widest(traces) + st.Tick
	gap := d.widest(traces) + st.Tick + st.Body
	room := f.W - left - st.Margin - gap*float64(len(columns)-1)
	x := left
	for i := range columns {
		columns[i].x = x
		columns[i].w = room * math.Max(columns[i].high-columns[i].low, 100) / total
		x += columns[i].w + gap
	}
	for i, t := range traces {
		top := st.Margin + row*float64(i)
		title := t.Title
		if title != "" {
			title += ", "
		}
		f.Text(plot.Text{At: plot.Point{X: left, Y: top + 1.2*st.Body}, String: fmt.Sprintf("%sx %.2f, y %.2f µm", title, t.X, t.Y), Size: st.Body, Bold: true, Color: st.Ink})
		for _, c := range columns {
			for _, w := range t.Windows {
				if w.Name == c.name {
					d.panel(w, c, plot.Box{X: c.x, Y: top + 1.8*st.Body, W: c.w, H: row - 2.2*st.Body}, i == len(traces)-1)
				}
			}
		}
	}
	f.Text(plot.Text{At: plot.Point{X: left + (f.W-left-st.Margin)/2, Y: f.H - st.Margin}, String: "Raman shift (" + plot.Unit("cm-1") + ")", Size: st.Body, Align: plot.Middle, Color: st.Ink})
	f.Text(plot.Text{At: plot.Point{X: st.Margin + 0.8*st.Body, Y: st.Margin + row*float64(len(traces))/2}, String: "Counts", Size: st.Body, Align: plot.Middle, Upward: true, Color: st.Ink})
	f.Scale(opt.width() / width)
	return f, nil
}

// A windowColumn is a column of panels.
type windowColumn struct {
	name      string
	low, high float64
	x, w      float64
}

func windowsOf(traces []survey.Trace) (columns []windowColumn) {
next:
	for _, t := range traces {
		for _, w := range t.Windows {
			if len(w.Shift) < 2 {
				continue next
			}
			found := false
			for _, c := range columns {
				found = found || c.name == w.Name
			}
			if !found {
				columns = append(columns, windowColumn{name: w.Name, low: w.Shift[0], high: w.Shift[len(w.Shift)-1]})
			}
		}
	}
	return columns
}

// spectra is a figure being drawn.
type spectra struct {
	st plot.Style
	f  *plot.Figure
}

// limits are those of a panel's counts.
func limits(w survey.TraceWindow) (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for i, v := range w.Counts {
		if v == v && !w.Left[i] {
			low, high = min(low, v), max(high, v)
		}
		low, high = min(low, w.Curve[i]), max(high, w.Curve[i])
	}
	pad := max(0.06*(high-low), 1e-9)
	return low - pad, high + 2.2*pad
}

// ray is where a channel that was left out is drawn: a cosmic ray may be far above the panel.
func ray(v, high float64) float64 { return min(v, high) }

func (d *spectra) widest(traces []survey.Trace) (w float64) {
	for _, t := range traces {
		for _, v := range t.Windows {
			low, high := limits(v)
			w = max(w, labelWidth(plot.MakeTicks(low, high, 4), d.st))
		}
	}
	return w
}

func (d *spectra) panel(w survey.TraceWindow, c windowColumn, box plot.Box, last bool) {
	st, f := d.st, d.f
	low, high := limits(w)
	place := func(x, y float64) plot.Point {
		return plot.Point{X: box.X + box.W*(x-c.low)/(c.high-c.low), Y: box.Y + box.H*(high-y)/(high-low)}
	}
	y := plot.MakeTicks(low, high, 4)
	for i, v := range y.At {
		at := place(c.low, v)
		f.Line(st.Ink, st.Stroke, plot.Point{X: at.X - st.Tick, Y: at.Y}, at)
		f.Text(plot.Text{At: plot.Point{X: at.X - st.Tick - 0.3*st.Small, Y: at.Y + 0.36*st.Small}, String: y.Label[i], Size: st.Small, Align: plot.Right, Color: st.Ink})
	}
	x := plot.MakeTicks(c.low, c.high, max(2, int(box.W/(4*st.Small))))
	for i, v := range x.At {
		at := place(v, low)
		f.Line(st.Ink, st.Stroke, at, plot.Point{X: at.X, Y: at.Y + st.Tick})
		if last {
			f.Text(plot.Text{At: plot.Point{X: at.X, Y: at.Y + st.Tick + 0.95*st.Small}, String: x.Label[i], Size: st.Small, Align: plot.Middle, Color: st.Ink})
		}
	}
	dot := 0.16 * st.Body
	for i, v := range w.Counts {
		if v != v {
			continue
		}
		at := place(w.Shift[i], ray(v, high))
		if w.Left[i] {
			f.Add(&plot.Path{Rings: [][]plot.Point{plot.Circle(at, 2.2*dot)}, Closed: true, Stroke: st.Ink, Width: st.Stroke})
			continue
		}
		f.Rect(plot.Box{X: at.X - dot/2, Y: at.Y - dot/2, W: dot, H: dot}, st.Soft)
	}
	var base, curve []plot.Point
	for i, v := range w.Shift {
		base = append(base, place(v, w.Base[i]))
		curve = append(curve, place(v, w.Curve[i]))
	}
	f.Line(palette.Layers[2], st.Stroke, base...)
	f.Line(palette.Layers[4], 1.5*st.Stroke, curve...)
	for _, p := range w.Found {
		at := place(p.Position, high)
		if at.X < box.X+st.Body || at.X > box.X+box.W-st.Body {
			continue
		}
		f.Line(st.Soft, 0.7*st.Stroke, at, plot.Point{X: at.X, Y: at.Y + 0.4*st.Body})
		f.Text(plot.Text{At: plot.Point{X: at.X + 0.3*st.Small, Y: at.Y + 0.95*st.Small}, String: bandTitle(p.Name), Size: st.Small, Color: st.Soft})
	}
	f.Frame(box, st.Ink, st.Stroke)
}

// bandTitle is how a band is written.
func bandTitle(name string) string {
	switch name {
	case "d", "g", "2d":
		return map[string]string{"d": "D", "g": "G", "2d": "2D"}[name]
	case "dprime":
		return "D'"
	case "si":
		return "Si"
	}
	return name
}
