package synth

import (
	"math"
	"testing"
)

// oneLorentzian finds the width of the Lorentzian that with a linear background comes closest to a sum of Lorentzians, by
// looking: position and width move in steps that halve. For each the rest is linear and found by projection on three functions
// made orthogonal. It shares nothing with fitOne but the window, ±150 cm-1 about the centre of gravity.
func oneLorentzian(parts []part) (width float64) {
	const n = 301
	var y, one, x [n]float64
	var centre, area float64
	for _, p := range parts {
		centre, area = centre+p.height*p.width*p.offset, area+p.height*p.width
	}
	centre /= area
	for i := range n {
		x[i], one[i] = float64(i-n/2), 1
		for _, p := range parts {
			y[i] += p.height / (1 + math.Pow((centre+x[i]-p.offset)/(p.width/2), 2))
		}
	}
	project := func(v, on *[n]float64) float64 {
		var dot, norm float64
		for i := range n {
			dot, norm = dot+v[i]*on[i], norm+on[i]*on[i]
		}
		return dot / norm
	}
	loss := func(x0, w float64) (sum float64) {
		var l [n]float64
		for i := range n {
			l[i] = 1 / (1 + math.Pow((centre+x[i]-x0)/(w/2), 2))
		}
		rest := y
		for _, base := range []*[n]float64{&one, &x} { // orthogonal on a symmetric window
			a, b := project(&l, base), project(&y, base)
			for i := range n {
				l[i] -= a * base[i]
				rest[i] -= b * base[i]
			}
		}
		a := project(&rest, &l)
		for i := range n {
			sum += (rest[i] - a*l[i]) * (rest[i] - a*l[i])
		}
		return sum
	}
	x0, w := centre, 50.0
	for step := 16.0; step > 0.0005; step /= 2 {
		for moved := true; moved; {
			moved = false
			best := loss(x0, w)
			for _, d := range [][2]float64{{step, 0}, {-step, 0}, {0, step}, {0, -step}} {
				if w+d[1] < 1 {
					continue
				}
				if l := loss(x0+d[0], w+d[1]); l < best {
					best, x0, w, moved = l, x0+d[0], w+d[1], true
				}
			}
		}
	}
	return w
}

func TestPublishedWidthsByLayer(t *testing.T) {
	// Small 6, 195 (2010), from memory; graphite is common practice. The search ends with steps of 0.0005
	// in a narrow valley: ten of them.
	for layers, want := range map[int]float64{1: 27.5, 2: 51.7, 3: 56.2, 4: 63.1, 5: 66.1, 10: 70} {
		m := newMakeup(layers, false, want, 0)
		if !(math.Abs(m.width-want) <= 1e-6) {
			t.Errorf("%d layers: a width of %.3f was reached, %g asked for", layers, m.width, want)
		}
		if got := oneLorentzian(m.parts); !(math.Abs(got-want) <= 0.005) {
			t.Errorf("%d layers: a single Lorentzian has width %.3f, published is %g", layers, got, want)
		}
	}
}

func TestBilayerHeights(t *testing.T) {
	// At the offsets of Phys. Rev. Lett. 97, 187401 (2006) heights of 0.25, 0.95, 1 and 0.35 have a width of 51.7 (51.82 on this
	// window; which one was used is not known); so the outer ones, which vary, must come out close to that.
	m := newMakeup(2, false, 51.7, 0)
	if got := m.parts[0].height / m.parts[2].height; !(math.Abs(got-0.25) <= 0.02) {
		t.Errorf("lowest component %.3f of the highest, want about 0.25", got)
	}
	for _, p := range m.parts {
		if p.width != 24 {
			t.Errorf("a component is %g wide, want 24", p.width)
		}
	}
}

func TestSkewKeepsWidth(t *testing.T) {
	m := newMakeup(1, false, 27.5, 0.2)
	if got := oneLorentzian(m.parts); !(math.Abs(got-27.5) <= 0.005) || len(m.parts) != 2 {
		t.Errorf("width %.3f from %d components, want 27.5 from 2", got, len(m.parts))
	}
}

