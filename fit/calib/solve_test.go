package calib

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
)

// A bench is a spectrometer whose axis is off.
type bench struct {
	offset, stretch, curvature float64 // cm-1; relative; cm-1 at a thousand cm-1 from the middle
	step                       float64 // cm-1 per channel; 0: 1.2
	from, to                   float64
}

// nominal returns what the spectrometer's axis says at a true shift.
func (b bench) nominal(shift float64) float64 {
	t := (shift - 1800) / 1000
	return shift - b.offset - b.stretch*(shift-1800) - b.curvature*t*t
}

// measure makes the spectrum of a reference: Lorentzian lines of 5 to 9 cm-1 at the published places, each off by its published
// deviation, of heights from 1 to 25, with shot noise. Lamps have lines 2 cm-1 wide.
func (b bench) measure(r *rand.Rand, ref Reference, laser float64) (scan.Axis, []float32) {
	from, to, step := b.from, b.to, b.step
	if to == 0 {
		from, to = 200, 3200
	}
	if step == 0 {
		step = 1.2
	}
	shifts, deviations := ref.Shifts(laser)
	n := int((to - from) / step)
	mean := make([]float64, n)
	var axis scan.Axis
	for i := range n {
		mean[i] = 200
		axis = append(axis, b.nominal(from+step*float64(i)))
	}
	for k, s := range shifts {
		at := s + deviations[k]*r.NormFloat64()
		height, width := 300*math.Exp(3.2*r.Float64()), 5+4*r.Float64()
		if ref.Lamp {
			width = 2
		}
		for i := range n {
			u := 2 * (from + step*float64(i) - at) / width
			mean[i] += height / (1 + u*u)
		}
	}
	counts := make([]float32, n)
	for i, m := range mean {
		counts[i] = float32(m + math.Sqrt(m+25)*r.NormFloat64())
	}
	return axis, counts
}

func (b bench) calibrate(r *rand.Rand, opt Options, names ...string) (*Calibration, error) {
	var list []Measured
	for _, name := range names {
		ref, err := Named(name)
		if err != nil {
			return nil, err
		}
		axis, counts := b.measure(r, ref, opt.Laser)
		lines, err := Find(axis, counts)
		if err != nil {
			return nil, err
		}
		list = append(list, Measured{ref, lines})
	}
	return Solve(list, opt)
}

// TestAxisIsRecovered calibrates an axis that is off by an offset, a stretch and a curvature with each reference that has lines
// on both sides of G and 2D: at both the corrected axis is right within the stated error.
func TestAxisIsRecovered(t *testing.T) {
	const trials = 40
	for _, test := range []struct {
		names []string
		order int
		at    []float64 // shifts that its lines bracket
	}{
		{[]string{"polystyrene"}, 2, []float64{1580, 2690}},
		{[]string{"cyclohexane"}, 2, []float64{1580, 2690}},
		{[]string{"naphthalene"}, 2, []float64{1580, 2690}},
		{[]string{"acetamidophenol"}, 2, []float64{1580, 2690}},
		{[]string{"benzonitrile"}, 2, []float64{1580, 2690}},
		{[]string{"toluene-acetonitrile"}, 2, []float64{1580, 2690}},
		{[]string{"styrylbenzene"}, 1, []float64{1580}},
		{[]string{"neon"}, 3, []float64{1580, 2690}},
		{[]string{"argon"}, 2, []float64{1580}},
		{[]string{"polystyrene", "cyclohexane"}, 3, []float64{1580, 2690}},
	} {
		var sum, sum2, worst, n [2]float64
		failed := 0
		for seed := range uint64(trials) {
			r := rand.New(rand.NewPCG(seed, 5))
			b := bench{offset: 24 * (2*r.Float64() - 1), stretch: 0.004 * (2*r.Float64() - 1), curvature: 3 * (2*r.Float64() - 1)}
			if test.order < 2 {
				b.curvature = 0
			}
			c, err := b.calibrate(r, Options{Order: test.order, Laser: 532, LaserSE: 1e-6}, test.names...)
			if err != nil {
				failed++
				t.Logf("%v, seed %d: %v", test.names, seed, err)
				continue
			}
			for k, at := range test.at {
				if !c.Bracketed(at) { // an end line lost in noise, or too far off; the calibration knows
					continue
				}
				off := c.Shift(b.nominal(at)) - at
				z := off / c.SE(b.nominal(at))
				n[k]++
				sum[k] += z
				sum2[k] += z * z
				worst[k] = max(worst[k], math.Abs(off))
			}
		}
		for k, at := range test.at {
			width := math.Sqrt(sum2[k] / n[k])
			t.Logf("%v order %d at %.0f: pulls %+.2f, %.2f wide; off by %.2f cm-1 at most", test.names, test.order, at, sum[k]/n[k], width, worst[k])
			// The width of 40 pulls scatters by 0.11; some lines are blends, which the fit takes for one.
			if n[k] < 0.8*trials || !(math.Abs(sum[k]/n[k]) <= 4/math.Sqrt(n[k])) || !(width <= 1.4) {
				t.Errorf("%v at %.0f: pulls %+.2f, %.2f wide", test.names, at, sum[k]/n[k], width)
			}
		}
		if failed > 0 {
			t.Errorf("%v: %d of %d trials failed", test.names, failed, trials)
		}
	}
}

