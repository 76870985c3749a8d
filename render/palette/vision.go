package palette

import "image/color"

// A Vision is a kind of colour vision.
type Vision int

const (
	Normal Vision = iota
	Protan        // without long-wave cones
	Deutan        // without middle-wave cones
	Tritan        // without short-wave cones
)

func (v Vision) String() string {
	return [...]string{"normal", "protan", "deutan", "tritan"}[v]
}

// simulation holds the matrices for complete deficiency, on linear sRGB (IEEE Trans. Vis. Comput. Graph. 15, 1291 (2009); from
// memory).
var simulation = [...][3][3]float64{
	Normal: {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	Protan: {
		{0.152286, 1.052583, -0.204868},
		{0.114503, 0.786281, 0.099216},
		{-0.003882, -0.048116, 1.051998}},
	Deutan: {
		{0.367322, 0.860646, -0.227968},
		{0.280085, 0.672501, 0.047413},
		{-0.011820, 0.042940, 0.968881}},
	Tritan: {
		{1.255528, -0.076749, -0.178779},
		{-0.078411, 0.930809, 0.147602},
		{0.004733, 0.691367, 0.303900}},
}

// See returns the colour as that vision sees it.
func (v Vision) See(c color.NRGBA) Lab {
	in, m := decode(c), simulation[v]
	var out [3]float64
	for i := range out {
		out[i] = min(1, max(0, m[i][0]*in[0]+m[i][1]*in[1]+m[i][2]*in[2]))
	}
	return fromLinear(out)
}
