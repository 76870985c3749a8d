package synth

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
)

// A Field is a quantity that may vary over an object: value + gradient · (position - at) + a random part, replaced by their own
// value inside areas. In JSON a plain number stands for a constant.
type Field struct {
	Value    float64    `json:"value"`
	Gradient [2]float64 `json:"gradient"` // per um along x and y
	At       [2]float64 `json:"at"`       // um: where the gradient's part is zero
	// Spread is the standard deviation of a random part, Gaussian in value and in its correlation, exp(-d²/(2 length²)).
	Spread float64 `json:"spread"`
	Length float64 `json:"length_um"` // default 2
	Least  float64 `json:"least"`     // with spread or gradient: the field does not go below ... most, where they differ
	Most   float64 `json:"most"`
	Areas  []Area  `json:"areas"` // later ones over earlier ones

	waves []wave
}

// An Area is where a field has a value of its own: an exposed disc, a scratch.
type Area struct {
	Shape
	Value float64 `json:"value"`
}

type wave struct{ kx, ky, phase float64 }

// UnmarshalJSON accepts a number too.
func (f *Field) UnmarshalJSON(data []byte) error {
	if len(data) > 0 && data[0] != '{' {
		var v float64
		if err := decodeStrictly(data, &v); err != nil {
			return err
		}
		*f = Field{Value: v}
		return nil
	}
	type plain Field // without this method
	var p plain
	if err := decodeStrictly(data, &p); err != nil {
		return err
	}
	*f = Field(p)
	return nil
}

// Const returns a field that is the same everywhere.
func Const(value float64) *Field { return &Field{Value: value} }

// prepare draws the random part: 32 plane waves whose wave vectors are drawn from the correlation's spectrum.
func (f *Field) prepare(r *rand.Rand) error {
	setDefault(&f.Length, 2)
	if !(f.Spread >= 0 && f.Length > 0) {
		return errors.New("spread and length_um must not be negative")
	}
	f.waves = nil
	if f.Spread > 0 {
		for range 32 {
			f.waves = append(f.waves, wave{r.NormFloat64() / f.Length, r.NormFloat64() / f.Length, 2 * math.Pi * r.Float64()})
		}
	}
	for i := range f.Areas {
		if err := f.Areas[i].check(); err != nil {
			return fmt.Errorf("area %d: %w", i, err)
		}
	}
	return nil
}

// smooth returns the field without its areas.
func (f *Field) smooth(x, y float64) float64 {
	v := f.Value + f.Gradient[0]*(x-f.At[0]) + f.Gradient[1]*(y-f.At[1])
	if f.waves != nil {
		sum := 0.0
		for _, w := range f.waves {
			sum += math.Cos(w.kx*x + w.ky*y + w.phase)
		}
		v += f.Spread * math.Sqrt(2/float64(len(f.waves))) * sum
	}
	if f.Most > f.Least {
		v = min(f.Most, max(f.Least, v))
	}
	return v
}

// area returns the number of the area that a point lies in, or -1.
func (f *Field) area(x, y float64) int {
	for i := len(f.Areas) - 1; i >= 0; i-- {
		if f.Areas[i].inside(x, y) {
			return i
		}
	}
	return -1
}
