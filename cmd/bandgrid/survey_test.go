package main

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"io/fs"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"bandgrid/fit/synth"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
	"bandgrid/mapio/table"
)

// A night is a run in memory, in the order in which it was measured.
type night struct {
	axis   scan.Axis
	pixels []scan.Pixel
}

// flakeNight is a small map of a single layer with some D and cosmic rays, 14 x 10 pixels without jitter.
func flakeNight(t testing.TB, order string) night {
	t.Helper()
	scene := &synth.Scene{Seed: 3}
	scene.Stage = synth.Stage{Cols: 14, Rows: 10, DX: 0.5, X0: 100, Y0: -7, Order: order}
	scene.Instrument = synth.Instrument{Background: 250, ReadNoise: 4, Channels: 420, Spot: 0.6}
	scene.Spikes.Rate = 0.1
	scene.Objects = []synth.Object{{Layers: 1, DGRatio: synth.Const(0.4), Shape: synth.Shape{Disc: &synth.Disc{X: 103, Y: -5, Radius: 2}}}}
	if err := scene.Prepare(); err != nil {
		t.Fatal(err)
	}
	n := night{axis: scene.Axis()}
	g := scene.NewGenerator()
	for i := range scene.Len() {
		counts := make([]float32, len(n.axis))
		x, y, _ := g.Pixel(i, counts)
		n.pixels = append(n.pixels, scan.Pixel{X: x, Y: y, Counts: counts})
	}
	return n
}

