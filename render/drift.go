package render

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// Drift draws how the shift axis moved during the run, and where it jumped.
func Drift(s *survey.Survey, opt Options) (*plot.Figure, error) {
	d := s.Drift
	if d == nil || len(d.Pixel) < 2 || len(d.Shift) != len(d.Pixel) {
		return nil, errors.New("the survey has no drift: no line was followed")
	}
	st := plot.Light(opt.FontPt)
	width := max(opt.width(), leastWidth*st.Body)
	f := &plot.Figure{W: width, H: 0.5 * width, Ground: st.Ground, DPI: opt.dpi(), Meta: [][2]string{{"Title", "Drift of the shift axis"}}}
	low, high := slices.Min(d.Shift), slices.Max(d.Shift)
	pad := max(0.08*(high-low), 2*d.Error, 0.01)
	low, high = low-pad, high+pad
	last := float64(d.Pixel[len(d.Pixel)-1])
	x, y := plot.MakeTicks(0, last, 7), plot.MakeTicks(low, high, 5)
	left := st.Margin + 1.3*st.Body + labelWidth(y, st) + st.Tick + 0.3*st.Small
	box := plot.Box{X: left, Y: st.Margin, W: f.W - left - st.Margin - 0.5*labelWidth(x, st)}
	box.H = f.H - box.Y - st.Margin - st.Tick - 1.25*st.Small - 1.3*st.Body
	place := func(pixel, shift float64) plot.Point {
		return plot.Point{X: box.X + box.W*pixel/last, Y: box.Y + box.H*(high-shift)/(high-low)}
	}
	for i, v := range x.At {
		at := place(v, low)
		f.Line(st.Ink, st.Stroke, at, plot.Point{X: at.X, Y: at.Y + st.Tick})
		f.Text(plot.Text{At: plot.Point{X: at.X, Y: at.Y + st.Tick + 0.95*st.Small}, String: x.Label[i], Size: st.Small, Align: plot.Middle, Color: st.Ink})
	}
	for i, v := range y.At {
		at := place(0, v)
		f.Line(st.Ink, st.Stroke, plot.Point{X: at.X - st.Tick, Y: at.Y}, at)
		f.Text(plot.Text{At: plot.Point{X: at.X - st.Tick - 0.3*st.Small, Y: at.Y + 0.36*st.Small}, String: y.Label[i], Size: st.Small, Align: plot.Right, Color: st.Ink})
	}
	f.Line(st.Soft, 0.7*st.Stroke, place(0, math.Max(low, 0)), place(last, math.Max(low, 0)))
	var stretch []plot.Point
	jump := 0
	for i, p := range d.Pixel {
		if jump < len(d.Jumps) && p >= d.Jumps[jump].Pixel {
			if len(stretch) > 1 {
				f.Line(st.Ink, 1.6*st.Stroke, stretch...)
			}
			stretch = nil
			at := place(float64(d.Jumps[jump].Pixel), 0).X
			f.Line(st.Soft, 0.7*st.Stroke, plot.Point{X: at, Y: box.Y}, plot.Point{X: at, Y: box.Y + box.H})
			jump++
		}
		stretch = append(stretch, place(float64(p), d.Shift[i]))
	}
	if len(stretch) > 1 {
		f.Line(st.Ink, 1.6*st.Stroke, stretch...)
	}
	f.Frame(box, st.Ink, st.Stroke)
	f.Text(plot.Text{At: plot.Point{X: box.X + box.W/2, Y: f.H - st.Margin}, String: "Pixel, in order of acquisition", Size: st.Body, Align: plot.Middle, Color: st.Ink})
	f.Text(plot.Text{At: plot.Point{X: st.Margin + 0.8*st.Body, Y: box.Y + box.H/2}, String: y.Axis("Drift of the axis", "cm-1"), Size: st.Body, Align: plot.Middle, Upward: true, Color: st.Ink})
	f.Scale(opt.width() / width)
	return f, nil
}

func altDrift(d *survey.Drift) string {
	return fmt.Sprintf("Drift of the shift axis over the run, %.2f cm-1 in all, with %d jumps.", d.Range, len(d.Jumps))
}