func TestGAgainstFermiEnergy(t *testing.T) {
	// Quadrature of the nonadiabatic model at 300 K, two programs agreeing; two decimals were kept, and the table is interpolated.
	for _, test := range []struct{ n, ef, shift, width float64 }{
		{0, 0, 0, 12.85}, {0.5, 0.091, -0.19, 7.66}, {1, 0.128, 1.56, 3.18}, {2, 0.182, 5.27, 0.51}, {3, 0.222, 7.77, 0.11},
		{5, 0.287, 11.20, 0.01}, {10, 0.406, 16.91, 0}, {20, 0.574, 24.57, 0},
	} {
		if ef := fermiEnergy(test.n); !(math.Abs(ef-test.ef) <= 6e-4) {
			t.Errorf("n=%g: E_F = %.4f eV, want %g", test.n, ef, test.ef)
		}
		shift, width := gDoping(test.n)
		if !(math.Abs(shift-test.shift) <= 0.03) {
			t.Errorf("n=%g: G moves by %.3f, want %g", test.n, shift, test.shift)
		}
		if width *= shiftCoupling / widthCoupling; !(math.Abs(width-test.width) <= 0.03) { // the table has one coupling for both
			t.Errorf("n=%g: width %.3f, want %g", test.n, width, test.width)
		}
	}
	if a, b := firstOf(gDoping(-4)), firstOf(gDoping(4)); a != b {
		t.Errorf("electrons move G by %g, holes by %g: the model has them alike", a, b)
	}
}

func firstOf(a, _ float64) float64 { return a }

func TestDefectRatio(t *testing.T) {
	// The two-radius model at 2.41 eV with the constants of Nano Lett. 11, 3190 (2011); three decimals were kept.
	for _, test := range []struct{ distance, want float64 }{{3, 3.519}, {5, 2.914}, {10, 1.106}, {15, 0.533}, {20, 0.309}} {
		got := defectRatio(test.distance, 2.41)
		if !(math.Abs(got-test.want) <= 1e-3*test.want) {
			t.Errorf("%g nm: D/G = %.4f, want %g", test.distance, got, test.want)
		}
		if test.distance < 3.33 {
			continue // beyond the maximum the inverse is another distance
		}
		if back := defectDistance(got, 2.41); !(math.Abs(back-test.distance) <= 1e-6) {
			t.Errorf("D/G %g: distance %.6f, want %g", got, back, test.distance)
		}
	}
	if l := defectDistance(99, 2.41); !(math.Abs(l-3.33) <= 0.01) {
		t.Errorf("the maximum lies at %.3f nm, want 3.33", l)
	}
}

func TestDamageWidths(t *testing.T) {
	// Guide from memory, Carbon 48, 1592 (2010): what G gains in width; read off figures, hence 30 %.
	for distance, want := range map[float64]float64{7: 5, 5: 12, 3: 35, 2: 75} {
		if got, _ := damage(distance); !(math.Abs(got/want-1) <= 0.3) {
			t.Errorf("%g nm: %.1f cm-1 wider, want about %g", distance, got, want)
		}
	}
}

func TestInterference(t *testing.T) {
	// Enhancement of one layer, 532 nm, against a transfer-matrix program; three decimals were kept.
	for _, test := range []struct{ oxide, shift, want float64 }{
		{0, 1582, 0.025}, {90, 1582, 2.846}, {285, 1582, 2.608}, {300, 1582, 2.200}, {90, 2670, 2.692}, {285, 2670, 2.014},
		{300, 2670, 1.982},
	} {
		if got := newOptics(532, test.oxide).enhancement(1, test.shift); !(math.Abs(got-test.want) <= 2e-3) {
			t.Errorf("%g nm, %g cm-1: %.4f, want %g", test.oxide, test.shift, got, test.want)
		}
	}
	for _, test := range []struct {
		oxide, layers, want float64
	}{{90, 2, 1.878}, {90, 5, 3.901}, {90, 10, 5.780}, {300, 2, 1.867}, {300, 3, 2.617}, {300, 10, 5.550}} {
		o := newOptics(532, test.oxide)
		got := o.enhancement(int(test.layers), 1582) / o.enhancement(1, 1582)
		if !(math.Abs(got-test.want) <= 2e-3) {
			t.Errorf("%g layers on %g nm: G area %.4f times one layer's, want %g", test.layers, test.oxide, got, test.want)
		}
	}
}