// TestAxisIsNotExtrapolated has references without lines around G and 2D: an offset at most, and they say so.
func TestAxisIsNotExtrapolated(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	b := bench{offset: 7, from: 50, to: 3200}
	for _, name := range []string{"silicon", "sulfur", "diamond", "calcite"} {
		c, err := b.calibrate(r, Options{Order: 0, Laser: 532}, name)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if c.Bracketed(1580) || c.Bracketed(2690) {
			t.Errorf("%s brackets G or 2D: %+v", name, c)
		}
		if off := c.Shift(b.nominal(1580)) - 1580; !(math.Abs(off) <= 4*c.SE(1580)) {
			t.Errorf("%s: off by %.2f ± %.2f", name, off, c.SE(1580))
		}
		if _, err := b.calibrate(r, Options{Order: 2, Laser: 532}, name); !errors.Is(err, ErrTooFew) {
			t.Errorf("%s, order 2: %v", name, err)
		}
	}
}

func TestWrongReferenceIsRefused(t *testing.T) {
	polystyrene, _ := Named("polystyrene")
	for seed := range uint64(20) {
		r := rand.New(rand.NewPCG(seed, 9))
		axis, counts := bench{offset: 3}.measure(r, polystyrene, 532)
		lines, err := Find(axis, counts)
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range []string{"cyclohexane", "naphthalene", "neon"} {
			ref, _ := Named(name)
			c, err := Solve([]Measured{{ref, lines}}, Options{Order: 1, Laser: 532})
			if err == nil {
				t.Errorf("seed %d: polystyrene passes for %s: %s, chi2 %.1f", seed, name, c.Summary(), c.Chi2)
			}
		}
	}
	empty := make([]float32, 500)
	r := rand.New(rand.NewPCG(2, 2))
	var axis scan.Axis
	for i := range empty {
		axis, empty[i] = append(axis, 200+float64(i)), float32(100+10*r.NormFloat64())
	}
	if _, err := Find(axis, empty); err == nil || !strings.Contains(err.Error(), "no line") {
		t.Errorf("noise: %v", err)
	}
	if _, err := Named("unobtainium"); err == nil || !strings.Contains(err.Error(), "polystyrene") {
		t.Error(err)
	}
}

// TestLaserLineIsCommon has a lamp and a laser line that is wrong by 0.05 nm: the lamp cannot see that, and the error says so;
// silicon beside it takes it out.
func TestLaserLineIsCommon(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	c, err := bench{offset: 2}.calibrate(r, Options{Order: 2, Laser: 532}, "neon")
	if err != nil {
		t.Fatal(err)
	}
	// 0.1 nm at 532 nm are 1e7/532² 0.1 = 3.5 cm-1.
	if se := c.SE(1580); !(math.Abs(se-3.53) < 0.05) {
		t.Errorf("with a lamp only the error is %.2f cm-1", se)
	}
}

