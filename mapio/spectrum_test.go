package mapio

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"bandgrid/mapio/table"
)

func TestOpenSpectrum(t *testing.T) {
	dir := t.TempDir()
	write := func(name string, data []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, data, 0o644); err != nil {
			t.Fatal(err)
		}
		return path
	}
	two := []byte("# laser 532 nm\n100\t20\n102\t30\n104\t26\n")
	for name, data := range map[string][]byte{"two.txt": two, "two.txt.gz": gzipped(two)} {
		s, err := OpenSpectrum(t.Context(), write(name, data), Options{})
		if err != nil || s.Pixels != 1 || s.Laser != 532 || s.Counts[1] != 30 {
			t.Errorf("%s: %+v, %v", name, s, err)
		}
	}
	s, err := OpenSpectrum(t.Context(), "-", Options{Stdin: bytes.NewReader(two)})
	if err != nil {
		t.Fatal(err)
	}
	on := s.On([]float64{99, 100, 101, 103, 104, 105})
	for i, want := range []float64{math.NaN(), 20, 25, 28, 26, math.NaN()} {
		if !alike(on[i], want) {
			t.Errorf("on another axis: %v", on)
		}
	}
	// Of a run the mean is taken.
	text := sample(table.Style{}, 4, 3, 20)
	run := readAll(bytes.NewReader(text), Options{})
	m, err := OpenSpectrum(t.Context(), write("run.txt", text), Options{})
	if err != nil || m.Pixels != 12 {
		t.Fatalf("%+v, %v", m, err)
	}
	for k := range m.Counts {
		sum := 0.0
		for _, p := range run.pixels {
			sum += float64(p.Counts[k]) / 12
		}
		if !(math.Abs(float64(m.Counts[k])-sum) <= 1e-3) {
			t.Errorf("channel %d: mean %g, want %g", k, m.Counts[k], sum)
		}
	}
	for name, data := range map[string]string{"prose.txt": "not a spectrum\n", "empty.txt": ""} {
		if _, err := OpenSpectrum(t.Context(), write(name, []byte(data)), Options{}); err == nil || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
