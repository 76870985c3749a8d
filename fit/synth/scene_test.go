package synth

import (
	"math"
	"slices"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
)

func TestParseIsStrict(t *testing.T) {
	for text, want := range map[string]string{
		`{"sead": 1}`: "sead",
		`{"objects": [{"layers": 1, "everywhere": true, "strain": {"valeu": 1}}]}`: "valeu",
		`{"objects": [{"layers": 1}]}`:                                             "one of everywhere",
		`{"objects": [{"layers": 1, "disc": {"radius": -1}}]}`:                     "radius",
		`{"objects": [{"everywhere": true, "polygon": [[0, 0]]}]}`:                 "one of everywhere",
		`{"stage": {"order": "spiral"}}`:                                           "spiral",
		`{"stage": {"cols": 100000, "rows": 100000}}`:                              "67 million",
		`{"instrument": {"correlation": 0.7}}`:                                     "correlation",
		"{\n\"seed\": 1,\n}":                                                       "line 3",
		`{} {}`:                                                                    "more after the end",
		`{"laser_nm": 10600}`:                                                      "laser_nm",
		`{"objects": [{"layers": 1, "everywhere": true, "d_g_ratio": 1, "defect_distance_nm": 9}]}`: "not both",
	} {
		if _, err := Parse([]byte(text)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: error %v, want one that names %q", text, err, want)
		}
	}
	if _, err := Parse([]byte(`{}`)); err != nil {
		t.Errorf("an empty scene is one of defaults: %v", err)
	}
}

func TestAcquisitionOrder(t *testing.T) {
	for _, test := range []struct {
		stage Stage
		want  []int32
	}{
		{Stage{Cols: 3, Rows: 2}, []int32{0, 1, 2, 3, 4, 5}},
		{Stage{Cols: 3, Rows: 2, Order: "serpentine"}, []int32{0, 1, 2, 5, 4, 3}},
		{Stage{Cols: 3, Rows: 2, Order: "serpentine", Fast: "y"}, []int32{0, 3, 4, 1, 2, 5}},
		{Stage{Cols: 3, Rows: 2, Corner: "upper-right"}, []int32{5, 4, 3, 2, 1, 0}},
		{Stage{Cols: 3, Rows: 2, Order: "serpentine", Corner: "upper-left"}, []int32{3, 4, 5, 2, 1, 0}},
		{Stage{Cols: 3, Rows: 2, Fast: "y", Corner: "lower-right"}, []int32{2, 5, 1, 4, 0, 3}},
		{Stage{Cols: 2, Rows: 1, Repeated: 1}, []int32{0, 0, 1, 1}},
	} {
		s := must(t, &Scene{Stage: test.stage})
		if !slices.Equal(s.cells, test.want) {
			t.Errorf("%+v: %v, want %v", test.stage, s.cells, test.want)
		}
	}
	s := must(t, &Scene{Seed: 2, Stage: Stage{Cols: 100, Rows: 100, Missing: 0.1, Cut: 0.5}})
	// 9000 expected, of which half are measured; five standard deviations of a binomial.
	if all := len(s.cells); !(math.Abs(float64(all)-9000) <= 150) || s.Len() != all/2 || !s.Torn() {
		t.Errorf("%d cells, %d measured, torn %v", all, s.Len(), s.Torn())
	}
}

func TestStageFrame(t *testing.T) {
	s := Stage{OffsetX: 3, OffsetY: -1, Rotation: 90}
	// A feature at (2, 0) of the sample, turned counterclockwise by a right angle, lies at (0, 2), then at (3, 1).
	if x, y := s.onSample(3, 1); !(math.Hypot(x-2, y) <= 1e-12) {
		t.Errorf("(3, 1) on the stage is (%g, %g) on the sample, want (2, 0)", x, y)
	}
}

func TestAxes(t *testing.T) {
	s := must(t, &Scene{Instrument: Instrument{From: 1200, To: 2900, Channels: 301, Curvature: -0.2, Descending: true, Wavelength: true}})
	axis := s.Axis()
	if err := axis.Check(); err != nil || !axis.Descending() || axis[0] != 2900 || axis[300] != 1200 {
		t.Fatalf("%v; from %g to %g", err, axis[0], axis[300])
	}
	mean := 1700. / 300
	if got := (axis[0] - axis[1] - axis[299] + axis[300]) / mean; !(math.Abs(got+0.2) <= 0.002) { // steps are half a channel from the ends
		t.Errorf("steps differ by %.4f of the mean from end to end, want -0.2", got)
	}
	back := scan.ShiftFromWavelength(s.Wavelengths(), s.Laser)
	for i := range axis {
		if !(math.Abs(back[i]-axis[i]) <= 1e-6) {
			t.Fatalf("channel %d: %.8f after conversion to nm and back, want %.8f", i, back[i], axis[i])
		}
	}
}

func TestShapes(t *testing.T) {
	// An L: margins are distances to the nearest edge, negative outside.
	l := Shape{Polygon: [][2]float64{{0, 0}, {4, 0}, {4, 2}, {2, 2}, {2, 4}, {0, 4}}}
	for _, test := range []struct{ x, y, want float64 }{
		{1, 1, 1}, {3, 1, 1}, {3, 3, -1}, {-2, 1, -2}, {7, -4, -5}, {1.9, 1.9, math.Hypot(0.1, 0.1)},
	} {
		if got := l.margin(test.x, test.y); !(math.Abs(got-test.want) <= 1e-12) || l.inside(test.x, test.y) != (test.want > 0) {
			t.Errorf("(%g, %g): margin %g inside %v, want %g", test.x, test.y, got, l.inside(test.x, test.y), test.want)
		}
	}
}