// TestLaserLineIsFound measures neon, the silicon line beside it, with a laser at 532.10 nm that is taken for 532.00.
func TestLaserLineIsFound(t *testing.T) {
	neon, _ := Named("neon")
	silicon, _ := Named("silicon")
	var sum2, n float64
	for seed := range uint64(20) {
		r := rand.New(rand.NewPCG(seed, 8))
		b := bench{offset: 6, stretch: 0.002, curvature: 1}
		var list []Measured
		for _, ref := range []Reference{neon, silicon} {
			axis, counts := b.measure(r, ref, 532.10)
			lines, err := Find(axis, counts)
			if err != nil {
				t.Fatal(err)
			}
			list = append(list, Measured{ref, lines})
		}
		c, err := Solve(list, Options{Order: 2, Laser: 532})
		if err != nil {
			t.Fatal(err)
		}
		// 0.1 nm are 3.53 cm-1: the laser line given is higher by that than the true one, and so are the places of the lines.
		if !(math.Abs(c.LaserOffset-3.53) <= 4*c.LaserOffsetSE+0.02) || !(c.LaserOffsetSE <= 0.3) || c.Common != 0 {
			t.Errorf("seed %d: laser offset %.2f ± %.2f, common %.2f", seed, c.LaserOffset, c.LaserOffsetSE, c.Common)
		}
		for _, at := range []float64{1580, 2690} {
			z := (c.Shift(b.nominal(at)) - at) / c.SE(b.nominal(at))
			sum2 += z * z
			n++
		}
	}
	if w := math.Sqrt(sum2 / n); !(w <= 1.5) {
		t.Errorf("pulls at G and 2D are %.2f wide", w)
	}
}

// TestLinesAgainstPublished checks the table against values of its sources, and shifts of lamp lines against published ones.
func TestLinesAgainstPublished(t *testing.T) {
	for _, test := range []struct {
		name  string
		n     int
		shift float64
	}{
		{"polystyrene", 11, 1001.4}, {"cyclohexane", 11, 2664.4}, {"naphthalene", 8, 1576.6}, {"acetamidophenol", 24, 1561.6}, // ASTM E1840
		{"benzonitrile", 11, 2229.4}, {"styrylbenzene", 7, 1593.1}, {"sulfur", 4, 473.2}, {"toluene-acetonitrile", 10, 2940.8},
		{"silicon", 1, 520.5},
	} {
		ref, err := Named(test.name)
		if err != nil || len(ref.Lines) != test.n {
			t.Errorf("%s: %d lines, %v", test.name, len(ref.Lines), err)
			continue
		}
		shifts, _ := ref.Shifts(532)
		found := false
		for _, s := range shifts {
			found = found || s == test.shift
		}
		if !found {
			t.Errorf("%s has no line at %.1f: %v", test.name, test.shift, shifts)
		}
	}
	// Neon lines at 532.000 nm in air, shifts with the refractive index of air by Appl. Opt. 35, 1566 (1996): 576.44188 nm lies at
	// 1448.8, 585.24878 at 1709.7, 616.35937 at 2572.0, 621.72812 at 2712.0 cm-1 (computed apart).
	neon, _ := Named("neon")
	shifts, _ := neon.Shifts(532)
	for _, want := range []float64{1448.8, 1709.7, 2572.0, 2712.0} {
		best := math.Inf(1)
		for _, s := range shifts {
			best = min(best, math.Abs(s-want))
		}
		if !(best <= 0.05) {
			t.Errorf("no neon line within 0.05 of %.1f", want)
		}
	}
}

func TestCalibrationRoundTrip(t *testing.T) {
	c, err := bench{offset: 5, stretch: 0.002}.calibrate(rand.New(rand.NewPCG(4, 4)), Options{Order: 2, Laser: 532}, "polystyrene")
	if err != nil {
		t.Fatal(err)
	}
	data, err := json.Marshal(c)
	if err != nil {
		t.Fatal(err)
	}
	var back Calibration
	if err := json.Unmarshal(data, &back); err != nil || back.Check() != nil || back.Shift(1580) != c.Shift(1580) || back.SE(2690) != c.SE(2690) {
		t.Errorf("%v %v: %+v", err, back.Check(), back)
	}
	back.Coeffs = back.Coeffs[:1]
	if back.Check() == nil {
		t.Error("a calibration with too few coefficients passes")
	}
	if _, err := (&Calibration{Coeffs: []float64{0, -5000}, Order: 1, Half: 1000}).Apply(scan.Axis{100, 200, 300}); err == nil {
		t.Error("an axis that is turned round passes")
	}
}

func ExampleSolve() {
	polystyrene, err := Named("polystyrene")
	if err != nil {
		fmt.Println(err)
		return
	}
	axis, counts := bench{offset: 4}.measure(rand.New(rand.NewPCG(1, 2)), polystyrene, 532)
	lines, err := Find(axis, counts)
	if err != nil {
		fmt.Println(err)
		return
	}
	c, err := Solve([]Measured{{polystyrene, lines}}, Options{Order: 1})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.0f, bracketed: %v\n", c.Shift(1576), c.Bracketed(1580))
	// Output: 1580, bracketed: true
}
