package plot

import (
	"math"
	"strconv"
	"strings"
)

// Ticks are the marks of an axis.
type Ticks struct {
	At    []float64
	Label []string
	Exp   int // labels are values divided by 10 to the Exp; 0 in most cases
}

// MakeTicks puts at most n marks, at least one where n is, on round values from low to high (low < high, both finite): at 1, 2 or
// 5 times a power of ten.
func MakeTicks(low, high float64, n int) Ticks {
	var t Ticks
	if !(high > low) || math.IsInf(high-low, 0) || n < 1 {
		return t
	}
	step := Step((high - low) / float64(max(n, 1)))
	for range 9 { // n is a limit: take larger steps until it holds
		first, last := math.Ceil(low/step-1e-9), math.Floor(high/step+1e-9)
		if count := last - first + 1; count <= float64(n) && count >= 1 {
			break
		} else if count < 1 { // no round value of this step inside
			step = Step(step / 2.1)
			break
		}
		step = Step(step * 1.01)
	}
	if size := max(math.Abs(low), math.Abs(high)); size >= 1e5 || size < 1e-3 {
		t.Exp = int(math.Floor(math.Log10(size)))
	}
	unit := math.Pow10(t.Exp)
	decimals := max(0, -int(math.Floor(math.Log10(step/unit)+1e-9)))
	for k := math.Ceil(low/step - 1e-9); k <= math.Floor(high/step+1e-9); k++ {
		t.At = append(t.At, k*step)
		t.Label = append(t.Label, Number(k*step/unit, decimals))
		if len(t.At) > 50 {
			break
		}
	}
	return t
}

// Step returns the smallest of 1, 2, 5 times a power of ten that is not below least (> 0).
func Step(least float64) float64 {
	power := math.Pow(10, math.Floor(math.Log10(least)))
	for _, m := range []float64{1, 2, 5} {
		if m*power >= least*(1-1e-9) {
			return m * power
		}
	}
	return 10 * power
}

// Number writes v with that many decimals and a proper minus sign; zero has none.
func Number(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		return strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "\u2212", 1)
}

// Axis completes an axis title with its unit and the power of ten of its labels: "G position (cm⁻¹)", "Area (10⁵ counts)".
func (t Ticks) Axis(title, unit string) string {
	unit = Unit(unit)
	if t.Exp != 0 {
		unit = strings.TrimSpace("10" + Superscript(strconv.Itoa(t.Exp)) + " " + unit)
	}
	switch {
	case unit == "":
		return title
	case strings.HasSuffix(title, ")"):
		return title + ", " + unit
	}
	return title + " (" + unit + ")"
}
