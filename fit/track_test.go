package fit_test

import (
	"math"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/clean"
	"bandgrid/fit/synth"
)

// TestTrackLine has a night in which the axis moves by 0.8 cm-1. After the silicon line is followed, the G position of a film is
// off by less than 0.05 cm-1 in the median, its own noise aside: what is compared is the drift that was taken out.
func TestTrackLine(t *testing.T) {
	t.Parallel()
	scene := &synth.Scene{Seed: 31}
	scene.Stage = synth.Stage{Cols: 40, Rows: 30, DX: 0.5, Order: "serpentine"}
	scene.Instrument = synth.Instrument{ReadNoise: 4, Background: 300, From: 480, To: 1750, Channels: 1000, Drift: 0.8 / 1.2}
	scene.Signal = synth.Signal{G: 400, Lines: []synth.Line{{Band: synth.Band{Name: "silicon", Position: 520.5, Width: 4, Height: 1500}}}}
	scene.Objects = []synth.Object{{Layers: 1, Shape: synth.Shape{Everywhere: true}}}
	if err := scene.Prepare(); err != nil {
		t.Fatal(err)
	}
	sc := scene.Scan()
	plan, err := fit.NewPlan(fit.Graphene(), sc.Axis, sc.Laser, fit.Detector{})
	if err != nil {
		t.Fatal(err)
	}
	fits, err := fit.Run(t.Context(), sc, plan, fit.RunOptions{})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := fits.Track("2d"); err == nil {
		t.Error("a band that was not fitted is followed")
	}
	drift, err := fits.Track("si")
	if err != nil {
		t.Fatal(err)
	}
	if !(math.Abs(drift.Range-0.8) <= 0.1) || len(drift.Jumps) > 0 || !(drift.Error <= 0.05) {
		t.Errorf("drift %+v", drift)
	}
	s, err := fits.Survey()
	if err != nil {
		t.Fatal(err)
	}
	g := scene.NewGenerator()
	counts := make([]float32, len(sc.Axis))
	q := s.Map("g_position")
	var first, last []float64
	for i := range scene.Len() {
		_, _, tr := g.Pixel(i, counts)
		c := tr.Row*s.Grid.Cols + tr.Col
		e := float64(q.Values[c]) - tr.G.Position
		if i < 200 {
			first = append(first, e)
		} else if i >= scene.Len()-200 {
			last = append(last, e)
		}
	}
	// A single G is good to 0.2 cm-1, so the median of 200 to 0.02: over the run nothing is left of 0.8.
	a, b := clean.Median(first), clean.Median(last)
	t.Logf("median error of G in the first 200 pixels %+.3f, in the last 200 %+.3f cm-1", a, b)
	if !(math.Abs(b-a) <= 0.1) {
		t.Errorf("G drifts from %+.3f to %+.3f cm-1", a, b)
	}
}
