package line

import "math"

// A profile is a Voigt profile of unit height at position 0, and what it needs at every point.
type profile struct {
	lorentz, gauss float64 // FWHM; NaN where they make no profile
	pure           bool    // so nearly a Lorentzian that it is treated as one
	k, y           float64 // X = k t; Y
	inv            float64 // 1/K(0, Y)
	byL, byG       float64 // -K_Y/K and K_XX/K at the maximum: what keeps the height when a width changes
}

func newProfile(lorentz, gauss float64) profile {
	if !(lorentz >= 0) || !(gauss >= 0) || lorentz+gauss == 0 {
		return profile{lorentz: math.NaN(), gauss: math.NaN(), pure: true}
	}
	v := profile{lorentz: lorentz, gauss: gauss, k: 2 * sqrtLn2 / gauss, y: sqrtLn2 * lorentz / gauss}
	if v.pure = !(v.y <= lorentzLimit); v.pure {
		return v
	}
	w, w1, w2 := faddeeva2(0, v.y)
	v.inv = 1 / real(w)
	v.byL, v.byG = imag(w1)*v.inv, real(w2)*v.inv
	return v
}

// value returns the profile a distance t from its middle.
func (v *profile) value(t float64) float64 {
	if v.pure {
		u := t * (2 / v.lorentz)
		return 1 / (1 + u*u)
	}
	re, _ := faddeeva(math.Abs(t*v.k), v.y)
	return re * v.inv
}

// at returns the profile and its derivatives by t and the two widths, the last one 0 unless it is asked for: it costs most.
//
// A wider Gaussian acts as diffusion, ∂V/∂σ² = ½ ∂²V/∂x² for the profile V of unit area. The chain rule on K(X, Y) would give
// the same as a difference of terms that grow with Y.
func (v *profile) at(t float64, wantG bool) (f, byT, byL, byG float64) {
	if v.pure {
		k := 2 / v.lorentz
		u := t * k
		f = 1 / (1 + u*u)
		g := k * u * f * f
		return f, -2 * g, g * u, 2 * inv8Ln2 * v.gauss * k * g * u * f * (5 + u*u)
	}
	x := t * v.k
	var w, w1, w2 complex128
	if wantG {
		w, w1, w2 = faddeeva2(math.Abs(x), v.y)
		byG = (real(w2) - real(w)*v.byG) * v.inv / (2 * v.gauss)
	} else {
		w, w1 = faddeeva1(math.Abs(x), v.y)
	}
	f = real(w) * v.inv
	byT = v.k * real(w1) * v.inv
	if x < 0 {
		byT = -byT
	}
	byL = sqrtLn2 / v.gauss * (f*v.byL - imag(w1)*v.inv)
	return f, byT, byL, byG
}

// area returns the area over the height.
func (v *profile) area() float64 {
	if v.pure {
		return lorentzArea * v.lorentz
	}
	return gaussArea * v.gauss * v.inv
}

// areaGradient returns the derivatives of area by the two widths.
func (v *profile) areaGradient() (byL, byG float64) {
	if v.pure {
		return lorentzArea, 4 * math.Pi * inv8Ln2 * v.gauss / v.lorentz
	}
	return gaussArea * sqrtLn2 * v.byL * v.inv, -gaussArea / 2 * v.byG * v.inv
}
