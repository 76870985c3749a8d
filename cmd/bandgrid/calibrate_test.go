package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"bandgrid/fit/calib"
	"bandgrid/mapio/table"
)

const polystyrene = "../../examples/calibration/polystyrene.txt"

// TestCalibrate calibrates with the shipped reference, whose axis is off by 6 cm-1 at G (see its scene), and surveys with that:
// positions move by what the calibration says.
func TestCalibrate(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	file := filepath.Join(dir, "c.json")
	code, out, log := command("calibrate", polystyrene, "--reference", "polystyrene", "--order", "2", "-o", file)
	if code != exitDone || !strings.Contains(out, "11 lines of polystyrene") {
		t.Fatalf("exit %d: %s%s", code, out, log)
	}
	f, err := os.Open(file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	c, err := calib.Read(f)
	if err != nil {
		t.Fatal(err)
	}
	// The scene puts a line of shift s at s - 6.4 - 0.0021 (s - 1800) - 0.9 ((s - 1800)/1000)².
	for _, s := range []float64{1345, 1582, 2670} {
		u := (s - 1800) / 1000
		nominal := s - 6.4 - 2.1*u - 0.9*u*u
		if got := c.Axis.Shift(nominal); !(math.Abs(got-s) <= 4*c.Axis.SE(nominal)) || !(math.Abs(got-s) <= 0.5) {
			t.Errorf("a line of %.0f is put at %.2f ± %.2f", s, got, c.Axis.SE(nominal))
		}
	}
	n := flakeNight(t, "raster")
	run := save(t, filepath.Join(dir, "night.txt"), n.text(t, table.Style{}))
	plain, corrected := load(t, surveyed(t, run)), load(t, surveyed(t, run, "--calibration", file))
	a, b := plain.Map("g_position").Values, corrected.Map("g_position").Values
	se := plain.Map("g_position").SE
	moved := 0
	for i := range a {
		if a[i] == a[i] && b[i] == b[i] {
			moved++
			// The window sees other channels then, and the weak D' beside G is sought elsewhere: within the error of the fit.
			if want := c.Axis.Shift(float64(a[i])); !(math.Abs(float64(b[i])-want) <= float64(se[i])) {
				t.Errorf("cell %d: G at %.2f, corrected %.2f, the calibration says %.2f", i, a[i], b[i], want)
			}
		}
	}
	if moved < 20 || len(corrected.Calibration) < 3 || len(plain.Calibration) > 0 {
		t.Errorf("%d pixels with G; the survey says %q", moved, corrected.Calibration)
	}
	// To standard output, words apart.
	code, out, log = command("calibrate", polystyrene, "--reference", "polystyrene", "-o", "-")
	if code != exitDone || !json.Valid([]byte(out)) || !strings.Contains(log, "offset and stretch") {
		t.Errorf("exit %d: %.80s %s", code, out, log)
	}
}

// TestCalibrateResponse gives a response of a glass and of a table.
func TestCalibrateResponse(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	g, err := calib.GlassNamed("2242a")
	if err != nil {
		t.Fatal(err)
	}
	var glass, own bytes.Buffer
	for x := 400.; x < 3300; x += 2 {
		rate, _ := g.Rate(x)
		fmt.Fprintf(&glass, "%.1f\t%.0f\n", x, 100+2e4*rate*(1-0.35*(x-1580)/1090)+20*math.Sin(x*x))
		fmt.Fprintf(&own, "%.1f\t%.4f\n", x, 1-0.35*(x-1580)/1090)
	}
	for name, args := range map[string][]string{
		"glass": {"--glass", save(t, filepath.Join(dir, "glass.txt"), glass.Bytes()), "--dark", "100", "--laser", "532"},
		"table": {"--response", save(t, filepath.Join(dir, "own.txt"), own.Bytes())},
	} {
		file := filepath.Join(dir, name+".json")
		code, out, log := command(append([]string{"calibrate", "-o", file}, args...)...)
		if code != exitDone || !strings.Contains(out, "2D is seen 0.65") && !strings.Contains(out, "2D is seen 0.64") {
			t.Errorf("%s: exit %d: %s%s", name, code, out, log)
		}
		n := flakeNight(t, "raster")
		run := save(t, filepath.Join(dir, name+".txt"), n.text(t, table.Style{}))
		plain, corrected := load(t, surveyed(t, run)), load(t, surveyed(t, run, "--calibration", file))
		a, b := plain.Map("2d_g_ratio").Values, corrected.Map("2d_g_ratio").Values
		sum, count := 0.0, 0.0
		for i := range a {
			if r := float64(b[i] / a[i]); r == r {
				sum += r
				count++
			}
		}
		if r := sum / count; count < 20 || !(math.Abs(r-1/0.65) <= 0.04) {
			t.Errorf("%s: corrected 2D/G is %.3f times that as measured, 1.54 is due", name, r)
		}
	}
}

func TestCalibrateRefuses(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	file := filepath.Join(dir, "c.json")
	broken := save(t, filepath.Join(dir, "broken.json"), []byte(`{"axis": {"order": 1}}`))
	noise := save(t, filepath.Join(dir, "noise.txt"), []byte("100\t5\n101\t6\n102\t5\n103\t7\n"))
	night := save(t, filepath.Join(dir, "night.txt"), flakeNight(t, "raster").text(t, table.Style{}))
	for _, test := range []struct {
		args []string
		code int
		want string
	}{
		{[]string{"calibrate", "-o", file}, exitUsage, "no spectrum given"},
		{[]string{"calibrate", polystyrene, "-o", file}, exitUsage, "--reference"},
		{[]string{"calibrate", polystyrene, "--reference", "polystyrene"}, exitUsage, "-o"},
		{[]string{"calibrate", polystyrene, "--reference", "chewing gum", "-o", file}, exitUsage, "polystyrene, cyclohexane"},
		{[]string{"calibrate", polystyrene, "--reference", "cyclohexane", "-o", file}, exitFailed, "match"},
		{[]string{"calibrate", polystyrene, "--reference", "polystyrene", "--order", "7", "-o", file}, exitUsage, "--order"},
		{[]string{"calibrate", noise, "--reference", "silicon", "-o", file}, exitFailed, "noise.txt"},
		{[]string{"calibrate", "none.txt", "--reference", "silicon", "-o", file}, exitFailed, "none.txt"},
		{[]string{"calibrate", "--glass", polystyrene, "--glass-name", "window", "-o", file}, exitUsage, "SRM 2242a"},
		{[]string{"survey", night, "--calibration", broken}, exitFailed, "broken.json"},
		{[]string{"survey", night, "--calibration", "none.json"}, exitFailed, "none.json"},
	} {
		code, _, log := command(test.args...)
		if code != test.code || !strings.Contains(log, test.want) {
			t.Errorf("%q: exit %d, want %d with %q: %s", test.args, code, test.code, test.want, log)
		}
	}
	if _, err := os.Stat(file); err == nil {
		t.Error("a calibration was written although nothing could be calibrated")
	}
}
