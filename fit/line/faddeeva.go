package line

import "math"

// Faddeeva returns w(z) = exp(-z²) erfc(-iz) for Im z >= 0, NaN below the real axis. Its real and imaginary parts each have
// a relative error below 1e-14, however small one is beside the other, unless they underflow.
//
// For x = Re z >= 0 (w(-x+iy) is the complex conjugate of w(x+iy)) the integral w(z) = (i/π) ∫ exp(-t²)/(z-t) dt is replaced by
// a sum over poles on the real axis, the same for ±t:
//
//   - |z| < 8: the trapezoidal rule with step 1/2 and the residue of the pole z, Math. Comp. 25, 339 (1971). Of the grids n/2
//     and (n+1/2)/2 the one whose nodes are farther from x is taken, so that neither sum nor residue grows: SIAM J. Numer. Anal.
//     59, 2346 (2021). The error of the rule is of the order exp(-4π²), 7e-18.
//   - 8 <= |z| < 1e9: Gauss-Hermite rules of 14, 8 and 4 nodes. These are the convergents of Laplace's continued fraction,
//     SIAM J. Numer. Anal. 7, 187 (1970), as partial fractions.
//   - beyond: i/(√π z), as the next term is 1/(2z²) of it.
//
// (The journals from memory; the rules and their errors are checked by the tests.)
//
// In the sum for Re w all terms are positive and have the factor y, those for Im w have the factor x: this is what keeps the
// smaller part exact.
func Faddeeva(z complex128) complex128 {
	x := real(z)
	re, im := faddeeva(math.Abs(x), imag(z))
	if x < 0 {
		im = -im
	}
	return complex(re, im)
}

const (
	innerRadius = 8.0 // |z| where the rules change
	inner       = innerRadius * innerRadius
	step        = 0.5 // of the trapezoidal rule: the argument of its residue is then reduced exactly
	invSqrtPi   = 1 / math.SqrtPi
)

// A pole pair at ±t with its weight stands for weight · iz/(z²-t²).
type poles []struct{ t2, weight float64 }

// Trapezoidal rule, weights (2/π) step exp(-t²). Nodes beyond 6.25 would add less than 1e-16 of w for |z| < 8.
var whole, half = func() (whole, half poles) {
	for n := range 13 {
		t := step * float64(n)
		pair := poles{{t * t, 2 / math.Pi * step * math.Exp(-t*t)}}
		if n == 0 {
			pair[0].weight /= 2 // a single node
		}
		whole = append(whole, pair...)
		t += step / 2
		half = append(half, poles{{t * t, 2 / math.Pi * step * math.Exp(-t*t)}}...)
	}
	return whole, half
}()

// Gauss-Hermite rules, weights 2/π times those of the rule. testdata/scipy/faddeeva.py prints them.
var (
	hermite14 = poles{
		{0.085115442997594033618, 0.34148660813753622153},
		{0.77213792004277698585, 0.17386443067479033256},
		{2.1805918884504589335, 0.043611977603261972478},
		{4.3897928867310141085, 0.0049975000530307125341},
		{7.5540913261017843994, 0.00022605897880883513887},
		{11.989993039823879082, 3.0026071964674014902e-6},
		{18.528277495852492457, 5.493131745304760849e-9},
	}
	hermite8 = poles{
		{0.14530352150331708741, 0.42089926063633401426},
		{1.3390972881263614082, 0.13229106935773044058},
		{3.9269635013582872068, 0.010872181654676988986},
		{8.5886356890120342977, 0.00012707189901484312249},
	}
	hermite4 = poles{
		{0.2752551286084109509, 0.51242422475476846298},
		{2.7247448713915890491, 0.051765358792987823964},
	}
)

// outer returns the rule for |z|² = r2 outside the inner circle, nil where one term does. Its relative error is about
// n!/(2^n |z|^(2n)) for n nodes, in the smaller part of w 2n times that: below 1e-15 where each rule begins.
func outer(r2 float64) poles {
	switch {
	case r2 < 256:
		return hermite14
	case r2 < 3e4:
		return hermite8
	case r2 < 1e18:
		return hermite4
	}
	return nil
}

// faddeeva returns the parts of w(x+iy) for x, y >= 0.
func faddeeva(x, y float64) (re, im float64) {
	if !(y >= 0) {
		return math.NaN(), math.NaN()
	}
	r2 := x*x + y*y
	if r2 < inner {
		rule, re, im := residue(x, y)
		a, b := rule.sum(x, y)
		return re + a, im + b
	}
	rule := outer(r2)
	if rule == nil {
		w, _, _ := far(x, y)
		return real(w), imag(w)
	}
	re, im = rule.sum(x, y)
	return re + gauss(x, y), im
}

// sum returns the parts of Σ weight · iz/(z²-t²). The conversions keep the compiler from fusing products and sums, here and in
// sum1 in different ways: the value must not depend on whether derivatives are wanted.
func (p poles) sum(x, y float64) (re, im float64) {
	a, b, r2 := float64((x-y)*(x+y)), 2*x*y, float64(x*x)+float64(y*y)
	var s, st float64
	for _, pole := range p {
		d := a - pole.t2
		q := float64(pole.weight * (1 / (float64(d*d) + float64(b*b))))
		s += q
		st += float64(q * pole.t2)
	}
	return float64(y * (float64(r2*s) + st)), float64(x * (float64(r2*s) - st))
}

