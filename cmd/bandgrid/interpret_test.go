package main

import (
	"bytes"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"bandgrid/mapio/table"
)

// TestInterpret interprets a survey again: with the same settings it is the same bytes, with others it is what a survey made with
// those would be.
func TestInterpret(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	run := save(t, filepath.Join(dir, "night.txt"), flakeNight(t, "serpentine").text(t, table.Style{}))
	made := surveyed(t, run, "--note", "sample=A7", "--oxide", "90", "--min-area", "0.5")
	again := filepath.Join(dir, "again.survey")
	code, out, log := command("interpret", made, "-o", again)
	if code != exitDone || !strings.Contains(out, "Single layer") {
		t.Fatalf("exit %d: %s%s", code, out, log)
	}
	same(t, "the same settings", numbers(t, again), numbers(t, made))
	a, b := load(t, made), load(t, again)
	if !slices.Equal(a.Warnings, b.Warnings) || b.Notes["sample"] != "A7" || b.Settings["oxide_nm"] != 90. {
		t.Errorf("warnings %q and %q, notes %v, settings %v", a.Warnings, b.Warnings, b.Notes, b.Settings)
	}
	for _, name := range []string{"figures/spectra.png", "figures/overview.png", "report.html"} {
		if info, err := os.Stat(filepath.Join(again, name)); err != nil || info.Size() == 0 {
			t.Errorf("%s: %v", name, err)
		}
	}
	other := surveyed(t, run, "--film", "grown", "--spot", "1")
	changed := filepath.Join(dir, "changed.survey")
	if code, _, log := command("interpret", made, "-q", "-o", changed, "--film", "grown", "--spot", "1", "--oxide", "0", "--min-area", "0"); code != exitDone {
		t.Fatalf("exit %d: %s", code, log)
	}
	same(t, "other settings", numbers(t, changed), numbers(t, other))
	// In place, with what people have put there kept.
	save(t, filepath.Join(again, "my notes.txt"), []byte("keep"))
	if code, _, log := command("interpret", again, "-q", "--force", "--film", "grown"); code != exitDone {
		t.Fatalf("exit %d: %s", code, log)
	}
	if data, err := os.ReadFile(filepath.Join(again, "my notes.txt")); err != nil || !bytes.Equal(data, []byte("keep")) {
		t.Errorf("what lay in the folder is gone: %v", err)
	}
	if s := load(t, again); s.Settings["film"] != "grown" || s.Settings["oxide_nm"] != 90. {
		t.Errorf("settings %v", s.Settings)
	}
}

func TestInterpretRefuses(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	run := save(t, filepath.Join(dir, "night.txt"), flakeNight(t, "raster").text(t, table.Style{}))
	made := surveyed(t, run)
	for _, test := range []struct {
		args []string
		code int
		want string
	}{
		{nil, exitUsage, "one survey"},
		{[]string{made}, exitUsage, "--force"},
		{[]string{made, "-o", made}, exitFailed, "--force"},
		{[]string{dir, "-o", filepath.Join(dir, "x")}, exitFailed, "survey.json"},
		{[]string{made, "-o", filepath.Join(dir, "x"), "--film", "paper"}, exitUsage, "paper"},
		{[]string{made, "-o", filepath.Join(dir, "x"), "--oxide", "-3"}, exitUsage, "negative"},
	} {
		code, _, log := command(append([]string{"interpret"}, test.args...)...)
		if code != test.code || !strings.Contains(log, test.want) {
			t.Errorf("%q: exit %d, want %d with %q: %s", test.args, code, test.code, test.want, log)
		}
	}
	if left, _ := os.ReadDir(dir); len(left) != 1 {
		t.Errorf("left behind: %v", left)
	}
}

// TestLimits: go and no go, in words, in survey.json and in the exit status; the survey is there either way.
func TestLimits(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	run := save(t, filepath.Join(dir, "night.txt"), flakeNight(t, "raster").text(t, table.Style{}))
	easy := save(t, filepath.Join(dir, "easy.json"), []byte(`{"limits": [{"quantity": "area", "layer": 1, "at_least": 3}, {"quantity": "d_g_ratio", "layer": 1, "at_most": 0.8}]}`))
	hard := save(t, filepath.Join(dir, "hard.json"), []byte(`{"limits": [{"quantity": "area", "layer": 1, "at_least": 3}, {"quantity": "d_g_ratio", "layer": 1, "at_most": 0.05}]}`))
	wrong := save(t, filepath.Join(dir, "wrong.json"), []byte(`{"limits": [{"quantity": "area"}]}`))
	made := filepath.Join(dir, "a.survey")
	if code, out, log := command("survey", run, "-o", made, "--limits", easy); code != exitDone || strings.Count(out, "Go: ") != 2 {
		t.Errorf("exit %d: %s%s", code, out, log)
	}
	b := filepath.Join(dir, "b.survey")
	code, out, log := command("interpret", made, "-o", b, "--limits", hard)
	if code != exitFailed || !strings.Contains(out, "No go: median d_g_ratio of 1 layer") || !strings.Contains(log, "at most 0.05 is wanted") {
		t.Errorf("exit %d: %s%s", code, out, log)
	}
	s := load(t, b)
	if len(s.Verdicts) != 2 || !s.Verdicts[0].Go || s.Verdicts[1].Go || !(s.Verdicts[1].Margin < -3) {
		t.Errorf("%+v", s.Verdicts)
	}
	for _, verb := range [][]string{{"survey", run, "-o", filepath.Join(dir, "c")}, {"interpret", made, "-o", filepath.Join(dir, "c")}} {
		if code, _, log := command(append(verb, "--limits", wrong)...); code != exitFailed || !strings.Contains(log, "wrong.json") {
			t.Errorf("%q: exit %d: %s", verb, code, log)
		}
		if _, err := os.Stat(filepath.Join(dir, "c")); err == nil {
			t.Errorf("%q: a survey is there", verb)
		}
	}
}
