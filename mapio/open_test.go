package mapio

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/table"
)

// A run is what reading gives: pixels, those that could not be read with their errors, and what ended the stream.
type run struct {
	axis   scan.Axis
	pixels []scan.Pixel
	bad    []string
	ended  error
	refuse error // the run could not be opened
}

// readAll opens and reads a run.
func readAll(r io.Reader, opt Options) run {
	opt.Stdin = r
	sc, err := Open("-", opt)
	if err != nil {
		return run{refuse: err}
	}
	defer sc.Close()
	got := run{axis: sc.Axis}
	for block, err := range sc.Blocks(context.Background()) {
		if err != nil {
			got.ended = err
			break
		}
		for p, err := range block.Pixels() {
			c := *p
			c.Counts = append([]float32(nil), p.Counts...)
			if err != nil {
				got.bad = append(got.bad, err.Error())
				c.Counts = nil
			}
			got.pixels = append(got.pixels, c)
		}
	}
	return got
}

// equal tells whether two readings gave the same. NaN is the same as NaN; lines may differ.
func (a run) equal(b run) bool {
	if (a.refuse == nil) != (b.refuse == nil) || (a.ended == nil) != (b.ended == nil) || len(a.pixels) != len(b.pixels) || len(a.bad) != len(b.bad) || len(a.axis) != len(b.axis) {
		return false
	}
	for i, p := range a.pixels {
		q := b.pixels[i]
		if !alike(p.X, q.X) || !alike(p.Y, q.Y) || len(p.Counts) != len(q.Counts) || p.Open != q.Open {
			return false
		}
		for k, v := range p.Counts {
			if !alike(float64(v), float64(q.Counts[k])) {
				return false
			}
		}
	}
	for i, v := range a.axis {
		if v != b.axis[i] {
			return false
		}
	}
	return true
}

func alike(a, b float64) bool { return a == b || a != a && b != b }

// sample writes a small map as text.
func sample(style table.Style, cols, rows, channels int) []byte {
	r := rand.New(rand.NewPCG(1, 9))
	axis := make([]float64, channels)
	for i := range axis {
		axis[i] = 1200 + 1.5*float64(i)
	}
	var b bytes.Buffer
	style.Comments = append([]string{"laser 532 nm"}, style.Comments...)
	w := table.NewWriter(&b, axis, style)
	counts := make([]float32, channels)
	for i := range cols * rows {
		for k := range counts {
			counts[k] = float32(200 + r.IntN(100))
		}
		if err := w.Write(float64(i%cols)*0.5, float64(i/cols)*0.5-3, counts); err != nil {
			panic(err)
		}
	}
	if err := w.Flush(); err != nil {
		panic(err)
	}
	return b.Bytes()
}

func gzipped(data []byte) []byte {
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	w.Write(data)
	w.Close()
	return b.Bytes()
}

func zstded(data []byte) []byte {
	w, err := zstd.NewWriter(nil)
	if err != nil {
		panic(err)
	}
	defer w.Close()
	return w.EncodeAll(data, nil)
}

// forms are the same map in several forms.
func forms() map[string][]byte {
	wide := sample(table.Style{}, 9, 7, 40)
	return map[string][]byte{
		"wide":       wide,
		"long":       sample(table.Style{Long: true}, 9, 7, 40),
		"semicolons": sample(table.Style{Separator: ';', DecimalComma: true}, 9, 7, 40),
		"commas":     sample(table.Style{Separator: ',', CRLF: true}, 9, 7, 40),
		"gzip":       gzipped(wide),
		"zstd":       zstded(wide),
		"members":    append(gzipped(wide[:len(wide)/3]), gzipped(wide[len(wide)/3:])...),
		"frames":     append(zstded(wide[:len(wide)/3]), zstded(wide[len(wide)/3:])...),
	}
}

func TestTheFormDoesNotMatter(t *testing.T) {
	want := readAll(bytes.NewReader(forms()["wide"]), Options{})
	if want.refuse != nil || want.ended != nil || len(want.pixels) != 63 || len(want.bad) > 0 || len(want.axis) != 40 {
		t.Fatalf("%d pixels, %v, %v, bad %q", len(want.pixels), want.refuse, want.ended, want.bad)
	}
	for name, data := range forms() {
		for arrival, r := range map[string]io.Reader{
			"at once":      bytes.NewReader(data),
			"byte by byte": iotest.OneByteReader(bytes.NewReader(data)),
			"halves":       iotest.HalfReader(bytes.NewReader(data)),
			"with the end": iotest.DataErrReader(bytes.NewReader(data)),
		} {
			if got := readAll(r, Options{}); !got.equal(want) {
				t.Errorf("%s, %s: %d pixels, %v, %v, bad %q", name, arrival, len(got.pixels), got.refuse, got.ended, got.bad)
			}
		}
	}
}

