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
	// wofz itself is off by 5.5e-14 and 1.2e-13 (head of the table).
	t.Logf("from wofz: %.2e at %g, %.2e at %g", sciRe.err, sciRe.where, sciIm.err, sciIm.where)
	if !(sciRe.err <= 5.5e-14+bound) || !(sciIm.err <= 1.2e-13+bound) {
		t.Errorf("from wofz: %.2e at %g and %.2e at %g", sciRe.err, sciRe.where, sciIm.err, sciIm.where)
	}
}

func TestFaddeevaDerivativesOnTheRealAxis(t *testing.T) {
	// There Re w = exp(-x²), so Re w' = -2x exp(-x²) and Re w" = (4x²-2) exp(-x²); the poles alone give 0. Inside, the recurrences
	// are exact but for roundings; outside, x² is rounded once more in the reference: 26² · 2^-53.
	for x := 0.1; x < 26; x += 0.07 {
		e := math.Exp(-x * x)
		w, w1, w2 := faddeeva2(x, 0)
		if !(relative(real(w), e) <= 1e-13) || !(relative(real(w1), -2*x*e) <= 1e-13) || !(math.Abs(real(w2)-(4*x*x-2)*e) <= 1e-13*(4*x*x+2)*e) {
			t.Errorf("at %g: real parts %g, %g, %g, want %g, %g, %g", x, real(w), real(w1), real(w2), e, -2*x*e, (4*x*x-2)*e)
		}
	}
}

func TestFaddeevaOutside(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, z := range []complex128{complex(1, -1e-9), complex(1e9, -1), complex(nan, 1), complex(1, nan), complex(20, nan), complex(nan, nan)} {
		if w := Faddeeva(z); real(w) == real(w) || imag(w) == imag(w) {
			t.Errorf("w(%v) = %v, want NaN", z, w)
		}
	}
	for _, z := range []complex128{complex(inf, 1), complex(-inf, 0), complex(0, inf), complex(1, inf)} {
		if w := Faddeeva(z); cmplx.Abs(w) != 0 {
			t.Errorf("w(%v) = %v, want 0", z, w)
		}
	}
}

func TestGaussHermiteMoments(t *testing.T) {
	// A rule of n nodes integrates t^(2m) exp(-t²) exactly up to 2m = 2n-2; the weights here are 2/π times those of half the nodes.
	for _, rule := range []poles{hermite14, hermite8, hermite4} {
		for m := range 2 * len(rule) {
			sum := 0.0
			for _, pole := range rule {
				sum += math.Pi * pole.weight * math.Pow(pole.t2, float64(m))
			}
			if want := math.Gamma(float64(m) + 0.5); !(relative(sum, want) <= 1e-14) { // roundings of powers up to 13
				t.Errorf("%d nodes, moment %d: %g, want %g", 2*len(rule), 2*m, sum, want)
			}
		}
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
