package line

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/diff/fd"
	"gonum.org/v1/gonum/integrate/quad"
)

func value(x float64, p ...float64) float64 {
	y := make([]float64, 1)
	Lorentzian{}.Eval(y, nil, []float64{x}, p)
	return y[0]
}

func TestHalfMaximum(t *testing.T) {
	// By definition: the height at the position, half of it half a width away, a fifth a width away.
	for _, test := range []struct{ x, want float64 }{{1582, 400}, {1582 + 7, 200}, {1582 - 7, 200}, {1582 + 14, 80}} {
		if got := value(test.x, 400, 1582, 14); !(math.Abs(got-test.want) <= 1e-12*400) {
			t.Errorf("at %g: %g, want %g", test.x, got, test.want)
		}
	}
}

func TestAreaIsHalfPiHeightWidth(t *testing.T) {
	// The integral, by a substitution that makes the range finite: x = 1582 + 7 tan s.
	want := quad.Fixed(func(s float64) float64 {
		c := math.Cos(s)
		return value(1582+7*math.Tan(s), 400, 1582, 14) * 7 / (c * c)
	}, -math.Pi/2, math.Pi/2, 40, nil, 0)
	if got := (Lorentzian{}).Area([]float64{400, 1582, 14}); !(math.Abs(got-want) <= 1e-9*want) {
		t.Errorf("area %g, integral %g", got, want)
	}
}

func TestDerivatives(t *testing.T) {
	p := []float64{400, 1582, 14}
	x := []float64{1200, 1570, 1581.9, 1582, 1585, 1700}
	y, d := make([]float64, len(x)), [Len][]float64{}
	for k := range d {
		d[k] = make([]float64, len(x))
	}
	Lorentzian{}.Eval(y, d[:], x, p)
	for i, v := range x {
		want := fd.Gradient(nil, func(q []float64) float64 { return value(v, q...) }, p, &fd.Settings{Formula: fd.Central, Step: 1e-4})
		for k := range d {
			if !(math.Abs(d[k][i]-want[k]) <= 1e-6*(1+math.Abs(want[k]))) {
				t.Errorf("at %g: derivative %d is %g, by differences %g", v, k, d[k][i], want[k])
			}
		}
		if y[i] != value(v, p...) {
			t.Errorf("at %g: the value depends on whether derivatives are wanted", v)
		}
	}
}