func TestProgressAndDigest(t *testing.T) {
	dir := t.TempDir()
	for name, data := range forms() {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, data, 0o644); err != nil {
			t.Fatal(err)
		}
		for _, whole := range []bool{true, false} {
			sc, err := Open(path, Options{})
			if err != nil {
				t.Fatal(err)
			}
			for block, err := range sc.Blocks(t.Context()) {
				if err != nil {
					t.Fatal(err)
				}
				if !whole {
					break
				}
				for range block.Pixels() {
				}
			}
			read, size := sc.Progress()
			if size != int64(len(data)) || read > size || whole && read != size {
				t.Errorf("%s, whole %v: %d of %d bytes read, the file has %d", name, whole, read, size, len(data))
			}
			sum := sha256.Sum256(data)
			if got := sc.Digest(); whole && got != hex.EncodeToString(sum[:]) {
				t.Errorf("%s: digest %s, want %x", name, got, sum)
			}
			if err := sc.Close(); err != nil {
				t.Errorf("%s: close: %v", name, err)
			}
		}
	}
	// A pipe has no size.
	sc, err := Open("-", Options{Stdin: io.MultiReader(bytes.NewReader(forms()["wide"]))})
	if err != nil {
		t.Fatal(err)
	}
	defer sc.Close()
	if _, size := sc.Progress(); size != -1 {
		t.Errorf("the size of a pipe is %d", size)
	}
}

func TestCancel(t *testing.T) {
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	line := []byte("0\t0" + strings.Repeat("\t200", 40) + "\n")
	head := forms()["wide"]
	head = head[:bytes.LastIndexByte(head[:len(head)-1], '\n')+1]
	endless := io.MultiReader(bytes.NewReader(head), endlessly(line)) // would go on for ever
	sc, err := Open("-", Options{Stdin: endless})
	if err != nil {
		t.Fatal(err)
	}
	defer sc.Close()
	blocks := 0
	var ended error
	for _, err := range sc.Blocks(ctx) {
		if err != nil {
			ended = err
			break
		}
		if blocks++; blocks == 3 {
			stop()
		}
		if blocks > 50 {
			t.Fatal("it does not stop")
		}
	}
	if !errors.Is(ended, context.Canceled) {
		t.Errorf("after %d blocks: %v", blocks, ended)
	}
}

type endlessly []byte

func (e endlessly) Read(p []byte) (n int, err error) {
	for n+len(e) <= len(p) {
		n += copy(p[n:], e)
	}
	if n == 0 {
		n = copy(p, e) // never: buffers are larger than a line
	}
	return n, nil
}

// TestRefusals lists what people will hand in and what they read then. The messages are the point: look at them with -v.
func TestRefusals(t *testing.T) {
	wide := string(forms()["wide"])
	var png bytes.Buffer
	png.WriteString("\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR")
	png.Write(make([]byte, 300))
	lines := strings.SplitAfter(wide, "\n")
	for _, test := range []struct {
		name string
		data []byte
		want string // part of the message
	}{
		{"empty", nil, "the file is empty"},
		{"blank lines", []byte("\n\n  \n"), ""},
		{"a picture", png.Bytes(), "binary"},
		{"zeros", make([]byte, 4000), ""},
		{"prose", []byte("The night was long.\nNothing was measured.\n"), "no rows of numbers"},
		{"a header only", []byte(lines[0] + lines[1] + lines[2]), "header"},
		{"gzip of nothing", gzipped(nil), "empty"},
		{"gzip head only", gzipped([]byte(wide))[:8], "gzip"},
		{"gzip of noise", append([]byte{0x1f, 0x8b, 8, 0, 0, 0, 0, 0, 0, 3}, []byte(wide)...), "gzip"},
		{"zstd of noise", append([]byte{0x28, 0xb5, 0x2f, 0xfd}, []byte(wide)...), "zstd"},
		{"zip", []byte("PK\x03\x04 and so on"), "unpack"},
		{"xz", []byte("\xfd7zXZ\x00 and so on"), "unpack"},
		{"numbers without an axis", []byte("1\t2\t3\t4\n2\t3\t4\t5\n3\t4\t5\t6\n"), ""},
		{"a line without end", bytes.Repeat([]byte("1234 "), 40<<20), "line"},
		{"a bomb", gzipped(bytes.Repeat([]byte("1"), 300<<20)), ""},
		{"UTF-16", utf16(wide), ""},
	} {
		start := time.Now()
		got := readAll(bytes.NewReader(test.data), Options{})
		err := got.refuse
		if err == nil {
			err = got.ended
		}
		var input *scan.InputError
		if !errors.As(err, &input) {
			t.Errorf("%s: %v, %d pixels: a refusal must be an InputError", test.name, err, len(got.pixels))
			continue
		}
		t.Logf("%s: %v", test.name, err)
		if !strings.HasPrefix(err.Error(), "standard input: ") || !strings.Contains(err.Error(), test.want) || input.Remedy == "" {
			t.Errorf("%s: %v: %q or the remedy is missing", test.name, err, test.want)
		}
		if time.Since(start) > time.Minute { // a hang, not a benchmark
			t.Errorf("%s: took %v", test.name, time.Since(start))
		}
	}
}

