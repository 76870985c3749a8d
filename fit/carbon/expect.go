package carbon

import "math"

// Published values against layer number. testdata/published holds the same with sources; a test keeps the two together.

// widths2D are the FWHM of one Lorentzian fitted to 2D for 1 to 5 layers, and their spread between flakes, cm-1: ordered stacks
// on SiO2, 532 nm, about 1 cm-1 resolution (Small 6, 195 (2010), from memory).
var widths2D = [...]spread{{27.5, 3.8}, {51.7, 1.7}, {56.2, 1.6}, {63.1, 1.6}, {66.1, 1.4}}

// graphiteWidth is the same for graphite, whose two components one line envelops (common practice).
var graphiteWidth = spread{70, 8}

// ratios2D are the customary ranges of the 2D/G height ratio for 1, 2, 3 layers and graphite: green laser, about 300 nm oxide,
// low doping (common practice). Graphite's G exceeds its 2D.
var ratios2D = [...][2]float64{{2, 4}, {0.8, 1.3}, {0.6, 0.9}, {0.3, 0.5}}

// A spread is a centre and a standard deviation.
type spread struct{ centre, sd float64 }

// How wide the evidence is taken to be.
const (
	// widthFloor is added to the spread of 2D widths, cm-1 (our choice): the published flakes were few and from one laboratory,
	// and strain differs between films by several cm-1.
	widthFloor = 1.5
	// otherLaser is added where the laser line is not green, cm-1 (our choice). The components of 2D lie further apart at 633 nm
	// than at 514.5 nm by up to 16 cm-1 (Phys. Rev. Lett. 97, 187401 (2006), from memory).
	otherLaser = 8.0
	greenFrom  = 480.0 // nm; the widths were published for lines from 488 to 532 nm
	greenTo    = 540.0
	// ratioSpread is the standard deviation of the logarithm of 2D/G (our choice): doping alone can halve the ratio
	// (Nat. Nanotechnol. 3, 210 (2008)), and the spectrometer's response is not known.
	ratioSpread = 0.5
	// areaSpread is the relative standard deviation of the G area of one layer number (our choice): about a quarter of the 30 %
	// within which grown film is customarily taken for one layer.
	areaSpread = 0.08
	// unknownOxide is the thickness assumed where none is given, nm, and unknownOxideSpread what that adds to areaSpread: the
	// expected areas of 2 to 5 layers differ by 0.6 to 2.2 % between 90 and 300 nm.
	unknownOxide       = 300.0
	unknownOxideSpread = 0.02
	// thickLayers stand for bulk graphite in the model: 134 nm, which lets through no light.
	thickLayers = 400
)

// Broad components: what a quantity looks like where something else is wrong, the same for every layer number. They keep one
// odd quantity from deciding alone (our choices, as wide as the quantity's range).
var (
	oddWidth = spread{50, 25} // cm-1
	oddRatio = spread{0, 1}   // of the logarithm
	oddArea  = 1. / 10        // probability per unit of relative area
)

// Twisted layers: a single, rather narrow 2D whatever their number, up to about 50 cm-1 in turbostratic graphite, and a 2D/G
// that may be as high as that of one layer (Phys. Rev. Lett. 97, 187401 (2006), Phys. Status Solidi B 252, 2375 (2015)). The
// numbers are our choice.
var (
	twistedWidth = spread{35, 10}        // cm-1
	twistedRatio = spread{math.Ln2, 0.7} // of the logarithm
	// twistedShare is the part of neighbouring layers that are twisted. A stack looks like one layer where all of its are.
	twistedShare = map[string]float64{Exfoliated: 0.01, Unknown: 0.1, Grown: 0.3}
	// oddShare is the probability that a quantity is odd.
	oddShare = map[string]float64{Exfoliated: 0.02, Unknown: 0.04, Grown: 0.05}
)