// text writes the night as text.
func (n night) text(t testing.TB, style table.Style) []byte {
	t.Helper()
	var b bytes.Buffer
	style.Comments = append([]string{"laser 532 nm"}, style.Comments...)
	w := table.NewWriter(&b, n.axis, style)
	for _, p := range n.pixels {
		if err := w.Write(p.X, p.Y, p.Counts); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// window is the part of the night that an axis from low to high sees.
func (n night) window(low, high float64) night {
	var m night
	var keep []int
	for i, v := range n.axis {
		if v >= low && v <= high {
			m.axis = append(m.axis, v)
			keep = append(keep, i)
		}
	}
	for _, p := range n.pixels {
		q := p
		q.Counts = nil
		for _, i := range keep {
			q.Counts = append(q.Counts, p.Counts[i])
		}
		m.pixels = append(m.pixels, q)
	}
	return m
}

func save(t testing.TB, path string, data []byte) string {
	t.Helper()
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// command runs bandgrid and returns its exit status and what it wrote.
func command(args ...string) (code int, out, log string) {
	var o, l bytes.Buffer
	code = run(context.Background(), args, streams{in: strings.NewReader(""), out: &o, err: &l})
	return code, o.String(), l.String()
}

// surveyed runs the survey verb, which must succeed, and returns the survey's folder.
func surveyed(t testing.TB, args ...string) string {
	t.Helper()
	folder := filepath.Join(t.TempDir(), "out.survey")
	if code, _, log := command(append([]string{"survey", "-q", "-o", folder}, args...)...); code != exitDone {
		t.Fatalf("%q: exit %d: %s", args, code, log)
	}
	return folder
}

// numbers returns the files of a survey that must not depend on how it was made.
func numbers(t testing.TB, folder string) map[string][]byte {
	t.Helper()
	files := map[string][]byte{}
	for _, pattern := range []string{"maps/*", "regions.csv"} {
		names, err := fs.Glob(os.DirFS(folder), pattern)
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range names {
			data, err := os.ReadFile(filepath.Join(folder, name))
			if err != nil {
				t.Fatal(err)
			}
			files[name] = data
		}
	}
	return files
}

func same(t *testing.T, what string, got, want map[string][]byte) {
	t.Helper()
	if len(got) != len(want) || len(want) < 20 {
		t.Errorf("%s: %d files, want %d", what, len(got), len(want))
	}
	for name, data := range want {
		if !bytes.Equal(got[name], data) {
			t.Errorf("%s: %s differs", what, name)
		}
	}
}

func packed(t testing.TB, data []byte, make func(io.Writer) (io.WriteCloser, error)) []byte {
	t.Helper()
	var b bytes.Buffer
	w, err := make(&b)
	if err == nil {
		_, err = w.Write(data)
	}
	if err == nil {
		err = w.Close()
	}
	if err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// TestSurveyBytes makes the same survey with different numbers of workers, from different forms of the run, and from pixels
// measured in other orders: maps and regions are the same bytes.
func TestSurveyBytes(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	n := flakeNight(t, "serpentine")
	wide := n.text(t, table.Style{})
	path := save(t, filepath.Join(dir, "wide.txt"), wide)
	want := numbers(t, surveyed(t, path, "--workers", "2"))
	for _, workers := range []string{"1", "8"} {
		same(t, workers+" workers", numbers(t, surveyed(t, path, "--workers", workers)), want)
	}
	raster, backwards, shuffled := night{n.axis, slices.Clone(n.pixels)}, night{n.axis, slices.Clone(n.pixels)}, night{n.axis, slices.Clone(n.pixels)}
	slices.SortFunc(raster.pixels, func(a, b scan.Pixel) int { return int(math.Copysign(1, 1e3*(a.Y-b.Y)+(a.X-b.X))) })
	slices.Reverse(backwards.pixels)
	r := rand.New(rand.NewPCG(1, 1))
	r.Shuffle(len(shuffled.pixels), func(i, j int) {
		shuffled.pixels[i], shuffled.pixels[j] = shuffled.pixels[j], shuffled.pixels[i]
	})
	descending := night{slices.Clone(n.axis), nil}
	slices.Reverse(descending.axis)
	for _, p := range n.pixels {
		p.Counts = slices.Clone(p.Counts)
		slices.Reverse(p.Counts)
		descending.pixels = append(descending.pixels, p)
	}
	for name, data := range map[string][]byte{
		"long":          n.text(t, table.Style{Long: true}),
		"decimal comma": n.text(t, table.Style{Separator: ';', DecimalComma: true}),
		"comma":         n.text(t, table.Style{Separator: ','}),
		"blanks, CRLF":  n.text(t, table.Style{Separator: ' ', CRLF: true}),
		"mark of order": append([]byte("\ufeff"), wide...),
		"gzip":          packed(t, wide, func(w io.Writer) (io.WriteCloser, error) { return gzip.NewWriter(w), nil }),
		"zstd":          packed(t, wide, func(w io.Writer) (io.WriteCloser, error) { return zstd.NewWriter(w) }),
		"raster":        raster.text(t, table.Style{}),
		"other corner":  backwards.text(t, table.Style{}),
		"any order":     shuffled.text(t, table.Style{Long: true, Separator: ';', DecimalComma: true}),
		"descending":    descending.text(t, table.Style{}),
	} {
		same(t, name, numbers(t, surveyed(t, save(t, filepath.Join(dir, strings.ReplaceAll(name, " ", "-")), data))), want)
	}
}

// TestSurveyRefuses has runs and folders that cannot be used: a message that names the file and says what to do, exit status
// 1 (2 where the command line is wrong), and nothing left behind.
func TestSurveyRefuses(t *testing.T) {
	t.Parallel()
	n := flakeNight(t, "raster")
	wide := string(n.text(t, table.Style{}))
	lines := strings.SplitAfter(wide, "\n")
	head := slices.IndexFunc(lines, func(l string) bool { return !strings.HasPrefix(l, "#") })
	noise := make([]byte, 5000)
	r := rand.New(rand.NewPCG(2, 2))
	for i := range noise {
		noise[i] = byte(r.Uint32())
	}
	nm := string(n.text(t, table.Style{Wavelength: true}))
	jump := slices.Clone(lines)
	cells := strings.Split(lines[head], "\t")
	cells[200], cells[201] = cells[201], cells[200]
	jump[head] = strings.Join(cells, "\t")
	letters := slices.Clone(lines[:head+1])
	for _, l := range lines[head+1:] {
		letters = append(letters, strings.Replace(l, "\t2", "\tab2", 5))
	}
	var bare []string // without positions
	for _, l := range lines[head:] {
		if c := strings.Split(l, "\t"); len(c) > 2 {
			bare = append(bare, strings.Join(c[2:], "\t"))
		}
	}
	for _, test := range []struct {
		name, content string
		args          []string
		code          int
		want          []string // parts of the message
	}{
		{"empty.txt", "", nil, exitFailed, []string{"empty.txt: ", "empty"}},
		{"binary.txt", string(noise), nil, exitFailed, []string{"binary.txt: "}},
		{"prose.txt", strings.Repeat("The stage was cold that night.\n", 50), nil, exitFailed, []string{"prose.txt: "}},
		{"header.txt", strings.Join(lines[:head+1], ""), nil, exitFailed, []string{"header.txt: "}},
		{"half-header.txt", strings.Join(lines[:head], "") + lines[head][:len(lines[head])/2], nil, exitFailed, []string{"half-header.txt: "}},
		{"jump.txt", strings.Join(jump, ""), nil, exitFailed, []string{"jump.txt: "}},
		{"letters.txt", strings.Join(letters, ""), nil, exitFailed, []string{"letters.txt: line 4: value 3", "ab2"}},
		{"no-positions.txt", strings.Join(bare, ""), nil, exitFailed, []string{"no-positions.txt: "}},
		{"no-laser.txt", strings.Replace(wide, "laser 532 nm", "no word of it", 1), nil, exitFailed, []string{"no-laser.txt: ", "--laser"}},
		{"wavelength.txt", strings.Replace(nm, "laser 532 nm", "no word of it", 1), nil, exitFailed, []string{"wavelength.txt: ", "--laser"}},
		{"other-range.txt", string(n.window(1900, 2400).text(t, table.Style{})), nil, exitFailed, []string{"other-range.txt: ", "windows"}},
		{"fine.txt", wide, []string{"--laser", "5"}, exitUsage, []string{"--laser"}},
		{"fine.txt", wide, []string{"--columns", "x,y,nonsense"}, exitFailed, []string{"nonsense"}},
		{"fine.txt", wide, []string{"--film", "paper"}, exitUsage, []string{"paper"}},
		{"fine.txt", wide, []string{"--flip", "z"}, exitUsage, []string{"--flip"}},
		{"fine.txt", wide, []string{"--read-noise", "4"}, exitUsage, []string{"--gain"}},
		{"fine.txt", wide, []string{"--recipe", "does-not-exist.json"}, exitFailed, []string{"does-not-exist.json"}},
		{"fine.txt", wide, []string{"--exclude", "does-not-exist.csv"}, exitFailed, []string{"does-not-exist.csv"}},
		{"fine.txt", wide, []string{"--nonsense"}, exitUsage, []string{"nonsense"}},
	} {
		dir := t.TempDir()
		path := save(t, filepath.Join(dir, test.name), []byte(test.content))
		code, _, log := command(append([]string{"survey", path}, test.args...)...)
		t.Logf("%s %q: %s", test.name, test.args, strings.ReplaceAll(log, dir+"/", ""))
		if code != test.code {
			t.Errorf("%s %q: exit %d, want %d: %s", test.name, test.args, code, test.code, log)
		}
		for _, part := range test.want {
			if !strings.Contains(log, part) {
				t.Errorf("%s %q: %q is not in the message %s", test.name, test.args, part, log)
			}
		}
		if left, _ := os.ReadDir(dir); len(left) != 1 {
			t.Errorf("%s %q: left behind: %v", test.name, test.args, left)
		}
	}
	dir := t.TempDir()
	path := save(t, filepath.Join(dir, "a.txt"), []byte(wide))
	for _, test := range []struct {
		args []string
		code int
		want string
	}{
		{[]string{}, exitUsage, "no run given"},
		{[]string{path, path, "-o", "x"}, exitUsage, "-o names one survey"},
		{[]string{"-"}, exitUsage, "-o"},
		{[]string{filepath.Join(dir, "none.txt")}, exitFailed, "none.txt"},
		{[]string{dir}, exitFailed, dir},
		{[]string{path, "-o", filepath.Join(path, "x.survey")}, exitFailed, "a.txt"},
	} {
		code, _, log := command(append([]string{"survey"}, test.args...)...)
		if code != test.code || !strings.Contains(log, test.want) {
			t.Errorf("%q: exit %d, want %d with %q: %s", test.args, code, test.code, test.want, log)
		}
	}
	if left, _ := os.ReadDir(dir); len(left) != 1 {
		t.Errorf("left behind: %v", left)
	}
}

func TestSurveyIsNotOverwritten(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	path := save(t, filepath.Join(dir, "night.txt"), flakeNight(t, "raster").text(t, table.Style{}))
	if code, out, log := command("survey", path); code != exitDone || !strings.Contains(out, "open first:") {
		t.Fatalf("exit %d: %s%s", code, out, log)
	}
	mine := save(t, filepath.Join(dir, "night.survey", "my notes.txt"), []byte("keep"))
	code, _, log := command("survey", path)
	if code != exitFailed || !strings.Contains(log, "--force") {
		t.Errorf("exit %d: %s", code, log)
	}
	if _, err := os.Stat(mine); err != nil {
		t.Error(err)
	}
	if code, _, log := command("survey", path, "--force", "-q"); code != exitDone {
		t.Errorf("exit %d: %s", code, log)
	}
	if left, _ := os.ReadDir(dir); len(left) != 2 {
		t.Errorf("left behind: %v", left)
	}
}

// TestSurveyOfABrokenRun has runs of which a part is unusable: exit status 3 and a survey that says what is missing.
func TestSurveyOfABrokenRun(t *testing.T) {
	t.Parallel()
	n := flakeNight(t, "raster")
	wide := n.text(t, table.Style{})
	lines := strings.SplitAfter(string(wide), "\n")
	bad := slices.Clone(lines)
	bad[20] = strings.Replace(bad[20], "\t2", "\tx2", 1)
	bad[30] = bad[30][:40] + "\n"
	holes := slices.Clone(lines)
	cells := strings.Split(holes[40], "\t")
	cells[50], cells[51] = "NaN", ""
	holes[40] = strings.Join(cells, "\t")
	again := append(slices.Clone(lines), lines[10], lines[11])
	for _, test := range []struct {
		name, content string
		code          int
		want          survey.Pixels
		log           string
	}{
		{"cut.txt", string(wide[:len(wide)*2/3]), exitPartly, survey.Pixels{Expected: 98, Read: 93, Fitted: 92, Failed: 1, Missing: 5}, "middle"},
		{"bad rows.txt", strings.Join(bad, ""), exitPartly, survey.Pixels{Expected: 140, Read: 140, Fitted: 138, Failed: 2}, "line 21"},
		{"holes.txt", strings.Join(holes, ""), exitDone, survey.Pixels{Expected: 140, Read: 140, Fitted: 140, Holes: 2, Holed: 1}, ""},
		{"again.txt", strings.Join(again, ""), exitDone, survey.Pixels{Expected: 140, Read: 142, Fitted: 140, Repeated: 2}, ""},
	} {
		dir := t.TempDir()
		path := save(t, filepath.Join(dir, test.name), []byte(test.content))
		code, _, log := command("survey", path)
		t.Logf("%s: %s", test.name, strings.ReplaceAll(log, dir+"/", ""))
		s, err := survey.Load(strings.TrimSuffix(path, ".txt") + ".survey")
		if err != nil {
			t.Errorf("%s: exit %d: %s: %v", test.name, code, log, err)
			continue
		}
		if s.Pixels != test.want { // of the rows that the cut has taken away nothing is known
			t.Errorf("%s: %+v, want %+v", test.name, s.Pixels, test.want)
		}
		if code != test.code || test.log != "" && !strings.Contains(log, test.log) && !strings.Contains(strings.Join(s.Warnings, "\n"), test.log) {
			t.Errorf("%s: exit %d, want %d: %s; warnings %q", test.name, code, test.code, log, s.Warnings)
		}
		if s.Complete != (code == exitDone) {
			t.Errorf("%s: exit %d, but complete is %v", test.name, code, s.Complete)
		}
	}
}

func TestSeveralRuns(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	wide := flakeNight(t, "raster").text(t, table.Style{})
	a := save(t, filepath.Join(dir, "a.txt"), wide)
	b := save(t, filepath.Join(dir, "b.txt"), []byte("no map"))
	c := save(t, filepath.Join(dir, "c.txt"), wide)
	code, _, log := command("survey", "-q", a, b, c)
	if code != exitFailed || !strings.Contains(log, "b.txt") || strings.Contains(log, "a.txt") {
		t.Errorf("exit %d: %s", code, log)
	}
	same(t, "the run after the bad one", numbers(t, filepath.Join(dir, "c.survey")), numbers(t, filepath.Join(dir, "a.survey")))
	if left, _ := os.ReadDir(dir); len(left) != 5 {
		t.Errorf("left behind: %v", left)
	}
}

// TestWith joins two runs of one window each: the maps are those of the single run with both.
func TestWith(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	n := flakeNight(t, "serpentine")
	both := save(t, filepath.Join(dir, "both.txt"), n.text(t, table.Style{}))
	dg := save(t, filepath.Join(dir, "dg.txt"), n.window(1150, 1800).text(t, table.Style{}))
	td := save(t, filepath.Join(dir, "2d.txt"), n.window(2500, 2900).text(t, table.Style{Separator: ';', DecimalComma: true}))
	// Noise learnt from both windows differs a little from that of each; given, it does not.
	noise := []string{"--gain", "1", "--read-noise", "4"}
	single := load(t, surveyed(t, append(noise, both)...))
	joined := load(t, surveyed(t, append(noise, dg, "--with", td)...))
	for _, q := range single.Maps {
		p := joined.Map(q.Name)
		if p == nil {
			t.Errorf("%s is missing", q.Name)
			continue
		}
		for i := range q.Values {
			limit := 1e-5
			if q.Name == "chi2" {
				limit = 0.01 // weighed by channels there are, not by channels that count
			}
			if d := float64(q.Values[i] - p.Values[i]); !(math.Abs(d) <= limit*(1+math.Abs(float64(q.Values[i])))) && (q.Values[i] == q.Values[i] || p.Values[i] == p.Values[i]) {
				t.Errorf("%s: cell %d is %g, in the single run %g", q.Name, i, p.Values[i], q.Values[i])
				break
			}
		}
	}
	if len(joined.Runs) != 2 || len(joined.Learned) != 2 {
		t.Errorf("%d runs, %d looks", len(joined.Runs), len(joined.Learned))
	}
	// One window alone gives what it can.
	part := load(t, surveyed(t, td))
	if part.Map("2d_width") == nil || part.Map("g_position") != nil || !strings.Contains(strings.Join(part.Warnings, "\n"), "d_g") {
		t.Errorf("a run of the 2D window only: %d quantities, warnings %q", len(part.Maps), part.Warnings)
	}
	moved := n.window(2500, 2900)
	for i := range moved.pixels {
		moved.pixels[i].X += 50
	}
	other := save(t, filepath.Join(dir, "other.txt"), moved.text(t, table.Style{}))
	code, _, log := command("survey", dg, "--with", other, "-o", filepath.Join(dir, "x.survey"))
	t.Log(strings.ReplaceAll(log, dir+"/", ""))
	if code != exitFailed || !strings.Contains(log, "other.txt") || !strings.Contains(log, "grid") {
		t.Errorf("another grid: exit %d: %s", code, log)
	}
	if code, _, log := command("survey", both, "--with", td, "-o", filepath.Join(dir, "y.survey")); code != exitUsage || !strings.Contains(log, "nothing to add") {
		t.Errorf("exit %d: %s", code, log)
	}
}

func load(t testing.TB, folder string) *survey.Survey {
	t.Helper()
	s, err := survey.Load(folder)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// A slowReader ends the context after some bytes, as somebody who presses Ctrl-C.
type slowReader struct {
	r    io.Reader
	left int
	stop context.CancelFunc
}

func (s *slowReader) Read(p []byte) (int, error) {
	n, err := s.r.Read(p[:min(len(p), 4096)])
	if s.left -= n; s.left < 0 {
		s.stop()
	}
	return n, err
}

func TestInterrupt(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	folder := filepath.Join(dir, "night.survey")
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	// More pixels than are looked at beforehand, so that the fit is under way.
	scene := &synth.Scene{Seed: 9}
	scene.Stage = synth.Stage{Cols: 200, Rows: 150, DX: 1}
	scene.Instrument = synth.Instrument{Background: 100, From: 2500, To: 2900, Channels: 120}
	if err := scene.Prepare(); err != nil {
		t.Fatal(err)
	}
	n := night{axis: scene.Axis()}
	g := scene.NewGenerator()
	for i := range scene.Len() {
		counts := make([]float32, len(n.axis))
		x, y, _ := g.Pixel(i, counts)
		n.pixels = append(n.pixels, scan.Pixel{X: x, Y: y, Counts: counts})
	}
	text := n.text(t, table.Style{})
	var out, log bytes.Buffer
	in := &slowReader{r: bytes.NewReader(text), left: len(text) * 3 / 4, stop: stop}
	code := run(ctx, []string{"survey", "-", "-o", folder}, streams{in: in, out: &out, err: &log})
	if code != exitInterrupted || !strings.Contains(log.String(), ".partial") {
		t.Fatalf("exit %d: %s", code, log.String())
	}
	s := load(t, folder+".partial")
	if s.Complete || s.Pixels.Fitted < 1000 || s.Pixels.Fitted >= scene.Len() {
		t.Errorf("kept: %+v", s.Pixels)
	}
	if _, err := os.Stat(folder); err == nil {
		t.Error("the survey is there under its final name")
	}
}

// TestSurveyFiles checks that a survey's files are there and agree with each other.
func TestSurveyFiles(t *testing.T) {
	t.Parallel()
	path := save(t, filepath.Join(t.TempDir(), "night.txt"), flakeNight(t, "raster").text(t, table.Style{}))
	folder := surveyed(t, path, "--note", "sample=A7", "--table", "--oxide", "300")
	for _, name := range []string{"report.html", "report.md", "regions.csv", "pixels.csv", "survey.json", "figures/overview.png",
		"figures/layer_number.png", "figures/d_g_ratio.png", "figures/g_position.png", "figures/2d_width.png", "figures/spectra.png", "maps/x.npy", "maps/y.npy"} {
		if info, err := os.Stat(filepath.Join(folder, name)); err != nil || info.Size() == 0 {
			t.Errorf("%s: %v", name, err)
		}
	}
	var info map[string]any
	data, err := os.ReadFile(filepath.Join(folder, "survey.json"))
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &info); err != nil {
		t.Fatal(err)
	}
	for name := range info["quantities"].(map[string]any) {
		if _, err := os.Stat(filepath.Join(folder, "maps", name+".npy")); err != nil {
			t.Error(err)
		}
	}
	if notes := info["notes"].(map[string]any); notes["sample"] != "A7" {
		t.Errorf("notes %v", notes)
	}
	rows, err := os.ReadFile(filepath.Join(folder, "pixels.csv"))
	if err != nil || bytes.Count(rows, []byte("\n")) != 141 {
		t.Errorf("pixels.csv: %d lines, %v", bytes.Count(rows, []byte("\n")), err)
	}
	listed, err := os.ReadFile(filepath.Join(folder, "spikes.csv"))
	total := 0
	for _, v := range load(t, folder).Map("spikes").Values {
		total += int(v)
	}
	if err != nil || bytes.Count(listed, []byte("\n")) != total+1 || total == 0 {
		t.Errorf("spikes.csv: %d lines for %d channels, %v", bytes.Count(listed, []byte("\n")), total, err)
	}
	if page, err := os.ReadFile(filepath.Join(folder, "report.html")); err != nil || bytes.Contains(page, []byte("http://")) || bytes.Contains(page, []byte("https://")) {
		t.Errorf("the report asks for something beyond its own file, or: %v", err)
	}
}

// TestRecipeRoundTrip prints the recipe, uses it, and prints it again.
func TestRecipeRoundTrip(t *testing.T) {
	t.Parallel()
	code, text, log := command("survey", "--print-recipe")
	if code != exitDone {
		t.Fatal(log)
	}
	path := save(t, filepath.Join(t.TempDir(), "recipe.json"), []byte(text))
	if code, again, log := command("survey", "--print-recipe", "--recipe", path); code != exitDone || again != text {
		t.Errorf("exit %d %s: the recipe changes", code, log)
	}
	wrong := save(t, filepath.Join(t.TempDir(), "wrong.json"), []byte(strings.Replace(text, "spike_threshold", "spike_treshold", 1)))
	if code, _, log := command("survey", "--print-recipe", "--recipe", wrong); code != exitFailed || !strings.Contains(log, "wrong.json") || !strings.Contains(log, "spike_treshold") || !strings.Contains(log, "line ") {
		t.Errorf("exit %d: %s", code, log)
	}
}

// TestHelpExamples runs the examples of every verb's help, on the shipped files.
func TestHelpExamples(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	if err := os.CopyFS(filepath.Join(dir, "examples"), os.DirFS("../../examples")); err != nil {
		t.Fatal(err)
	}
	for _, v := range verbs {
		code, out, log := command(v.name, "--help")
		if code != exitDone {
			t.Errorf("%s --help: exit %d: %s", v.name, code, log)
		}
		found := 0
		for line := range strings.Lines(out + log) {
			text, ok := strings.CutPrefix(strings.TrimSpace(line), "bandgrid ")
			if !ok || !strings.HasPrefix(line, "  bandgrid ") {
				continue
			}
			found++
			args := strings.Fields(text)
			for i, a := range args {
				if strings.HasPrefix(a, "examples/") || strings.HasSuffix(a, ".survey") {
					args[i] = filepath.Join(dir, a)
				} else if i > 0 && (args[i-1] == "-o" || args[i-1] == "--truth") {
					args[i] = filepath.Join(dir, a)
				}
			}
			if code, _, log := command(args...); code != exitDone {
				t.Errorf("%s: the example %q ends with %d: %s", v.name, text, code, log)
			}
		}
		if found == 0 {
			t.Errorf("%s --help shows no example:\n%s", v.name, out+log)
		}
	}
	if code, out, _ := command("--help"); code != exitDone || !strings.Contains(out, "survey") {
		t.Errorf("--help: exit %d: %s", code, out)
	}
	if code, _, log := command("survy"); code != exitUsage || !strings.Contains(log, "survy") {
		t.Errorf("unknown verb: exit %d: %s", code, log)
	}
}
