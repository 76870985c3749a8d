package region

import (
	"math"
	"strings"
	"testing"

	"bandgrid/mapio/survey"
)

func TestJudge(t *testing.T) {
	s := drawn(0.5, 0.5, "00000000", "01111110", "01111110", "01111110", "01111110", "00000022", "00000022")
	n := s.Grid.Cells()
	ratio := survey.Quantity{Name: "d_g_ratio", Values: make([]float32, n)}
	for i := range ratio.Values {
		ratio.Values[i] = float32(math.NaN())
		if s.Map("layer_number").Values[i] == 1 {
			ratio.Values[i] = 0.04 + 0.01*float32(i%3-1)
		}
	}
	s.Maps = append(s.Maps, ratio)
	if err := Find(s, Options{}); err != nil {
		t.Fatal(err)
	}
	limits, err := ReadLimits(strings.NewReader(`{"limits": [
		{"quantity": "area", "layer": 1, "at_least": 4},
		{"quantity": "area", "layer": 1, "at_least": 9},
		{"quantity": "area", "layer": 3, "at_most": 0.5},
		{"quantity": "d_g_ratio", "layer": 1, "at_most": 0.05},
		{"quantity": "d_g_ratio", "layer": 1, "statistic": "mean", "at_most": 0.03},
		{"quantity": "d_g_ratio", "layer": 2, "at_most": 0.05}]}`))
	if err != nil {
		t.Fatal(err)
	}
	got, err := Judge(s, limits)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []struct {
		pass  bool
		value float64
	}{{true, 6}, {false, 6}, {true, 0}, {true, 0.04}, {false, 0.04}, {false, 0}} {
		v := got[i]
		if v.Go != want.pass || !(math.Abs(v.Value-want.value) <= 1e-3) || (v.Margin > 0) != want.pass && v.SE > 0 {
			t.Errorf("limit %d: %+v, want %+v", i+1, v, want)
		}
	}
	// The first: (6 - 4) over the error of the area.
	if v := got[0]; !(math.Abs(v.Margin-2/v.SE) <= 1e-9) || v.What != "area of 1 layer" || v.Limit != "at least 4" {
		t.Errorf("%+v", v)
	}
	if _, err := Judge(s, []Limit{{Quantity: "beauty", AtMost: new(float64)}}); err == nil || !strings.Contains(err.Error(), "beauty") {
		t.Error(err)
	}
}

func TestReadLimitsRefuses(t *testing.T) {
	for _, text := range []string{
		``, `{}`, `{"limits": []}`, `{"limits": [{"quantity": "area"}]}`, `{"limits": [{"at_least": 3}]}`,
		`{"limits": [{"quantity": "area", "at_least": 3, "at_most": 4}]}`, `{"limits": [{"quantity": "area", "at_lest": 3}]}`,
		`{"limits": [{"quantity": "d_g_ratio", "statistic": "mode", "at_most": 3}]}`, `{"limits": [{"quantity": "area", "layer": 9, "at_most": 3}]}`,
	} {
		if l, err := ReadLimits(strings.NewReader(text)); err == nil {
			t.Errorf("%s passes as %+v", text, l)
		}
	}
}
