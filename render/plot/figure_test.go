package plot

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"image"
	"image/color"
	"image/png"
	"math"
	"strings"
	"testing"
)

var (
	white = color.NRGBA{255, 255, 255, 255}
	black = color.NRGBA{0, 0, 0, 255}
	red   = color.NRGBA{200, 0, 0, 255}
)

// ink is the sum of darkness over the picture, in pixels.
func ink(img *image.RGBA, area image.Rectangle) float64 {
	sum := 0.0
	for y := area.Min.Y; y < area.Max.Y; y++ {
		for x := area.Min.X; x < area.Max.X; x++ {
			sum += 1 - float64(img.RGBAAt(x, y).G)/255
		}
	}
	return sum
}

func TestDiscArea(t *testing.T) {
	// Ten pixels to the mm: a disc of 3 mm covers pi 30^2 pixels; its 32 corners cover sin(2 pi/32) 16/pi of that. The rasteriser
	// works to a 256th of a pixel, of which the rim has about 190.
	f := &Figure{W: 10, H: 10, Ground: white, DPI: 254}
	f.Add(&Path{Rings: [][]Point{Circle(Point{5.03, 4.98}, 3)}, Closed: true, Fill: black})
	img := f.Image()
	want := 16 * math.Sin(2*math.Pi/32) * 900
	if got := ink(img, img.Bounds()); !(math.Abs(got-want) <= 1.5) {
		t.Errorf("disc covers %.2f pixels, want %.2f", got, want)
	}
}

func TestLinesAreSharp(t *testing.T) {
	f := &Figure{W: 10, H: 10, Ground: white, DPI: 254}
	f.Line(black, 0.2, Point{1.03, 5.04}, Point{9, 5.04})
	img := f.Image()
	for y := range 100 {
		if c := img.RGBAAt(50, y); c.R != 0 && c.R != 255 {
			t.Errorf("row %d is grey %d: a level line should lie on whole pixels", y, c.R)
		}
	}
	if got := ink(img, image.Rect(50, 0, 51, 100)); got != 2 {
		t.Errorf("a line of 0.2 mm is %g pixels thick, want 2", got)
	}
}

func TestRasterOrientation(t *testing.T) {
	// Row 0 is the lowest: cell 0 is the lower left one.
	f := &Figure{W: 2, H: 2, Ground: white, DPI: 254}
	f.Add(&Raster{Box: Box{0, 0, 2, 2}, Cols: 2, Rows: 2, Cells: []color.NRGBA{red, {}, {}, black}})
	img := f.Image()
	for _, p := range []struct {
		x, y int
		want color.RGBA
	}{{5, 15, color.RGBA(red)}, {15, 5, color.RGBA(black)}, {5, 5, color.RGBA(white)}, {15, 15, color.RGBA(white)}} {
		if got := img.RGBAAt(p.x, p.y); got != p.want {
			t.Errorf("pixel %d, %d is %v, want %v", p.x, p.y, got, p.want)
		}
	}
}

func TestRasterMixes(t *testing.T) {
	// 300 cells on 100 pixels, every third black: mixed, all pixels are a third dark; unmixed, each pixel is one of the cells.
	cells := make([]color.NRGBA, 300)
	for i := range cells {
		if cells[i] = white; i%3 == 0 {
			cells[i] = black
		}
	}
	for _, mix := range []bool{true, false} {
		f := &Figure{W: 10, H: 1, Ground: white, DPI: 254}
		f.Add(&Raster{Box: Box{0, 0, 10, 1}, Cols: 300, Rows: 1, Cells: cells, Mix: mix})
		img := f.Image()
		for x := range 100 {
			if c := img.RGBAAt(x, 5).R; mix && c != 170 || !mix && c != 0 && c != 255 {
				t.Fatalf("mix %v: pixel %d is %d", mix, x, c)
			}
		}
	}
}