func utf16(s string) []byte {
	b := []byte{0xff, 0xfe}
	for _, c := range []byte(s) {
		b = append(b, c, 0)
	}
	return b
}

// TestCutCompression has compressed runs that break off: the pixels before the break come, then an error that says so.
func TestCutCompression(t *testing.T) {
	wide := sample(table.Style{}, 40, 40, 200)
	for name, data := range map[string][]byte{"gzip": gzipped(wide), "zstd": zstded(wide)} {
		got := readAll(bytes.NewReader(data[:len(data)*2/3]), Options{})
		var input *scan.InputError
		if got.refuse != nil || !errors.As(got.ended, &input) || len(got.pixels) < 200 || len(got.pixels) > 1599 {
			t.Errorf("%s: %d pixels, then %v, %v", name, len(got.pixels), got.ended, got.refuse)
		}
		t.Log(got.ended)
	}
}

// TestDamage changes a valid run in many ways: there is a clear refusal, or most pixels are as they were.
func TestDamage(t *testing.T) {
	whole := forms()
	r := rand.New(rand.NewPCG(7, 7))
	for name, data := range whole {
		want := readAll(bytes.NewReader(data), Options{})
		for range 300 {
			spoilt := append([]byte(nil), data...)
			at, what := r.IntN(len(spoilt)), ""
			switch r.IntN(5) {
			case 0:
				what = "a byte changed"
				spoilt[at] = byte(r.Uint32())
			case 1:
				what = "a byte lost"
				spoilt = append(spoilt[:at], spoilt[at+1:]...)
			case 2:
				what = "a stretch doubled"
				end := min(at+r.IntN(200), len(spoilt))
				spoilt = append(append(append([]byte(nil), spoilt[:end]...), spoilt[at:end]...), spoilt[end:]...)
			case 3:
				what = "the end lost"
				spoilt = spoilt[:at]
			case 4:
				what = "a stretch of zeros"
				clear(spoilt[at:min(at+r.IntN(100), len(spoilt))])
			}
			got := readAll(bytes.NewReader(spoilt), Options{})
			for _, err := range []error{got.refuse, got.ended} {
				if _, ok := errors.AsType[*scan.InputError](err); err != nil && !ok {
					t.Errorf("%s, %s at %d: %v is no InputError", name, what, at, err)
				}
			}
			if got.refuse != nil || got.ended != nil || what == "the end lost" {
				continue
			}
			changed := 0
			for i, p := range got.pixels {
				if i >= len(want.pixels) || p.X != want.pixels[i].X {
					changed++
				}
			}
			// A stretch that is doubled may hold a whole line or more.
			if lost := len(want.pixels) - len(got.pixels); lost > 3 || lost < -60 || len(got.bad) > 40 {
				t.Errorf("%s, %s at %d: %d pixels, before %d, %d bad, %d moved", name, what, at, len(got.pixels), len(want.pixels), len(got.bad), changed)
			}
		}
	}
}

func TestOddSizes(t *testing.T) {
	for _, test := range []struct{ cols, rows, channels int }{{1, 1, 30}, {2, 1, 1}, {1, 9, 5}, {9, 1, 2}} {
		for name, style := range map[string]table.Style{"wide": {}, "long": {Long: true}} {
			got := readAll(bytes.NewReader(sample(style, test.cols, test.rows, test.channels)), Options{})
			if got.refuse == nil && got.ended == nil {
				if len(got.pixels) != test.cols*test.rows || len(got.axis) != test.channels || len(got.bad) > 0 {
					t.Errorf("%s %+v: %d pixels of %d channels, bad %q", name, test, len(got.pixels), len(got.axis), got.bad)
				}
				continue
			}
			// Two or three numbers in all may be anything; but then it says so.
			if _, ok := errors.AsType[*scan.InputError](got.refuse); !ok || test.channels >= 5 {
				t.Errorf("%s %+v: %v, %v", name, test, got.refuse, got.ended)
			}
		}
	}
}

