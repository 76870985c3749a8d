package table

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

func TestWrittenWide(t *testing.T) {
	var b bytes.Buffer
	w := NewWriter(&b, []float64{1200, 1201.25}, Style{Separator: ';', DecimalComma: true, CRLF: true, Comments: []string{"laser: 532 nm"}})
	w.Write(0.5, -1, []float32{10, 2.5})
	w.Write(1, 2, []float32{float32(math.NaN()), 16777217})
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	want := "# laser: 532 nm\r\n# axis: Raman shift (cm-1)\r\nx (um);y (um);1200,000;1201,250\r\n" +
		"0,500;-1,000;10;2,5\r\n1,000;2,000;nan;16777216\r\n" // 1<<24 + 1 is no float32
	if b.String() != want {
		t.Errorf("got\n%s\nwant\n%s", b.String(), want)
	}
}

func TestWrittenLong(t *testing.T) {
	e := NewEncoder([]float64{551.2, 552.0625}, Style{Long: true, Wavelength: true, AxisDecimals: 4, PositionDecimals: 1, CountsDecimals: 2})
	text := string(e.AppendPixel(e.AppendHeader(nil), 3, 4, []float32{-7, 0.125}))
	want := "x (um)\ty (um)\twavelength (nm)\tcounts\n3.0\t4.0\t551.2000\t-7.00\n3.0\t4.0\t552.0625\t0.12\n"
	if text != want {
		t.Errorf("got %q\nwant %q", text, want)
	}
}

// What is written reads back as the same pixels, in each style.
func TestWrittenReadsBack(t *testing.T) {
	s := newSample(5, 4, 37)
	s.counts[3][5] = float32(math.NaN())
	s.counts[4][0] = -12.25
	s.counts[5][1] = 1e7
	for _, style := range []Style{
		{}, {CRLF: true}, {Separator: ';', DecimalComma: true}, {Separator: ','}, {Separator: ' '}, {Long: true},
		{Long: true, Separator: ',', CRLF: true}, {Long: true, DecimalComma: true}, {Long: true, NoHeader: true},
	} {
		style.AxisDecimals = 10 // the sample's axis steps are multiples of 1/16384
		style.Comments = []string{"sample: flake, folded"}
		t.Run(fmt.Sprintf("%+v", style), func(t *testing.T) {
			var b bytes.Buffer
			w := NewWriter(&b, s.axis, style)
			for i, counts := range s.counts {
				if err := w.Write(s.x[i], s.y[i], counts); err != nil {
					t.Fatal(err)
				}
			}
			if err := w.Flush(); err != nil {
				t.Fatal(err)
			}
			g := read(t, b.String(), Options{})
			if len(g.pixels) != len(s.counts) || len(g.Axis) != len(s.axis) {
				t.Fatalf("%d pixels of %d channels, want %d of %d", len(g.pixels), len(g.Axis), len(s.counts), len(s.axis))
			}
			for k, v := range s.axis {
				if !(math.Abs(g.Axis[k]-v) <= 1e-9) { // ten decimals of 14 bits
					t.Fatalf("channel %d at %v, want %v", k, g.Axis[k], v)
				}
			}
			for i, p := range g.pixels {
				if g.errs[i] != nil || p.X != s.x[i] || p.Y != s.y[i] {
					t.Fatalf("pixel %d at %g, %g (%v), want %g, %g", i, p.X, p.Y, g.errs[i], s.x[i], s.y[i])
				}
				for k, v := range s.counts[i] {
					if !sameFloat(p.Counts[k], v) {
						t.Fatalf("pixel %d channel %d: %v, want %v", i, k, p.Counts[k], v)
					}
				}
			}
		})
	}
}

func TestAppendSmall(t *testing.T) {
	for _, n := range []uint32{0, 9, 10, 99, 100, 12345, 1<<24 - 1} {
		if got := string(appendSmall(nil, n)); got != fmt.Sprint(n) {
			t.Errorf("%d is written as %s", n, got)
		}
	}
}

type full struct{}

func (full) Write([]byte) (int, error) { return 0, errors.New("disk full") }

func TestWriteErrorStays(t *testing.T) {
	w := NewWriter(full{}, []float64{1, 2}, Style{})
	if err := w.Flush(); err == nil {
		t.Fatal("no error from a full disk")
	}
	if err := w.Write(0, 0, []float32{1, 2}); err == nil || !strings.Contains(err.Error(), "full") {
		t.Errorf("the next pixel gives %v, want the same error", err)
	}
}

func TestPixelsAllocateNothing(t *testing.T) {
	e := NewEncoder([]float64{1, 2, 3}, Style{Long: true})
	buf := make([]byte, 0, 1<<10)
	if n := testing.AllocsPerRun(100, func() { buf = e.AppendPixel(buf[:0], 1, 2, []float32{1, 2.5, 3}) }); n != 0 {
		t.Errorf("%g allocations per pixel", n)
	}
}
