package survey

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
)

var nan32 = float32(math.NaN())

// small is a survey of 4 x 3 cells with a missing pixel, two quantities and two regions.
func small() *Survey {
	s := &Survey{}
	s.Program, s.Laser, s.Complete = "bandgrid devel", 532, true
	s.Runs = []RunFile{{Name: "night.txt", SHA256: strings.Repeat("ab", 32), Bytes: 12345, Format: "wide text"}}
	s.Axis = AxisInfo{Channels: 420, From: 1200, To: 2850}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: 4, Rows: 3, X0: 10, Y0: -2, DX: 0.5, DY: 0.25}
	s.Pixels = Pixels{Expected: 12, Read: 11, Fitted: 11, Missing: 1}
	s.Recipe = json.RawMessage(`{"name": "graphene"}`)
	s.Settings = map[string]any{"film": "unknown", "spot_um": 0.5}
	s.Notes = map[string]string{"sample": "A7"}
	s.Learned = []Learned{{Pixels: 11, Gain: 1.5, ReadNoise: 4, NoiseChannels: 4000, Correlation: []float64{0.3, 0, 0, 0}, Inflation: 1.6,
		Bands: []LearnedBand{{Name: "d", Pixels: 11, Position: 1345, PositionSpread: 1, Width: 24, WidthSpread: 2}}}}
	s.Warnings = []string{"one pixel is missing"}
	r := rand.New(rand.NewPCG(1, 1))
	draw := func() []float32 {
		v := make([]float32, 12)
		for i := range v {
			v[i] = float32(r.NormFloat64())
		}
		v[5] = nan32
		return v
	}
	s.X, s.Y = make([]float32, 12), make([]float32, 12)
	for i := range 12 {
		x, y := s.Grid.Center(i%4, i/4)
		s.X[i], s.Y[i] = float32(x), float32(y)
	}
	s.Maps = []Quantity{
		{Name: "d_g_ratio", Description: "height of D over that of G", Of: []string{"d_height", "g_height"}, Values: draw(), SE: draw()},
		{Name: "g_position", Unit: "cm-1", Description: "position of G", Values: draw(), SE: draw()},
		{Name: "status", Description: "bits", Values: draw()},
	}
	stat := func() []Stat {
		var list []Stat
		for _, q := range s.Maps {
			list = append(list, Stat{Quantity: q.Name, N: 7, Median: 0.25, Spread: 0.125, Mean: 0.5, MeanSE: 0.0625, P5: -1, P95: 2})
		}
		return list
	}
	s.Regions = []Region{
		{ID: "all", Layer: math.NaN(), Pixels: 11, Area: 1.375, AreaSE: math.NaN(), CX: 10.75, CY: -1.75, MinX: 9.75, MinY: -2.125, MaxX: 11.75, MaxY: -1.375, Perimeter: 5.5, Inscribed: 0.375, Stats: stat()},
		{ID: "1", Layer: 1, Pixels: 6, Area: 0.75, AreaSE: 0.125, CX: 10.5, CY: -1.75, MinX: 9.75, MinY: -2.125, MaxX: 11.25, MaxY: -1.375, Perimeter: 4.5, Inscribed: 0.25, Stats: stat()},
	}
	return s
}

func saved(t testing.TB) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "night.survey")
	if err := os.Mkdir(dir, 0o777); err != nil {
		t.Fatal(err)
	}
	if err := Save(dir, small()); err != nil {
		t.Fatal(err)
	}
	return dir
}

// text prints a survey so that NaN equals NaN.
func text(s *Survey) string {
	c := *s
	c.Quantities = nil
	c.Recipe = json.RawMessage(strings.Join(strings.Fields(string(s.Recipe)), ""))
	var regions []string
	for _, r := range c.Regions {
		r.Cells = nil
		regions = append(regions, fmt.Sprintf("%+v", r))
	}
	c.Regions = nil
	return fmt.Sprintf("%+v\n%v", c, regions)
}

func TestSaveLoad(t *testing.T) {
	dir := saved(t)
	got, err := Load(dir)
	if err != nil {
		t.Fatal(err)
	}
	if a, b := text(got), text(small()); a != b {
		t.Errorf("read back:\n%s\nwant\n%s", a, b)
	}
	if !reflect.DeepEqual(got.Learned, small().Learned) {
		t.Errorf("learned: %+v", got.Learned)
	}
	again := filepath.Join(t.TempDir(), "again")
	if err := os.Mkdir(again, 0o777); err != nil {
		t.Fatal(err)
	}
	if err := Save(again, got); err != nil {
		t.Fatal(err)
	}
	err = filepath.WalkDir(dir, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		name, _ := filepath.Rel(dir, path)
		a, _ := os.ReadFile(path)
		b, err := os.ReadFile(filepath.Join(again, name))
		if err != nil || !bytes.Equal(a, b) {
			t.Errorf("%s: read and written again it differs: %v", name, err)
		}
		return nil
	})
	if err != nil {
		t.Error(err)
	}
}