func TestTextBoxHoldsItsInk(t *testing.T) {
	for _, upward := range []bool{false, true} {
		for _, align := range []Align{Left, Middle, Right} {
			f := &Figure{W: 40, H: 40, Ground: white, DPI: 254}
			b := f.Text(Text{At: Point{20, 20}, String: "Åqg 10¹² cm⁻²", Size: 3, Align: align, Upward: upward, Color: black})
			img := f.Image()
			inside := image.Rect(int(b.X*10), int(b.Y*10), int(math.Ceil((b.X+b.W)*10)), int(math.Ceil((b.Y+b.H)*10)))
			all, in := ink(img, img.Bounds()), ink(img, inside)
			if !(all > 100) || !(all-in < 1e-6) {
				t.Errorf("align %d, upward %v: %.2f of %.2f pixels of ink lie outside the box", align, upward, all-in, all)
			}
			// The box is tight: no edge is more than a pixel away from ink.
			if tight := inside.Inset(2); !(ink(img, tight) < all) {
				t.Errorf("align %d, upward %v: the box is wider than the ink", align, upward)
			}
		}
	}
}

func TestScriptsAreRaised(t *testing.T) {
	plain, raised := Text{String: "1", Size: 10}, Text{String: "¹", Size: 10}
	if p, r := plain.Box(), raised.Box(); !(math.Abs(r.H-scriptSize*p.H) < 1e-9 && r.Y+r.H < p.Y+p.H-3) {
		t.Errorf("superscript %v beside figure %v", r, p)
	}
}

func TestPNGChunks(t *testing.T) {
	f := &Figure{W: 20, H: 10, Ground: white, DPI: 300, Meta: [][2]string{{"Software", "bandgrid 1.0"}, {"Title", "D′ position"}}}
	f.Text(Text{At: Point{2, 5}, String: "x", Size: 3, Color: black})
	var b bytes.Buffer
	if err := f.PNG(&b); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(bytes.NewReader(b.Bytes()))
	if err != nil {
		t.Fatal(err)
	}
	if got := img.Bounds().Size(); got != image.Pt(236, 118) {
		t.Errorf("20 x 10 mm at 300 dpi is %v pixels", got)
	}
	found := map[string]string{}
	for data := b.Bytes()[8:]; len(data) >= 12; {
		n := binary.BigEndian.Uint32(data)
		body := data[8 : 8+n]
		if crc32.ChecksumIEEE(data[4:8+n]) != binary.BigEndian.Uint32(data[8+n:]) {
			t.Errorf("chunk %s: wrong check sum", data[4:8])
		}
		found[string(data[4:8])] = string(body)
		data = data[12+n:]
	}
	if p := found["pHYs"]; len(p) != 9 || binary.BigEndian.Uint32([]byte(p)) != 11811 || p[8] != 1 {
		t.Errorf("pHYs is %x, want 11811 per metre twice", p)
	}
	if found["tEXt"] != "Software\x00bandgrid 1.0" {
		t.Errorf("tEXt is %q", found["tEXt"])
	}
	if !strings.HasSuffix(found["iTXt"], "D′ position") {
		t.Errorf("iTXt is %q", found["iTXt"])
	}
}

func TestScaleKeepsProportion(t *testing.T) {
	f := &Figure{W: 40, H: 20, Ground: white}
	before := f.Text(Text{At: Point{10, 10}, String: "text", Size: 3, Color: black})
	f.Scale(0.5)
	after := f.Texts()[0].Box()
	for i, pair := range [][2]float64{{before.X, after.X}, {before.Y, after.Y}, {before.W, after.W}, {before.H, after.H}} {
		if !(math.Abs(pair[1]-pair[0]/2) < 1e-12) {
			t.Errorf("side %d: %g becomes %g", i, pair[0], pair[1])
		}
	}
}

func TestWrap(t *testing.T) {
	for _, width := range []float64{5, 12, 40, 200} {
		text := "density of something unpronounceablylongwithoutablank in words"
		lines := Wrap(text, 3, width, true)
		for _, line := range lines {
			if w := TextWidth(line, 3, true); !(w <= width) {
				t.Errorf("%q is %.1f wide, more than %g", line, w, width)
			}
		}
		if got := strings.ReplaceAll(strings.Join(lines, ""), " ", ""); got != strings.ReplaceAll(text, " ", "") {
			t.Errorf("width %g: %q lost something", width, lines)
		}
	}
}
