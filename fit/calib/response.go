package calib

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"bandgrid/mapio/scan"
)

// A Response is the spectrometer's relative sensitivity against the shift, 1 at its middle.
type Response struct {
	From   string    `json:"from"` // what it comes from
	Shifts []float64 `json:"shifts_cm-1"`
	Values []float64 `json:"values"`
	SEs    []float64 `json:"relative_se"` // common to neighbouring shifts: they do not average out
}

// smoothness is the order of the polynomial through the logarithm of a measured response: a spectrometer's sensitivity bends
// once or twice over its range. What is finer, etalon fringes for instance, is not corrected.
const smoothness = 6

// FromGlass makes a response from the spectrum of a certified glass, dark counts taken off, on the corrected axis. The glass must
// be the one for the laser line, within 3 nm.
func FromGlass(g Glass, axis scan.Axis, counts []float32, laser float64) (*Response, error) {
	if !(math.Abs(laser-g.Laser) <= 3) {
		return nil, fmt.Errorf("%s is certified for %g nm, the laser line is %g nm", g.Name, g.Laser, laser)
	}
	x, y := usable(axis, counts)
	var shifts, logs, ses []float64
	for i, v := range x {
		rate, se := g.Rate(v)
		if rate > 0.02 && y[i] > 0 {
			shifts, logs, ses = append(shifts, v), append(logs, math.Log(y[i]/rate)), append(ses, se)
		}
	}
	if len(shifts) < 50 {
		return nil, fmt.Errorf("only %d channels of the glass's spectrum lie in its certified range, %g to %g cm-1, with counts above the dark level", len(shifts), g.From, g.To)
	}
	fit, rms, err := smooth(shifts, logs)
	if err != nil {
		return nil, err
	}
	// The channels' own noise averages out; what the polynomial cannot follow does not.
	r := &Response{From: fmt.Sprintf("%s (%s)", g.Name, g.Standing)}
	middle := fit(shifts[len(shifts)/2])
	step := max(1, len(shifts)/200)
	for i := 0; i < len(shifts); i += step {
		r.Shifts = append(r.Shifts, shifts[i])
		r.Values = append(r.Values, math.Exp(fit(shifts[i])-middle))
		r.SEs = append(r.SEs, math.Hypot(ses[i], rms/math.Sqrt(float64(len(shifts))/(smoothness+1))))
	}
	return r, r.Check()
}

// smooth fits a polynomial to y over x and returns it with the rms of what is left.
func smooth(x, y []float64) (f func(float64) float64, rms float64, err error) {
	mid, half := (x[0]+x[len(x)-1])/2, (x[len(x)-1]-x[0])/2
	a := mat.NewDense(len(x), smoothness+1, nil)
	for i, v := range x {
		t := 1.0
		for k := range smoothness + 1 {
			a.Set(i, k, t)
			t *= (v - mid) / half
		}
	}
	var qr mat.QR
	qr.Factorize(a)
	var c mat.VecDense
	if err := qr.SolveVecTo(&c, false, mat.NewVecDense(len(y), y)); err != nil {
		return nil, 0, fmt.Errorf("the glass's spectrum cannot be smoothed: %w", err)
	}
	f = func(v float64) float64 {
		t, sum := (v-mid)/half, 0.0
		for k := smoothness; k >= 0; k-- {
			sum = sum*t + c.AtVec(k)
		}
		return sum
	}
	for i, v := range x {
		d := y[i] - f(v)
		rms += d * d
	}
	return f, math.Sqrt(rms / float64(len(x)-smoothness-1)), nil
}

// Check returns an error where a response that was read makes no sense.
func (r *Response) Check() error {
	n := len(r.Shifts)
	if n < 2 || len(r.Values) != n || len(r.SEs) != n {
		return fmt.Errorf("%d shifts, %d values, %d errors; at least 2, and as many of each, are needed", n, len(r.Values), len(r.SEs))
	}
	for i, v := range r.Values {
		if i > 0 && !(r.Shifts[i] > r.Shifts[i-1]) {
			return fmt.Errorf("shift %g does not follow %g", r.Shifts[i], r.Shifts[i-1])
		}
		if !(v > 1e-3 && v < 1e3) {
			return fmt.Errorf("the response at %g cm-1 is %g", r.Shifts[i], v)
		}
		if !(r.SEs[i] >= 0 && r.SEs[i] < 1) {
			return fmt.Errorf("the relative error of the response at %g cm-1 is %g", r.Shifts[i], r.SEs[i])
		}
	}
	return nil
}

// ErrRange says that a response does not reach a shift.
var ErrRange = errors.New("outside the range of the response")

// At returns the response at a shift, cm-1, and its relative standard error, by linear interpolation; ErrRange outside.
func (r *Response) At(shift float64) (value, relative float64, err error) {
	n := len(r.Shifts)
	if !(shift >= r.Shifts[0] && shift <= r.Shifts[n-1]) {
		return math.NaN(), math.NaN(), fmt.Errorf("%w: %.0f cm-1; it reaches from %.0f to %.0f", ErrRange, shift, r.Shifts[0], r.Shifts[n-1])
	}
	k := 1
	for k < n-1 && r.Shifts[k] < shift {
		k++
	}
	t := (shift - r.Shifts[k-1]) / (r.Shifts[k] - r.Shifts[k-1])
	return r.Values[k-1] + t*(r.Values[k]-r.Values[k-1]), r.SEs[k-1] + t*(r.SEs[k]-r.SEs[k-1]), nil
}

// On returns the response of each channel of an axis, NaN where it is not known: such channels cannot be corrected.
func (r *Response) On(axis scan.Axis) []float64 {
	out := make([]float64, len(axis))
	for i, v := range axis {
		out[i], _, _ = r.At(v)
	}
	return out
}

// RatioSE returns the relative standard error that the response gives a ratio of bands at two shifts, cm-1: common to all pixels.
func (r *Response) RatioSE(a, b float64) (float64, error) {
	_, x, err := r.At(a)
	if err != nil {
		return math.NaN(), err
	}
	_, y, err := r.At(b)
	return math.Hypot(x, y), err
}
