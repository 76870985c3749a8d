package palette

import (
	"image/color"
	"math"
)

// A Lab is a colour in OKLab: L the lightness, 0 black to 1 white; A and B the hue plane. Equal distances look about equally
// different. The space and its matrices are a public definition adopted by CSS Color Module Level 4, section 9.
type Lab struct{ L, A, B float64 }

// LCH returns the colour of lightness l, chroma c and hue h in degrees.
func LCH(l, c, h float64) Lab {
	sin, cos := math.Sincos(h * math.Pi / 180)
	return Lab{l, c * cos, c * sin}
}

// Distance is the Euclidean distance of two colours; 0.02 is about the least that is seen side by side (common practice).
func (p Lab) Distance(q Lab) float64 {
	return math.Sqrt((p.L-q.L)*(p.L-q.L) + (p.A-q.A)*(p.A-q.A) + (p.B-q.B)*(p.B-q.B))
}

// linear returns the colour in linear sRGB; components leave 0 to 1 where no screen can show it.
func (p Lab) linear() [3]float64 {
	l := p.L + 0.3963377774*p.A + 0.2158037573*p.B
	m := p.L - 0.1055613458*p.A - 0.0638541728*p.B
	s := p.L - 0.0894841775*p.A - 1.2914855480*p.B
	l, m, s = l*l*l, m*m*m, s*s*s
	return [3]float64{
		4.0767416621*l - 3.3077115913*m + 0.2309699292*s,
		-1.2684380046*l + 2.6097574011*m - 0.3413193965*s,
		-0.0041960863*l - 0.7034186147*m + 1.7076147010*s,
	}
}

func fromLinear(c [3]float64) Lab {
	l := math.Cbrt(0.4122214708*c[0] + 0.5363325363*c[1] + 0.0514459929*c[2])
	m := math.Cbrt(0.2119034982*c[0] + 0.6806995451*c[1] + 0.1073969566*c[2])
	s := math.Cbrt(0.0883024619*c[0] + 0.2817188376*c[1] + 0.6299787005*c[2])
	return Lab{
		0.2104542553*l + 0.7936177850*m - 0.0040720468*s,
		1.9779984951*l - 2.4285922050*m + 0.4505937099*s,
		0.0259040371*l + 0.7827717662*m - 0.8086757660*s,
	}
}

// Shown tells whether an sRGB screen can show the colour.
func (p Lab) Shown() bool {
	for _, v := range p.linear() {
		if !(v >= -1e-4 && v <= 1+1e-4) {
			return false
		}
	}
	return true
}

// RGB returns the colour in sRGB (IEC 61966-2-1), cut to what a screen can show.
func (p Lab) RGB() color.NRGBA {
	var out [3]uint8
	for i, v := range p.linear() {
		if v <= 0.0031308 {
			v *= 12.92
		} else {
			v = 1.055*math.Pow(v, 1/2.4) - 0.055
		}
		out[i] = uint8(math.Round(255 * min(1, max(0, v))))
	}
	return color.NRGBA{out[0], out[1], out[2], 255}
}

func decode(c color.NRGBA) [3]float64 {
	var out [3]float64
	for i, v := range [3]uint8{c.R, c.G, c.B} {
		x := float64(v) / 255
		if x <= 0.04045 {
			out[i] = x / 12.92
		} else {
			out[i] = math.Pow((x+0.055)/1.055, 2.4)
		}
	}
	return out
}

// FromRGB returns an sRGB colour in OKLab.
func FromRGB(c color.NRGBA) Lab { return fromLinear(decode(c)) }
