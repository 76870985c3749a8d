package render

import (
	"fmt"
	"testing"

	"bandgrid/render/plot"
)

// clear reports texts that collide with each other or leave the figure.
func clear(f *plot.Figure) error {
	texts := f.Texts()
	page := plot.Box{W: f.W, H: f.H}
	for i, t := range texts {
		b := t.Box()
		if !b.Inside(page, 0) {
			return fmt.Errorf("%q at %.1f leaves the figure of %.1f x %.1f mm", t.String, b, f.W, f.H)
		}
		for _, u := range texts[:i] {
			if b.Overlaps(u.Box()) {
				return fmt.Errorf("%q at %.1f and %q at %.1f collide", t.String, b, u.String, u.Box())
			}
		}
	}
	return nil
}

func TestLayoutIsClear(t *testing.T) {
	for _, s := range samples() {
		for _, points := range []float64{0, 6, 11} {
			s.opt.FontPt = points
			f, err := Map(s.survey, s.quantity, s.opt)
			if err != nil {
				t.Errorf("%s: %v", s.name, err)
				continue
			}
			if err := clear(f); err != nil {
				t.Errorf("map %s, %g pt: %v", s.name, points, err)
			}
			if f, err = Histogram(s.survey, s.quantity, s.opt); err != nil {
				t.Errorf("%s: %v", s.name, err)
				continue
			}
			if err := clear(f); err != nil {
				t.Errorf("histogram %s, %g pt: %v", s.name, points, err)
			}
		}
		if s.survey.Map("layer_number") != nil {
			f, err := Overview(s.survey, StandardQuantities, Options{})
			if err != nil {
				t.Errorf("%s: %v", s.name, err)
				continue
			}
			if err := clear(f); err != nil {
				t.Errorf("overview %s: %v", s.name, err)
			}
		}
	}
}

func TestLayoutTestSees(t *testing.T) {
	// The check above must find a collision and a clipped text.
	f := &plot.Figure{W: 40, H: 20}
	f.Text(plot.Text{At: plot.Point{X: 5, Y: 10}, String: "first", Size: 3})
	if err := clear(f); err != nil {
		t.Error(err)
	}
	f.Text(plot.Text{At: plot.Point{X: 7, Y: 10}, String: "second", Size: 3})
	if clear(f) == nil {
		t.Error("a collision is not seen")
	}
	f.Items = f.Items[:1]
	f.Text(plot.Text{At: plot.Point{X: 35, Y: 5}, String: "clipped", Size: 3})
	if clear(f) == nil {
		t.Error("a clipped text is not seen")
	}
}

// Only strips, which say so, are not to scale.
func TestEqualAspect(t *testing.T) {
	for _, s := range samples() {
		c, err := newCells(s.survey, s.quantity, s.opt)
		if err != nil {
			t.Fatal(err)
		}
		p := newPanel(c, plot.Light(0), 110, 180, "")
		stretch := p.box.H / p.frame.height() * p.frame.width() / p.box.W
		thin := min(p.box.W, p.box.H) < 2.3*p.st.Body
		if !thin && !(stretch > 0.999 && stretch < 1.001) {
			t.Errorf("%s: y is stretched %.3f times against x", s.name, stretch)
		}
		if p.box.X+p.box.W > 110 || p.box.W < 2 || p.box.H < 2 {
			t.Errorf("%s: map of %.1f x %.1f mm at %.1f", s.name, p.box.W, p.box.H, p.box.X)
		}
	}
}