// residue returns the trapezoidal rule for x and the parts of its residue, 2 exp(-z²)/(1+exp(-2πi(z-t)/step)) with t a point
// half-way between nodes, |x-t| <= step/4.
func residue(x, y float64) (rule poles, re, im float64) {
	u := x / step
	nearest := math.RoundToEven(u)
	rule = half
	delta := u - nearest // exact
	if math.Abs(delta) > 0.25 {
		rule = whole
		nearest = math.Floor(u) + 0.5
		delta = u - nearest
	}
	if y > 5 { // below exp(25-20π), 4e-17 of either part
		return rule, 0, 0
	}
	e := math.Exp(-2 * math.Pi / step * y)
	sin, cos := math.Sincos(2 * math.Pi * delta) // cos >= 0
	sin2, cos2 := math.Sincos(2 * x * y)
	// 1/(1 + (cos - i sin)/e) = e (e + cos + i sin)/(1 + 2 e cos + e²)
	scale := 2 * e * math.Exp((y-x)*(y+x)) / (1 + e*(2*cos+e))
	c := cos + e
	return rule, scale * (cos2*c + sin2*sin), scale * (cos2*sin - sin2*c)
}

// gauss is what Gauss-Hermite rules leave out of Re w beside the real axis, exp(-x²): elsewhere it is below 1e-17 of it.
func gauss(x, y float64) float64 {
	if x > 27.3 || y > 1e-9 {
		return 0
	}
	s := x * x
	return math.Exp(-s) * (1 - math.FMA(x, x, -s))
}

// far returns w and its first two derivatives for |z| > 1e9.
func far(x, y float64) (w, w1, w2 complex128) {
	c := 1 / complex(x, y)
	c2 := c * c
	return times(c, invSqrtPi), times(c2, -invSqrtPi), times(c2*c, 2*invSqrtPi)
}

// times returns i·f·z.
func times(z complex128, f float64) complex128 { return complex(-f*imag(z), f*real(z)) }

// faddeeva1 returns w(x+iy) and its first derivative by z for x, y >= 0.
//
// Inside it comes from w' = 2i/√π - 2zw. For large |z| this cancels, to |z|² units in the last place: outside, the sum over the
// poles is differentiated instead.
func faddeeva1(x, y float64) (w, w1 complex128) {
	r2 := x*x + y*y
	if r2 < inner {
		rule, re, im := residue(x, y)
		a, b := rule.sum(x, y)
		re, im = re+a, im+b
		return complex(re, im), complex(2*(y*im-x*re), 2*(invSqrtPi-x*im-y*re))
	}
	rule := outer(r2)
	if rule == nil {
		w, w1, _ = far(x, y)
		return w, w1
	}
	w, w1 = rule.sum1(x, y)
	if g := gauss(x, y); g != 0 {
		w += complex(g, 0)
		w1 += complex(-2*x*g, 0)
	}
	return w, w1
}

// faddeeva2 returns also the second derivative, inside by w" = -2w - 2zw'.
func faddeeva2(x, y float64) (w, w1, w2 complex128) {
	w, w1 = faddeeva1(x, y)
	r2 := x*x + y*y
	if r2 < inner {
		re, im, re1, im1 := real(w), imag(w), real(w1), imag(w1)
		return w, w1, complex(2*(y*im1-x*re1-re), -2*(x*im1+y*re1+im))
	}
	rule := outer(r2)
	if rule == nil {
		return far(x, y)
	}
	w2 = rule.second(x, y)
	if g := gauss(x, y); g != 0 {
		w2 += complex((4*x*x-2)*g, 0)
	}
	return w, w1, w2
}

// sum1 returns Σ weight · iz c with c = 1/(z²-t²) and its derivative, -i Σ weight (c + 2t²c²).
func (p poles) sum1(x, y float64) (w, w1 complex128) {
	a, b, r2 := float64((x-y)*(x+y)), 2*x*y, float64(x*x)+float64(y*y) // z² = a+ib
	var s, st, re, im float64
	for _, pole := range p {
		d := a - pole.t2
		inv := 1 / (float64(d*d) + float64(b*b))
		q := float64(pole.weight * inv)
		s += q
		st += float64(q * pole.t2)
		f := 2 * inv * pole.t2 // c = (d-ib) inv, 1+2t²c = 1 + f (d-ib)
		gr, gi := 1+f*d, f*b
		re += q * (d*gr - b*gi)
		im += q * (b*gr + d*gi)
	}
	return complex(y*(float64(r2*s)+st), x*(float64(r2*s)-st)), complex(-im, -re) // the first as sum, to the last bit
}

// second returns the second derivative of sum, 2iz Σ weight (c² + 4t²c³).
func (p poles) second(x, y float64) complex128 {
	a, b := (x-y)*(x+y), 2*x*y
	var re, im float64
	for _, pole := range p {
		d := a - pole.t2
		inv := 1 / (d*d + b*b)
		q := pole.weight * inv * inv
		f := 4 * inv * pole.t2
		gr, gi := 1+f*d, f*b         // 1+4t²c, conjugate
		cr, ci := (d-b)*(d+b), 2*d*b // c², conjugate, over inv²
		re += q * (cr*gr - ci*gi)
		im += q * (cr*gi + ci*gr)
	}
	return complex(2*(x*im-y*re), 2*(x*re+y*im))
}
