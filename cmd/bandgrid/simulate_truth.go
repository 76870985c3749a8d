package main

import (
	"bufio"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"bandgrid/fit/synth"
)

// A pixelTruth is the truth of a pixel with the stage position that the run reports.
type pixelTruth struct {
	x, y float64
	synth.Truth
}

// truthQuantity is a map of the truth.
type truthQuantity struct {
	Unit        string `json:"unit"`
	Description string `json:"description"`
	name        string
	of          func(*pixelTruth) float64
}

var truthQuantities = func() []truthQuantity {
	q := []truthQuantity{
		{"um", "stage position as reported", "x", func(t *pixelTruth) float64 { return t.x }},
		{"um", "stage position as reported", "y", func(t *pixelTruth) float64 { return t.y }},
		{"", "layer number of the material that fills most of the spot", "layer_number", func(t *pixelTruth) float64 { return float64(t.LayerNumber) }},
		{"", "its share of the spot", "pure_fraction", func(t *pixelTruth) float64 { return t.PureFraction }},
		{"", "share of the spot on film of any kind", "coverage", func(t *pixelTruth) float64 { return t.Coverage }},
		{"", "D over G height", "d_g_ratio", func(t *pixelTruth) float64 { return t.DGRatio }},
		{"nm", "mean distance of defects; infinite without any", "defect_distance", func(t *pixelTruth) float64 { return t.DefectDistance }},
		{"%", "biaxial strain", "strain", func(t *pixelTruth) float64 { return t.Strain }},
		{"1e12 cm-2", "density of holes", "hole_density", func(t *pixelTruth) float64 { return t.HoleDensity }},
		{"cm-1", "by which bands lie higher in the run than these maps say", "drift", func(t *pixelTruth) float64 { return t.Drift }},
		{"", "channels hit by cosmic rays", "spikes", func(t *pixelTruth) float64 { return float64(len(t.Spikes)) }},
	}
	bands := []struct {
		name string
		of   func(*pixelTruth) *synth.BandTruth
	}{
		{"d", func(t *pixelTruth) *synth.BandTruth { return &t.D }},
		{"g", func(t *pixelTruth) *synth.BandTruth { return &t.G }},
		{"dprime", func(t *pixelTruth) *synth.BandTruth { return &t.DPrime }},
		{"2d", func(t *pixelTruth) *synth.BandTruth { return &t.TwoD }},
	}
	for _, b := range bands {
		q = append(q,
			truthQuantity{"cm-1", "without drift", b.name + "_position", func(t *pixelTruth) float64 { return b.of(t).Position }},
			truthQuantity{"cm-1", "FWHM without the instrument's, as one Lorentzian sees it", b.name + "_width", func(t *pixelTruth) float64 { return b.of(t).Width }},
			truthQuantity{"counts", "height times the film's share of the spot", b.name + "_height", func(t *pixelTruth) float64 { return b.of(t).Height }},
			truthQuantity{"counts cm-1", "area, likewise", b.name + "_area", func(t *pixelTruth) float64 { return b.of(t).Area }})
	}
	return q
}()

// truthMaps collects the truth on the grid. Of a repeated pixel the last one stays.
type truthMaps struct {
	rows, cols int
	maps       [][]float32 // one per quantity
	spikes     []spikeHit
}

type spikeHit struct{ pixel, row, col, channel int32 }

func newTruthMaps(scene *synth.Scene) *truthMaps {
	m := &truthMaps{rows: scene.Stage.Rows, cols: scene.Stage.Cols, maps: make([][]float32, len(truthQuantities))}
	for k := range m.maps {
		m.maps[k] = make([]float32, m.rows*m.cols)
		for i := range m.maps[k] {
			m.maps[k][i] = float32(math.NaN())
		}
	}
	return m
}

func (m *truthMaps) put(pixel int, t *pixelTruth) {
	cell := t.Row*m.cols + t.Col
	for k := range truthQuantities {
		m.maps[k][cell] = float32(truthQuantities[k].of(t))
	}
	for _, channel := range t.Spikes {
		m.spikes = append(m.spikes, spikeHit{int32(pixel), int32(t.Row), int32(t.Col), channel})
	}
}

// save writes the maps, truth.json with the scene they were made from, and spikes.csv.
func (m *truthMaps) save(folder string, scene *synth.Scene, source []byte) error {
	if err := os.MkdirAll(folder, 0o755); err != nil {
		return err
	}
	about := make(map[string]truthQuantity, len(truthQuantities))
	for k, q := range truthQuantities {
		about[q.name] = q
		err := writeWhole(filepath.Join(folder, q.name+".npy"), func(w *bufio.Writer) error {
			return writeArray(w, m.rows, m.cols, m.maps[k])
		})
		if err != nil {
			return err
		}
	}
	err := writeWhole(filepath.Join(folder, "spikes.csv"), func(w *bufio.Writer) error {
		fmt.Fprintln(w, "pixel,row,col,channel")
		for _, s := range m.spikes {
			fmt.Fprintf(w, "%d,%d,%d,%d\n", s.pixel, s.row, s.col, s.channel)
		}
		return nil // the buffer keeps its error
	})
	if err != nil {
		return err
	}
	return writeWhole(filepath.Join(folder, "truth.json"), func(w *bufio.Writer) error {
		e := json.NewEncoder(w)
		e.SetIndent("", "  ")
		return e.Encode(map[string]any{
			"program": "bandgrid " + version(), "seed": scene.Seed, "pixels": scene.Len(), "rows": m.rows, "cols": m.cols,
			"quantities": about, "scene": json.RawMessage(source),
		})
	})
}

// writeArray writes a map as a NumPy array, format version 1.0: magic, length of the header, a header that pads to 64 bytes, data.
func writeArray(w *bufio.Writer, rows, cols int, data []float32) error {
	header := fmt.Sprintf("{'descr': '<f4', 'fortran_order': False, 'shape': (%d, %d), }", rows, cols)
	header += strings.Repeat(" ", 63-(10+len(header))%64) + "\n"
	w.WriteString("\x93NUMPY\x01\x00")
	w.Write(binary.LittleEndian.AppendUint16(nil, uint16(len(header))))
	w.WriteString(header)
	return binary.Write(w, binary.LittleEndian, data)
}

// writeWhole writes a file under a temporary name and renames it when it is whole.
func writeWhole(path string, write func(*bufio.Writer) error) error {
	part, err := os.CreateTemp(filepath.Dir(path), filepath.Base(path)+".*.partial")
	if err != nil {
		return err
	}
	defer os.Remove(part.Name()) // finds nothing after success
	w := bufio.NewWriterSize(part, 64<<10)
	if err := write(w); err != nil {
		part.Close()
		return err
	}
	if err := w.Flush(); err != nil {
		part.Close()
		return err
	}
	if err := part.Close(); err != nil {
		return err
	}
	if err := os.Chmod(part.Name(), 0o644); err != nil {
		return err
	}
	return os.Rename(part.Name(), path)
}
