package line

import (
	"encoding/csv"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"
)

// reference reads a table of testdata/scipy: the numbers of each row.
func reference(t *testing.T, name string) [][]float64 {
	t.Helper()
	f, err := os.Open("../../testdata/scipy/" + name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) < 2001 {
		t.Fatalf("%s: %d rows, expected a header and at least 2000", name, len(rows))
	}
	var out [][]float64
	for _, row := range rows[1:] {
		v := make([]float64, len(row))
		for i, field := range row {
			if v[i], err = strconv.ParseFloat(field, 64); err != nil && math.Abs(v[i]) > 1 { // below the least double: 0
				t.Fatalf("%s: %v", name, err)
			}
		}
		out = append(out, v)
	}
	return out
}

// relative returns |got/want-1|. Below the normal numbers, where doubles lose digits, an error of one least double counts as none.
func relative(got, want float64) float64 {
	d := math.Abs(got - want)
	if math.Abs(want) < 0x1p-1022 && d <= math.SmallestNonzeroFloat64 {
		return 0
	}
	if d == 0 {
		return 0
	}
	return d / math.Abs(want)
}

// worst keeps the largest error and where it was; NaN is larger than anything.
type worst struct {
	err   float64
	where []float64
}

func (w *worst) add(err float64, where ...float64) {
	if !(err <= w.err) && !math.IsNaN(w.err) {
		w.err, w.where = err, where
	}
}

func TestFaddeevaAgainstMpmathAndSciPy(t *testing.T) {
	// 20-digit values of mpmath. The bound is the one that Faddeeva's doc states, 45 units in the last place: arithmetic with
	// about 30 roundings and sums that cancel up to sixfold.
	const bound = 1e-14
	var re, im, sciRe, sciIm worst
	for _, row := range reference(t, "faddeeva.csv") {
		x, y := row[0], row[1]
		got := Faddeeva(complex(x, y))
		re.add(relative(real(got), row[2]), x, y)
		im.add(relative(imag(got), row[3]), x, y)
		sciRe.add(relative(real(got), row[4]), x, y)
		sciIm.add(relative(imag(got), row[5]), x, y)
		if mirror := Faddeeva(complex(-x, y)); mirror != cmplx.Conj(got) {
			t.Errorf("w(%g+%gi) = %v, mirrored %v", x, y, got, mirror)
		}
	}
	t.Logf("largest relative errors, real and imaginary part: %.2e at %g, %.2e at %g", re.err, re.where, im.err, im.where)
	if !(re.err <= bound) || !(im.err <= bound) {
		t.Errorf("largest relative errors %.2e at %g and %.2e at %g, bound %g", re.err, re.where, im.err, im.where, bound)
	}
	// wofz itself is off by 1.8e-14 and 1.2e-13 (head of the table).
	t.Logf("from wofz: %.2e at %g, %.2e at %g", sciRe.err, sciRe.where, sciIm.err, sciIm.where)
	if !(sciRe.err <= 1.9e-14+bound) || !(sciIm.err <= 1.2e-13+bound) {
		t.Errorf("from wofz: %.2e at %g and %.2e at %g", sciRe.err, sciRe.where, sciIm.err, sciIm.where)
	}
}

var sink float64

func BenchmarkFaddeeva(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	for _, test := range []struct {
		name   string
		lo, hi float64
	}{{"inner", 0, 8}, {"14", 8, 16}, {"8", 16, 173}, {"4", 173, 1e6}} {
		x, y := make([]float64, 1024), make([]float64, 1024)
		for i := range x {
			radius, angle := test.lo+(test.hi-test.lo)*r.Float64(), math.Pi/2*r.Float64()
			x[i], y[i] = radius*math.Cos(angle), radius*math.Sin(angle)
		}
		b.Run("value/"+test.name, func(b *testing.B) {
			i := 0
			for b.Loop() {
				sink += real(Faddeeva(complex(x[i&1023], y[i&1023])))
				i++
			}
		})
		b.Run("derivatives/"+test.name, func(b *testing.B) {
			i := 0
			for b.Loop() {
				w, _, _ := faddeeva2(x[i&1023], y[i&1023])
				sink += real(w)
				i++
			}
		})
	}
}
