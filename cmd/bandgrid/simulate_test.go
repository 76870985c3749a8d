package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"encoding/binary"
	"encoding/json"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"github.com/klauspost/compress/zstd"

	"bandgrid/fit/synth"
	"bandgrid/mapio/table"
)

const exampleScene = "../../examples/flake/scene.json"

// smallScene writes a scene of 12 x 9 pixels, of which text is a further part, and returns its path.
func smallScene(t *testing.T, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "scene.json")
	scene := `{"seed": 4, "stage": {"cols": 12, "rows": 9, "order": "serpentine", "jitter_um": 0.05` + text + `},
		"instrument": {"channels": 150, "spot_um": 1, "background_counts": 200, "read_noise_e": 3}, "spikes": {"per_pixel": 0.3},
		"objects": [{"layers": 1, "disc": {"x": 5, "y": 4, "radius": 3}, "d_g_ratio": 0.5}]}`
	if err := os.WriteFile(path, []byte(scene), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// simulated runs the verb and returns what it writes to standard output.
func simulated(t *testing.T, args ...string) []byte {
	t.Helper()
	var out, log bytes.Buffer
	if code := run(context.Background(), append([]string{"simulate"}, args...), streams{out: &out, err: &log}); code != exitDone {
		t.Fatalf("%q: exit %d: %s", args, code, log.String())
	}
	return out.Bytes()
}

func TestSimulateExampleIsTheShippedRun(t *testing.T) {
	if runtime.GOARCH != "amd64" {
		t.Skip("elsewhere fused multiply-adds may move a count across a rounding step")
	}
	packed, err := os.ReadFile("../../examples/flake/overnight.txt.zst")
	if err != nil {
		t.Fatal(err)
	}
	d, err := zstd.NewReader(nil)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Close()
	shipped, err := d.DecodeAll(packed, nil)
	if err != nil {
		t.Fatal(err)
	}
	if made := simulated(t, exampleScene, "-o", "-"); !bytes.Equal(made, shipped) {
		t.Errorf("the scene makes %d bytes that differ from the %d shipped; make the run again", len(made), len(shipped))
	}
}

func TestSimulateDoesNotDependOnWorkers(t *testing.T) {
	scene := smallScene(t, "")
	one := simulated(t, scene, "-o", "-", "--workers", "1")
	for _, n := range []string{"2", "8"} {
		if !bytes.Equal(simulated(t, scene, "-o", "-", "--workers", n), one) {
			t.Errorf("%s workers write another run than one", n)
		}
	}
	if bytes.Equal(simulated(t, scene, "-o", "-", "--seed", "5"), one) {
		t.Error("another seed writes the same run")
	}
}

func TestSimulateReadsBackAndTruthMatches(t *testing.T) {
	path := smallScene(t, `, "missing": 0.1, "repeated": 0.1`)
	scene, err := synth.Load(path)
	if err != nil {
		t.Fatal(err)
	}
	for _, form := range [][]string{nil, {"--long"}, {"--decimal-comma", "--separator", "semicolon", "--crlf"}} {
		dir := t.TempDir()
		truth := filepath.Join(dir, "truth")
		text := simulated(t, append([]string{path, "-o", "-", "--truth", truth}, form...)...)
		sc, err := table.Open(bytes.NewReader(text), table.Options{})
		if err != nil {
			t.Fatalf("%v: %v", form, err)
		}
		if sc.Laser != 532 || len(sc.Axis) != 150 {
			t.Fatalf("%v: laser %g, %d channels", form, sc.Laser, len(sc.Axis))
		}
		layers, hits := npyFloats(t, filepath.Join(truth, "layer_number.npy")), npyFloats(t, filepath.Join(truth, "spikes.npy"))
		g := scene.NewGenerator()
		counts := make([]float32, 150)
		last := map[int]int{} // pixel that is the last in its cell
		for i := range scene.Len() {
			row, col := scene.Cell(i)
			last[row*12+col] = i
		}
		n := 0
		for block, err := range sc.Blocks(context.Background()) {
			if err != nil {
				t.Fatal(err)
			}
			for p, err := range block.Pixels() {
				if err != nil {
					t.Fatal(err)
				}
				x, y, want := g.Pixel(n, counts)
				if !(math.Abs(p.X-x) <= 5.1e-4 && math.Abs(p.Y-y) <= 5.1e-4) { // three decimals
					t.Fatalf("%v: pixel %d at %g, %g, want %g, %g", form, n, p.X, p.Y, x, y)
				}
				for k, v := range counts {
					if p.Counts[k] != v {
						t.Fatalf("%v: pixel %d channel %d: %g, want %g", form, n, k, p.Counts[k], v)
					}
				}
				if cell := want.Row*12 + want.Col; last[cell] == n &&
					(layers[cell] != float32(want.LayerNumber) || hits[cell] != float32(len(want.Spikes))) {
					t.Fatalf("%v: the truth of cell %d is %g layers and %g channels hit, want %d and %d", form, cell, layers[cell], hits[cell],
						want.LayerNumber, len(want.Spikes))
				}
				n++
			}
		}
		if n != scene.Len() || len(last) == 108 || n == len(last) {
			t.Errorf("%v: %d pixels read, %d made, in %d cells", form, n, scene.Len(), len(last))
		}
		for cell := range 108 {
			if _, measured := last[cell]; measured == math.IsNaN(float64(layers[cell])) {
				t.Errorf("cell %d: measured is %v, truth %g", cell, measured, layers[cell])
			}
		}
		checkTruthFolder(t, truth)
	}
}

// npyFloats reads the data of a float32 array and checks where it begins.
func npyFloats(t *testing.T, path string) []float32 {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	start := 10 + int(binary.LittleEndian.Uint16(data[8:]))
	if !bytes.HasPrefix(data, []byte("\x93NUMPY\x01\x00")) || start%64 != 0 || data[start-1] != '\n' ||
		!strings.Contains(string(data[:start]), "'shape': (9, 12)") || len(data) != start+4*108 {
		t.Fatalf("%s: %d bytes, header %q", path, len(data), data[:start])
	}
	values := make([]float32, 108)
	if err := binary.Read(bytes.NewReader(data[start:]), binary.LittleEndian, values); err != nil {
		t.Fatal(err)
	}
	return values
}

func checkTruthFolder(t *testing.T, folder string) {
	t.Helper()
	data, err := os.ReadFile(filepath.Join(folder, "truth.json"))
	if err != nil {
		t.Fatal(err)
	}
	var about struct {
		Seed       uint64
		Quantities map[string]struct{ Unit string }
		Scene      map[string]any
	}
	if err := json.Unmarshal(data, &about); err != nil {
		t.Fatal(err)
	}
	if about.Seed != 4 || about.Quantities["g_position"].Unit != "cm-1" || about.Scene["objects"] == nil {
		t.Errorf("truth.json says %+v", about)
	}
	for name := range about.Quantities {
		if _, err := os.Stat(filepath.Join(folder, name+".npy")); err != nil {
			t.Errorf("truth.json names %s: %v", name, err)
		}
	}
	spikes, err := os.ReadFile(filepath.Join(folder, "spikes.csv"))
	if err != nil || bytes.Count(spikes, []byte("\n")) < 10 {
		t.Errorf("spikes.csv: %v, %d lines", err, bytes.Count(spikes, []byte("\n")))
	}
	if left, _ := filepath.Glob(filepath.Join(folder, "*.partial")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

func TestSimulateCompressesByName(t *testing.T) {
	scene, dir := smallScene(t, ""), t.TempDir()
	want := simulated(t, scene, "-o", "-")
	for _, name := range []string{"run.txt", "run.txt.gz", "run.txt.zst"} {
		path := filepath.Join(dir, name)
		simulated(t, scene, "-o", path)
		f, err := os.Open(path)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		var r io.Reader = f
		switch filepath.Ext(name) {
		case ".gz":
			r, err = gzip.NewReader(f) // the standard library's: another implementation than the writer's
		case ".zst":
			r, err = zstd.NewReader(f)
		}
		if err != nil {
			t.Fatal(err)
		}
		if got, err := io.ReadAll(r); err != nil || !bytes.Equal(got, want) {
			t.Errorf("%s: %v, %d bytes, want %d", name, err, len(got), len(want))
		}
	}
}

func TestSimulateTornRun(t *testing.T) {
	whole := simulated(t, smallScene(t, ""), "-o", "-")
	torn := simulated(t, smallScene(t, `, "cut": 0.5`), "-o", "-")
	lines := bytes.Count(torn, []byte("\n"))
	if head := 3; lines != head+54 || torn[len(torn)-1] == '\n' || !bytes.HasPrefix(whole, torn) {
		t.Errorf("%d full lines, want 3 of header and 54; the last byte is %q", lines, torn[len(torn)-1])
	}
}

func TestSimulateRefusals(t *testing.T) {
	scene, dir := smallScene(t, ""), t.TempDir()
	there := filepath.Join(dir, "there.txt")
	bad := filepath.Join(dir, "bad.json")
	if err := errors.Join(os.WriteFile(there, []byte("kept"), 0o644), os.WriteFile(bad, []byte(`{"sead": 1}`), 0o644)); err != nil {
		t.Fatal(err)
	}
	for _, test := range []struct {
		args []string
		code int
		want string
	}{
		{[]string{scene}, exitUsage, "-o RUN"},
		{[]string{"-o", "-"}, exitUsage, "scene file"},
		{[]string{scene, "-o", "-", "--separator", "comma", "--decimal-comma"}, exitUsage, "do not go together"},
		{[]string{scene, "-o", "-", "--separator", "dot"}, exitUsage, "dot"},
		{[]string{scene, "-o", "-", "--workers", "0"}, exitUsage, "workers"},
		{[]string{bad, "-o", "-"}, exitFailed, "sead"},
		{[]string{filepath.Join(dir, "none.json"), "-o", "-"}, exitFailed, "none.json"},
		{[]string{scene, "-o", there}, exitFailed, "--force"},
		{[]string{scene, "-o", "-", "--truth", dir}, exitFailed, "--force"},
		{[]string{scene, "-o", filepath.Join(dir, "no", "such", "run.txt")}, exitFailed, "no such"},
	} {
		var log bytes.Buffer
		code := run(context.Background(), append([]string{"simulate"}, test.args...), streams{out: io.Discard, err: &log})
		if code != test.code || !strings.Contains(log.String(), test.want) {
			t.Errorf("%q: exit %d, want %d; says %q, which should name %q", test.args, code, test.code, log.String(), test.want)
		}
	}
	if kept, _ := os.ReadFile(there); string(kept) != "kept" {
		t.Errorf("the file that was there now holds %d bytes", len(kept))
	}
	// Interrupted: nothing is left.
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	gone := filepath.Join(dir, "gone.txt")
	if code := run(ctx, []string{"simulate", scene, "-o", gone}, streams{out: io.Discard, err: io.Discard}); code != exitInterrupted {
		t.Errorf("interrupted: exit %d, want %d", code, exitInterrupted)
	}
	if left, _ := filepath.Glob(filepath.Join(dir, "gone*")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}