func TestStrangeValues(t *testing.T) {
	text := strings.Split(string(sample(table.Style{}, 5, 4, 12)), "\n")
	for i, l := range text {
		if strings.HasPrefix(l, "0\t-3") || strings.HasPrefix(l, "0.5\t-3\t") {
			cells := strings.Split(l, "\t")
			cells[3], cells[4], cells[5], cells[6], cells[7], cells[8] = "NaN", "nan", "", "inf", "1e300", "-5"
			text[i] = strings.Join(cells, "\t")
		}
	}
	got := readAll(strings.NewReader(strings.Join(text, "\n")), Options{})
	if got.refuse != nil || len(got.pixels) != 20 {
		t.Fatalf("%v, %d pixels", got.refuse, len(got.pixels))
	}
	if len(got.bad) > 2 {
		t.Errorf("bad: %q", got.bad)
	}
	for _, p := range got.pixels {
		for _, v := range p.Counts {
			if math.IsInf(float64(v), 0) {
				t.Logf("an infinite count stays for the fit to leave out")
			}
		}
	}
}

func FuzzOpen(f *testing.F) {
	n := 0
	for _, data := range forms() {
		f.Add(data)
		n++
	}
	for _, style := range []table.Style{{}, {Long: true}, {Separator: ';', DecimalComma: true}, {Wavelength: true}, {Long: true, NoHeader: true}} {
		f.Add(sample(style, 3, 2, 4))
		n++
	}
	if n == 0 {
		f.Fatal("no seeds")
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		whole := readAll(bytes.NewReader(data), Options{Laser: 532})
		for _, err := range []error{whole.refuse, whole.ended} {
			if _, ok := errors.AsType[*scan.InputError](err); err != nil && !ok {
				t.Errorf("%v: a refusal must be an InputError", err)
			}
		}
		slow := readAll(iotest.OneByteReader(bytes.NewReader(data)), Options{Laser: 532})
		if !whole.equal(slow) {
			t.Errorf("the result depends on how the bytes arrive: %v, %v", whole.refuse, slow.refuse)
		}
	})
}

func ExampleOpen() {
	const text = "x\ty\t1580\t1581.5\t1583\n0\t0\t210\t280\t205\n0.5\t0\t208\t290\t204\n0\t0.5\t211\t270\t206\n0.5\t0.5\t207\t285\t203\n"
	sc, err := Open("-", Options{Laser: 532, Stdin: strings.NewReader(text)})
	if err != nil {
		fmt.Println(err)
		return
	}
	defer sc.Close()
	fmt.Println(sc.Format, sc.Axis)
	for block, err := range sc.Blocks(context.Background()) {
		if err != nil {
			fmt.Println(err)
			return
		}
		for p, err := range block.Pixels() { // in a worker
			fmt.Println(p.X, p.Y, p.Counts, err)
		}
	}
	// Output:
	// wide text [1580 1581.5 1583]
	// 0 0 [210 280 205] <nil>
	// 0.5 0 [208 290 204] <nil>
	// 0 0.5 [211 270 206] <nil>
	// 0.5 0.5 [207 285 203] <nil>
}

// BenchmarkOpen reads a map of 1024 channels with one worker, in each form.
func BenchmarkOpen(b *testing.B) {
	wide := sample(table.Style{}, 60, 40, 1024)
	for name, data := range map[string][]byte{"wide": wide, "long": sample(table.Style{Long: true}, 60, 40, 1024), "gzip": gzipped(wide), "zstd": zstded(wide)} {
		b.Run("form="+name, func(b *testing.B) {
			b.SetBytes(int64(len(data)))
			b.ReportAllocs()
			for b.Loop() {
				sc, err := Open("-", Options{Stdin: bytes.NewReader(data)})
				if err != nil {
					b.Fatal(err)
				}
				n := 0
				for block, err := range sc.Blocks(b.Context()) {
					if err != nil {
						b.Fatal(err)
					}
					for _, err := range block.Pixels() {
						if err != nil {
							b.Fatal(err)
						}
						n++
					}
				}
				sc.Close()
				if n != 2400 {
					b.Fatalf("%d pixels", n)
				}
			}
			b.ReportMetric(float64(b.N*2400)/b.Elapsed().Seconds(), "pixels/s")
		})
	}
}
