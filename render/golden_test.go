package render

import (
	"bytes"
	"flag"
	"image"
	"image/png"
	"os"
	"path/filepath"
	"testing"

	"bandgrid/render/plot"
)

var update = flag.Bool("update", false, "rewrite the golden images; then look at them")

// goldens are small figures of all kinds and of the awkward shapes.
func goldens(t *testing.T) map[string]*plot.Figure {
	list := map[string]*plot.Figure{}
	add := func(name string, f *plot.Figure, err error) {
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		f.DPI = 90
		list[name] = f
	}
	for _, s := range samples() {
		switch s.name {
		case "layers", "ratio", "one-row", "one-column", "wide", "tall-layers", "one-pixel", "all-missing", "negative", "huge", "long-name", "points", "small":
			s.opt.WidthMM = min(90, s.opt.width())
			s.opt.Outlines = true
			f, err := Map(s.survey, s.quantity, s.opt)
			add(s.name, f, err)
			if s.name == "small" {
				f.DPI = 600
			}
		case "position":
			f, err := Histogram(s.survey, s.quantity, Options{WidthMM: 80})
			add("histogram", f, err)
		}
	}
	f, err := Overview(flake(60, 45), StandardQuantities, Options{})
	add("overview", f, err)
	return list
}

func TestGolden(t *testing.T) {
	for name, f := range goldens(t) {
		file := filepath.Join("testdata", name+".png")
		if *update {
			var b bytes.Buffer
			if err := f.PNG(&b); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(file, b.Bytes(), 0o666); err != nil {
				t.Fatal(err)
			}
			continue
		}
		data, err := os.ReadFile(file)
		if err != nil {
			t.Error(err)
			continue
		}
		want, err := png.Decode(bytes.NewReader(data))
		if err != nil {
			t.Errorf("%s: %v", file, err)
			continue
		}
		compare(t, name, f.Image(), want)
	}
}

// compare allows for the rounding of other processors: edges may be a little lighter or darker, nothing may move. A text that
// moves by half a pixel changes about one pixel in a hundred by more than a tenth.
func compare(t *testing.T, name string, got, want image.Image) {
	t.Helper()
	if got.Bounds() != want.Bounds() {
		t.Errorf("%s: %v pixels, the golden image has %v", name, got.Bounds().Size(), want.Bounds().Size())
		return
	}
	size := got.Bounds().Size()
	different := 0
	for y := range size.Y {
		for x := range size.X {
			r, g, b, _ := got.At(x, y).RGBA()
			r0, g0, b0, _ := want.At(x, y).RGBA()
			if apart(r, r0) || apart(g, g0) || apart(b, b0) {
				different++
			}
		}
	}
	if limit := size.X * size.Y / 2000; different > limit {
		t.Errorf("%s: %d pixels differ by more than a tenth, at most %d may", name, different, limit)
	}
}

func apart(a, b uint32) bool { return max(a, b)-min(a, b) > 65535/10 }

func TestGoldenSeesAMovedText(t *testing.T) {
	f, err := Map(flake(60, 45), "layer_number", Options{WidthMM: 90, DPI: 90})
	if err != nil {
		t.Fatal(err)
	}
	before := f.Image()
	for _, text := range f.Texts() {
		text.At.X += 0.15 // half a pixel
	}
	after := f.Image()
	different := 0
	for i := 0; i < len(before.Pix); i += 4 {
		if apart(uint32(before.Pix[i])*257, uint32(after.Pix[i])*257) {
			different++
		}
	}
	if limit := len(before.Pix) / 4 / 2000; different <= limit {
		t.Errorf("only %d pixels change, %d would pass", different, limit)
	}
}
