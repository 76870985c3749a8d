package fit_test

import (
	"strings"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
	"bandgrid/mapio/survey"
)

// placed fits an asymmetric scene, an L of film, with options.
func placed(t *testing.T, opt fit.RunOptions) *survey.Survey {
	t.Helper()
	scene := &synth.Scene{Seed: 8}
	scene.Stage = synth.Stage{Cols: 8, Rows: 6, DX: 1, X0: 10, Y0: 20, Order: "serpentine"}
	scene.Instrument = synth.Instrument{ReadNoise: 4, Background: 300, From: 2500, To: 2900, Channels: 200}
	scene.Objects = []synth.Object{{Layers: 1, Shape: synth.Shape{Polygon: [][2]float64{{9, 19}, {15.5, 19}, {15.5, 21.5}, {11.5, 21.5}, {11.5, 26.5}, {9, 26.5}}}}}
	if err := scene.Prepare(); err != nil {
		t.Fatal(err)
	}
	sc := scene.Scan()
	plan, err := fit.NewPlan(fit.Graphene(), sc.Axis, sc.Laser, fit.Detector{})
	if err != nil {
		t.Fatal(err)
	}
	fits, err := fit.Run(t.Context(), sc, plan, opt)
	if err != nil {
		t.Fatal(err)
	}
	s, err := fits.Survey()
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// picture draws where 2D is found, the highest y on top.
func picture(s *survey.Survey) (rows []string) {
	q := s.Map("2d_position").Values
	status := s.Map("status").Values
	for row := s.Grid.Rows - 1; row >= 0; row-- {
		var line strings.Builder
		for col := range s.Grid.Cols {
			switch i := row*s.Grid.Cols + col; {
			case status[i] != status[i]:
				line.WriteString(" ")
			case q[i] == q[i]:
				line.WriteString("1")
			default:
				line.WriteString(".")
			}
		}
		rows = append(rows, line.String())
	}
	return rows
}

func compare(t *testing.T, what string, got, want []string) {
	t.Helper()
	for i := range want {
		if i >= len(got) || got[i] != want[i] {
			t.Errorf("%s:\ngot  %q\nwant %q", what, got, want)
			return
		}
	}
}

func TestPlaces(t *testing.T) {
	s := placed(t, fit.RunOptions{})
	compare(t, "as measured", picture(s), []string{"11......", "11......", "11......", "11......", "111111..", "111111.."})
	if s.Grid.X0 != 10 || s.Grid.Y0 != 20 {
		t.Errorf("grid %+v", s.Grid)
	}
	s = placed(t, fit.RunOptions{FlipX: true})
	compare(t, "x flipped", picture(s), []string{"......11", "......11", "......11", "......11", "..111111", "..111111"})
	if s.Grid.X0 != -17 || s.Grid.Y0 != 20 {
		t.Errorf("x flipped: grid %+v", s.Grid)
	}
	s = placed(t, fit.RunOptions{FlipY: true})
	compare(t, "y flipped", picture(s), []string{"111111..", "111111..", "11......", "11......", "11......", "11......"})
	s = placed(t, fit.RunOptions{Leave: func(x, y float64) bool { return x < 11.5 && y > 22.5 }})
	compare(t, "a corner left out", picture(s), []string{"  ......", "  ......", "  ......", "11......", "111111..", "111111.."})
	if p := s.Pixels; p.Excluded != 6 || p.Failed != 0 || p.Missing != 0 || p.Repeated != 0 || p.Fitted != 42 {
		t.Errorf("a corner left out: %+v", p)
	}
}
