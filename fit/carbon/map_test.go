package carbon_test

import (
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/carbon"
	"bandgrid/fit/synth"
	"bandgrid/mapio/survey"
)

// fitScene fits every pixel of a scene and returns what the fit left, with the truth of each cell.
func fitScene(t *testing.T, scene *synth.Scene, detector fit.Detector) (*survey.Survey, []synth.Truth) {
	t.Helper()
	if err := scene.Prepare(); err != nil {
		t.Fatal(err)
	}
	plan, err := fit.NewPlan(fit.Graphene(), scene.Axis(), scene.Laser, detector)
	if err != nil {
		t.Fatal(err)
	}
	s := &survey.Survey{}
	s.Laser = scene.Laser
	s.Grid.Rows, s.Grid.Cols = scene.Stage.Rows, scene.Stage.Cols
	n := s.Grid.Cells()
	for _, c := range plan.Columns {
		s.Put(survey.Quantity{Name: c.Name, Values: make([]float32, n), SE: make([]float32, n)})
	}
	fitter, generator := fit.NewFitter(plan), scene.NewGenerator()
	counts := make([]float32, len(scene.Axis()))
	v, se := make([]float32, len(plan.Columns)), make([]float32, len(plan.Columns))
	truth := make([]synth.Truth, n)
	for i := range scene.Len() {
		_, _, tr := generator.Pixel(i, counts)
		fitter.Fit(counts, v, se)
		cell := tr.Row*s.Grid.Cols + tr.Col
		truth[cell] = tr
		for k := range v {
			s.Maps[k].Values[cell], s.Maps[k].SE[cell] = v[k], se[k]
		}
	}
	return s, truth
}

// A map of twelve flakes of one to three layers, their 2D widths and G areas scattered as those of flakes are; half of the
// single layers are damaged. At least 97 % of the pure pixels of 0, 1 and 2 layers must be right, undetermined ones counting as
// wrong.
func TestMap(t *testing.T) {
	scene := &synth.Scene{Seed: 7}
	scene.Stage = synth.Stage{Cols: 60, Rows: 45, DX: 0.5}
	scene.Instrument = synth.Instrument{Spot: 0.8, ReadNoise: 4, Background: 100, Channels: 800}
	scene.Spikes.Rate = 0.02
	scene.Signal = synth.Signal{G: 150, GAreaSpread: 0.05}
	for k := range 12 {
		flake := synth.Object{
			Layers: 1 + k%3, Strain: &synth.Field{Spread: 0.05, Length: 3},
			Shape: synth.Shape{Disc: &synth.Disc{X: 3.7 + 7.3*float64(k%4), Y: 3.7 + 7.3*float64(k/4), Radius: 3}},
		}
		if flake.Layers == 1 && k%2 == 1 {
			flake.DGRatio = synth.Const(1.5)
		}
		scene.Objects = append(scene.Objects, flake)
	}
	s, truth := fitScene(t, scene, fit.Detector{Gain: 1, ReadNoise: 4})
	steps := append(fit.RatioSteps(fit.Graphene()), carbon.Steps(carbon.Settings{})...)
	if err := fit.Apply(s, steps); err != nil {
		t.Fatal(err)
	}
	number := s.Map("layer_number").Values
	var right, pure [3]int
	for i, tr := range truth {
		if tr.PureFraction < 0.98 || tr.LayerNumber > 2 {
			continue
		}
		pure[tr.LayerNumber]++
		if number[i] == float32(tr.LayerNumber) {
			right[tr.LayerNumber]++
		}
	}
	for n, k := range right {
		t.Logf("%d layers: %d of %d pure pixels", n, k, pure[n])
		if pure[n] < 100 || !(float64(k) >= 0.97*float64(pure[n])) {
			t.Errorf("%d layers: %d of %d pure pixels are right, 97 %% are wanted of at least 100", n, k, pure[n])
		}
	}
}