// TestLoadRefuses damages a survey: the error names the file, and nothing panics or takes memory by what a header claims.
func TestLoadRefuses(t *testing.T) {
	replace := func(name, old, new string) func(dir string) error {
		return func(dir string) error {
			path := filepath.Join(dir, name)
			data, err := os.ReadFile(path)
			if err != nil {
				return err
			}
			if !bytes.Contains(data, []byte(old)) {
				return fmt.Errorf("%s does not hold %q", name, old)
			}
			return os.WriteFile(path, bytes.Replace(data, []byte(old), []byte(new), 1), 0o666)
		}
	}
	cut := func(name string, n int64) func(string) error {
		return func(dir string) error { return os.Truncate(filepath.Join(dir, name), n) }
	}
	remove := func(name string) func(string) error {
		return func(dir string) error { return os.Remove(filepath.Join(dir, name)) }
	}
	for what, test := range map[string]struct {
		do   func(string) error
		want string // in the message
	}{
		"no folder":          {func(dir string) error { return os.RemoveAll(dir) }, "night.survey"},
		"no survey.json":     {remove("survey.json"), "survey.json"},
		"empty survey.json":  {cut("survey.json", 0), "survey.json"},
		"half survey.json":   {cut("survey.json", 400), "survey.json"},
		"no map":             {remove("maps/g_position.npy"), "g_position.npy"},
		"half a map":         {cut("maps/g_position.npy", 140), "g_position.npy"},
		"map's header only":  {cut("maps/g_position_se.npy", 128), "g_position_se.npy"},
		"another shape":      {replace("maps/g_position.npy", "(3, 4,)", "(4, 3,)"), "g_position.npy"},
		"a huge shape":       {replace("maps/g_position.npy", "(3, 4,), }         ", "(9999999999, 4,), }"), "g_position.npy"},
		"a huge grid":        {replace("survey.json", `"cols": 4`, `"cols": 4000000000`), "survey.json"},
		"a negative grid":    {replace("survey.json", `"cols": 4`, `"cols": -4`), "survey.json"},
		"a name with a path": {replace("survey.json", `"g_position": {`, `"../../g_position": {`), "survey.json"},
		"no positions":       {remove("maps/x.npy"), "x.npy"},
	} {
		dir := saved(t)
		if err := test.do(dir); err != nil {
			t.Errorf("%s: %v", what, err)
			continue
		}
		s, err := Load(dir)
		t.Logf("%s: %v", what, err)
		if err == nil || !strings.Contains(err.Error(), test.want) || s != nil {
			t.Errorf("%s: %v", what, err)
		}
	}
}

func TestNumPyReadsTheMaps(t *testing.T) {
	python := "/usr/bin/python3"
	if exec.Command(python, "-c", "import numpy").Run() != nil {
		t.Skip("needs Python with NumPy")
	}
	dir := saved(t)
	script := `
import json, sys, numpy
d = sys.argv[1]
q = json.load(open(d + "/survey.json"))
v = numpy.load(d + "/maps/g_position.npy", allow_pickle=False)
x = numpy.load(d + "/maps/x.npy", allow_pickle=False)
print(v.shape, v.dtype, numpy.isnan(v).sum(), numpy.isnan(v[1, 1]), x[0, 0], x[0, 3], q["grid"]["cols"])`
	cmd := exec.Command(python, "-c", script, dir)
	cmd.Dir = t.TempDir()
	out, err := cmd.CombinedOutput()
	if want := "(3, 4) float32 1 True 10.0 11.5 4\n"; err != nil || string(out) != want {
		t.Errorf("%s %v, want %s", out, err, want)
	}
}

func TestWriteFileIsWholeOrNothing(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "a.txt")
	if err := WriteFile(path, func(w io.Writer) error { _, err := io.WriteString(w, "first"); return err }); err != nil {
		t.Fatal(err)
	}
	full := errors.New("disk full")
	err := WriteFile(path, func(w io.Writer) error {
		io.WriteString(w, strings.Repeat("second", 10000))
		return full
	})
	if !errors.Is(err, full) {
		t.Error(err)
	}
	if data, _ := os.ReadFile(path); string(data) != "first" {
		t.Errorf("after a failure the file holds %.20q", data)
	}
	if left, _ := os.ReadDir(dir); len(left) != 1 {
		t.Errorf("left behind: %v", left)
	}
	if err := WriteFile(filepath.Join(path, "b.txt"), func(io.Writer) error { return nil }); err == nil || !strings.Contains(err.Error(), "a.txt") {
		t.Errorf("a file below a file: %v", err)
	}
}

func TestFolder(t *testing.T) {
	dir := t.TempDir()
	final := filepath.Join(dir, "night.survey")
	f, err := Create(final, false)
	if err != nil {
		t.Fatal(err)
	}
	if f.Path() != final+".partial" {
		t.Errorf("work goes on in %s", f.Path())
	}
	if err := Save(f.Path(), small()); err != nil {
		t.Fatal(err)
	}
	if err := f.Commit(); err != nil {
		t.Fatal(err)
	}
	if _, err := Load(final); err != nil {
		t.Error(err)
	}
	if _, err := Create(final, false); err == nil || !strings.Contains(err.Error(), "--force") {
		t.Errorf("the survey is there: %v", err)
	}
	f, err = Create(final, true)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Load(final); err != nil {
		t.Errorf("the old survey must stay until the new one is complete: %v", err)
	}
	if err := f.Abandon(); err != nil {
		t.Fatal(err)
	}
	if left, _ := os.ReadDir(dir); len(left) != 1 {
		t.Errorf("left behind: %v", left)
	}
}

func ExampleLoad() {
	dir, err := os.MkdirTemp("", "")
	if err != nil {
		fmt.Println(err)
		return
	}
	defer os.RemoveAll(dir)
	if err := Save(dir, small()); err != nil {
		fmt.Println(err)
		return
	}
	s, err := Load(dir)
	if err != nil {
		fmt.Println(err)
		return
	}
	q := s.Map("g_position")
	fmt.Println(s.Grid.Cols, s.Grid.Rows, q.Unit, len(q.Values), len(s.Regions))
	// Output: 4 3 cm-1 12 2
}
