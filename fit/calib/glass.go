package calib

import (
	"fmt"
	"math"
	"strings"
)

// A Glass is a luminescent glass whose relative photon rate per cm-1 is certified against the shift from its laser line.
//
// Forms: polynomial Σ A Δν^k, or lognormal with a line, H exp(-ln2/(ln ρ)² ln²((Δν-x0)(ρ²-1)/(wρ)+1)) + mΔν + b.
type Glass struct {
	Name     string
	Laser    float64 // nm
	From, To float64 // certified range, cm-1
	Standing string
	mean     curve
	low, up  *curve // 95 % prediction limits; nil where they are not at hand
}

// A curve is a polynomial, or H, w, ρ, x0, m, b.
type curve struct {
	polynomial bool
	p          [6]float64
}

func (c curve) at(shift float64) float64 {
	if c.polynomial {
		sum := 0.0
		for k := 5; k >= 0; k-- {
			sum = sum*shift + c.p[k]
		}
		return sum
	}
	h, w, rho, x0, m, b := c.p[0], c.p[1], c.p[2], c.p[3], c.p[4], c.p[5]
	l := math.Log((shift-x0)*(rho*rho-1)/(w*rho)+1) / math.Log(rho)
	return h*math.Exp(-math.Ln2*l*l) + m*shift + b
}

// glasses are those for visible and near infrared lasers, NIST standard reference materials. SRM 2243 for 488 and 514.5 nm is
// discontinued.
var glasses = []Glass{
	{Name: "SRM 2242a", Laser: 532, From: 150, To: 4000, Standing: "NIST certificate, seen",
		mean: curve{false, [6]float64{0.99747, 3100.6, 1.1573, 2972.1, -3.7168e-6, 0.012864}},
		low:  &curve{false, [6]float64{0.99563, 3104.5, 1.158, 2972.3, -3.855e-6, -0.011574}},
		up:   &curve{false, [6]float64{0.99931, 3096.6, 1.1566, 2971.9, -3.5804e-6, 0.037302}}},
	{Name: "SRM 2245", Laser: 633, From: 150, To: 4000, Standing: "NIST certificate, one secondary source",
		mean: curve{false, [6]float64{0.95071, 1657.7, 0.95207, 1960.0, 1.8981e-5, 0.011698}}},
	{Name: "SRM 2241", Laser: 785, From: 200, To: 3500, Standing: "NIST certificate, seen",
		mean: curve{true, [6]float64{9.71937e-2, 2.28325e-4, -5.86762e-8, 2.16023e-10, -9.77171e-14, 1.15596e-17}},
		low:  &curve{true, [6]float64{9.01111e-2, 2.17519e-4, -3.92035e-8, 1.99803e-10, -9.16653e-14, 1.07417e-17}},
		up:   &curve{true, [6]float64{0.104276, 2.39131e-4, -7.81489e-8, 2.32243e-10, -1.03769e-13, 1.23774e-17}}},
	{Name: "SRM 2246", Laser: 830, From: 110, To: 3000, Standing: "NIST certificate, one secondary source",
		mean: curve{false, [6]float64{0.99218, 3085.3, 0.96188, 2323.7, 1.263e-5, -0.021142}}},
	{Name: "SRM 2244", Laser: 1064, From: 100, To: 3500, Standing: "NIST certificate, one secondary source",
		mean: curve{true, [6]float64{0.405953, 5.20345e-4, 5.3039e-7, -6.84463e-10, 2.10286e-13, -2.05741e-17}}},
}

// Glasses lists the names of the glasses.
func Glasses() (names []string) {
	for _, g := range glasses {
		names = append(names, g.Name)
	}
	return names
}

// GlassNamed returns a glass; "2242a" will do for "SRM 2242a".
func GlassNamed(name string) (Glass, error) {
	for _, g := range glasses {
		if strings.EqualFold(strings.TrimSpace(strings.TrimPrefix(strings.ToUpper(name), "SRM")), strings.TrimPrefix(g.Name, "SRM ")) {
			return g, nil
		}
	}
	return Glass{}, fmt.Errorf("glass %q is not known; these are: %s", name, strings.Join(Glasses(), ", "))
}

// Rate returns the certified relative photon rate at a shift, cm-1, and its relative standard error: a quarter of the width of
// the 95 % prediction band, or 3 % (common practice) where that is not at hand. NaN outside the certified range.
func (g Glass) Rate(shift float64) (rate, relative float64) {
	if !(shift >= g.From && shift <= g.To) {
		return math.NaN(), math.NaN()
	}
	rate, relative = g.mean.at(shift), 0.03
	if g.low != nil {
		relative = (g.up.at(shift) - g.low.at(shift)) / 4 / rate
	}
	return rate, math.Abs(relative)
}
