package lsq

import "math"

// A certified model gives the value at x (one or two predictors) and stores the derivatives by the parameters b in d.
type certifiedModel func(d, x, b []float64) float64

// certifiedModels are the models of the NIST problems, by file name. Derivatives are written out by hand; a test compares
// them with differences.
var certifiedModels = map[string]certifiedModel{
	"bennett5": func(d, x, b []float64) float64 {
		base := b[1] + x[0]
		u := math.Pow(base, -1/b[2])
		d[0], d[1], d[2] = u, -b[0]*u/(b[2]*base), b[0]*u*math.Log(base)/(b[2]*b[2])
		return b[0] * u
	},
	"boxbod":   rise,
	"misra1a":  rise,
	"chwirut1": chwirut,
	"chwirut2": chwirut,
	"danwood": func(d, x, b []float64) float64 {
		u := math.Pow(x[0], b[1])
		d[0], d[1] = u, b[0]*u*math.Log(x[0])
		return b[0] * u
	},
	"enso": func(d, x, b []float64) float64 {
		y := b[0]
		d[0] = 1
		s, c := math.Sincos(2 * math.Pi * x[0] / 12)
		d[1], d[2] = c, s
		y += b[1]*c + b[2]*s
		for _, k := range []int{3, 6} { // period, cosine, sine
			phase := 2 * math.Pi * x[0] / b[k]
			s, c := math.Sincos(phase)
			d[k], d[k+1], d[k+2] = (b[k+1]*s-b[k+2]*c)*phase/b[k], c, s
			y += b[k+1]*c + b[k+2]*s
		}
		return y
	},
	"eckerle4": func(d, x, b []float64) float64 {
		t := (x[0] - b[2]) / b[1]
		u := math.Exp(-t*t/2) / b[1]
		d[0], d[1], d[2] = u, b[0]*u*(t*t-1)/b[1], b[0]*u*t/b[1]
		return b[0] * u
	},
	"gauss1":   twoGaussians,
	"gauss2":   twoGaussians,
	"gauss3":   twoGaussians,
	"hahn1":    func(d, x, b []float64) float64 { return rational(d, x[0], b, 4) },
	"kirby2":   func(d, x, b []float64) float64 { return rational(d, x[0], b, 3) },
	"thurber":  func(d, x, b []float64) float64 { return rational(d, x[0], b, 4) },
	"lanczos1": decays,
	"lanczos2": decays,
	"lanczos3": decays,
	"mgh09": func(d, x, b []float64) float64 {
		top, bottom := x[0]*x[0]+x[0]*b[1], x[0]*x[0]+x[0]*b[2]+b[3]
		y := b[0] * top / bottom
		d[0], d[1], d[2], d[3] = top/bottom, b[0]*x[0]/bottom, -y*x[0]/bottom, -y/bottom
		return y
	},
	"mgh10": func(d, x, b []float64) float64 {
		u := math.Exp(b[1] / (x[0] + b[2]))
		d[0], d[1], d[2] = u, b[0]*u/(x[0]+b[2]), -b[0]*u*b[1]/((x[0]+b[2])*(x[0]+b[2]))
		return b[0] * u
	},
	"mgh17": func(d, x, b []float64) float64 {
		u, v := math.Exp(-x[0]*b[3]), math.Exp(-x[0]*b[4])
		d[0], d[1], d[2], d[3], d[4] = 1, u, v, -x[0]*b[1]*u, -x[0]*b[2]*v
		return b[0] + b[1]*u + b[2]*v
	},
	"misra1b": func(d, x, b []float64) float64 {
		u := 1 + b[1]*x[0]/2
		d[0], d[1] = 1-1/(u*u), b[0]*x[0]/(u*u*u)
		return b[0] * d[0]
	},
	"misra1c": func(d, x, b []float64) float64 {
		u := 1 + 2*b[1]*x[0]
		d[0], d[1] = 1-1/math.Sqrt(u), b[0]*x[0]/(u*math.Sqrt(u))
		return b[0] * d[0]
	},
	"misra1d": func(d, x, b []float64) float64 {
		u := 1 + b[1]*x[0]
		d[0], d[1] = b[1]*x[0]/u, b[0]*x[0]/(u*u)
		return b[0] * d[0]
	},
	"nelson": func(d, x, b []float64) float64 { // of the response's logarithm
		u := x[0] * math.Exp(-b[2]*x[1])
		d[0], d[1], d[2] = 1, -u, b[1]*u*x[1]
		return b[0] - b[1]*u
	},
	"rat42": func(d, x, b []float64) float64 {
		u := math.Exp(b[1] - b[2]*x[0])
		y := b[0] / (1 + u)
		d[0], d[1], d[2] = 1/(1+u), -y*u/(1+u), y*u/(1+u)*x[0]
		return y
	},
	"rat43": func(d, x, b []float64) float64 {
		u := math.Exp(b[1] - b[2]*x[0])
		d[0] = math.Pow(1+u, -1/b[3])
		y := b[0] * d[0]
		d[1] = -y / b[3] * u / (1 + u)
		d[2], d[3] = -d[1]*x[0], y*math.Log1p(u)/(b[3]*b[3])
		return y
	},
	"roszman1": func(d, x, b []float64) float64 {
		t := x[0] - b[3]
		norm := math.Pi * (t*t + b[2]*b[2])
		d[0], d[1], d[2], d[3] = 1, -x[0], -t/norm, -b[2]/norm
		return b[0] - b[1]*x[0] - math.Atan(b[2]/t)/math.Pi
	},
}

func rise(d, x, b []float64) float64 {
	d[0], d[1] = -math.Expm1(-b[1]*x[0]), b[0]*x[0]*math.Exp(-b[1]*x[0])
	return b[0] * d[0]
}

func chwirut(d, x, b []float64) float64 {
	bottom := b[1] + b[2]*x[0]
	y := math.Exp(-b[0]*x[0]) / bottom
	d[0], d[1], d[2] = -x[0]*y, -y/bottom, -y*x[0]/bottom
	return y
}

func twoGaussians(d, x, b []float64) float64 {
	d[0] = math.Exp(-b[1] * x[0])
	d[1] = -b[0] * x[0] * d[0]
	y := b[0] * d[0]
	for _, k := range []int{2, 5} { // height, position, width
		t := (x[0] - b[k+1]) / b[k+2]
		u := math.Exp(-t * t)
		d[k], d[k+1], d[k+2] = u, 2*b[k]*u*t/b[k+2], 2*b[k]*u*t*t/b[k+2]
		y += b[k] * u
	}
	return y
}

func decays(d, x, b []float64) float64 {
	y := 0.0
	for k := 0; k < 6; k += 2 {
		d[k] = math.Exp(-b[k+1] * x[0])
		d[k+1] = -x[0] * b[k] * d[k]
		y += b[k] * d[k]
	}
	return y
}

// rational is a polynomial with n coefficients over one that starts with 1.
func rational(d []float64, x float64, b []float64, n int) float64 {
	top, bottom, power := 0.0, 1.0, 1.0
	for k := range n {
		d[k] = power
		top += b[k] * power
		if k > 0 {
			bottom += b[n+k-1] * power
			d[n+k-1] = power
		}
		power *= x
	}
	y := top / bottom
	for k := range d[:2*n-1] {
		d[k] /= bottom
		if k >= n {
			d[k] *= -y
		}
	}
	return y
}