const (
	// strayCoverage is the relative signal that stray light of neighbouring film leaves on bare substrate, as a standard
	// deviation (our choice).
	strayCoverage = 0.04
	// leastCoverage is the part of the spot that must lie on a film for its layer number to be given.
	leastCoverage = 0.5
	// partlyPrior is the prior of a spot that is covered less than that, against 1 for each layer number (our choice: edges are
	// few).
	partlyPrior = 0.3
	// hiddenPrior is the prior of film that noise hides, for each layer number against 1 for bare, where no single layer tells
	// how bright film is (our choice: who measures overnight has seen the film's bands before).
	hiddenPrior = 0.01
	// edgeShare is the part of pixels whose spot covers two materials (our choice).
	edgeShare = 0.1
)

// expectation holds what is expected of each layer number under given settings. Index 0 of each array is unused: bare.
type expectation struct {
	width      [classes]spread // cm-1; of five or more: five layers
	graphite   spread          // of five or more, the other half
	ratio      [classes]float64
	area       [classes]float64 // relative to one layer
	areaSpread float64
	areaTop    float64 // the largest G area of any number of layers
	areaBulk   float64 // of bulk graphite
	odd        float64
	twisted    [classes]float64 // part of the stacks of that many layers that are twisted throughout
}

func (set Settings) expect(laser float64) *expectation {
	e := &expectation{areaSpread: areaSpread}
	film := set.Film
	if film == "" {
		film = Unknown
	}
	e.odd = oddShare[film]
	for n := 2; n < classes; n++ {
		e.twisted[n] = math.Pow(twistedShare[film], float64(n-1))
	}

	extra := widthFloor
	if !green(laser) {
		extra = math.Hypot(extra, otherLaser)
	}
	broaden := func(s spread) spread {
		return spread{voigtWidth(s.centre, set.InstrumentWidth), math.Hypot(s.sd, extra)}
	}
	for n := 1; n < classes; n++ {
		e.width[n] = broaden(widths2D[n-1])
	}
	e.graphite = broaden(graphiteWidth)

	oxide := set.Oxide
	if oxide == 0 {
		oxide = unknownOxide
		e.areaSpread = math.Hypot(e.areaSpread, unknownOxideSpread)
	}
	if laser == 0 {
		laser = 532
	}
	const shiftG, shift2D = 1581.6, 2670
	one := enhancement(laser, shiftG, oxide, 1)
	for n := 1; n < classes; n++ {
		e.area[n] = enhancement(laser, shiftG, oxide, n) / one
		e.ratio[n] = math.Log(ratioCentre(n) * opticalRatio(laser, shift2D, oxide) / opticalRatio(532, shift2D, 300))
	}
	for n := classes - 1; n <= 40; n++ {
		e.areaTop = max(e.areaTop, enhancement(laser, shiftG, oxide, n)/one)
	}
	e.areaBulk = enhancement(laser, shiftG, oxide, thickLayers) / one
	return e
}

// opticalRatio is what interference makes of 2D/G of one layer, up to a factor.
func opticalRatio(laser, shift2D, oxide float64) float64 {
	return enhancement(laser, shift2D, oxide, 1) / enhancement(laser, 1581.6, oxide, 1)
}

// ratioCentre is the middle of the customary range of 2D/G; between 3 layers and graphite the geometric mean.
func ratioCentre(layers int) float64 {
	mid := func(r [2]float64) float64 { return math.Sqrt(r[0] * r[1]) }
	switch {
	case layers <= 3:
		return mid(ratios2D[layers-1])
	case layers == 4:
		return math.Sqrt(mid(ratios2D[2]) * mid(ratios2D[3]))
	}
	return mid(ratios2D[3])
}

// green tells whether the table of 2D widths holds for the laser line, nm.
func green(laser float64) bool { return laser >= greenFrom && laser <= greenTo }

// voigtWidth is the FWHM of a Voigt profile from the FWHM of its Lorentzian and Gaussian parts, with an error below 0.03 %.
// (J. Quant. Spectrosc. Radiat. Transf. 17, 233 (1977).)
func voigtWidth(lorentz, gauss float64) float64 {
	return 0.5346*lorentz + math.Sqrt(0.2166*lorentz*lorentz+gauss*gauss)
}
