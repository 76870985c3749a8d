package carbon

import "math"

// Hypotheses about a pixel: its layer number, five standing for five and more, or a spot that is covered by film for less than
// half but more than a stray part.
const (
	bare       = 0
	fivePlus   = 5
	classes    = 6
	partly     = 6
	hypotheses = 7
)

// A pixel is what the fit found at one place. Quantities that are missing are NaN.
type pixel struct {
	width, widthSE    float64 // of 2D, cm-1
	ratio, ratioSE    float64 // 2D/G, heights
	area, areaSE      float64 // G, relative to one layer; NaN where that level is not known
	height2D          float64 // relative to one layer, likewise
	height2DSE        float64
	snrG, snr2D       float64 // heights over their standard errors
	foundG, found2D   bool
	windowG, window2D bool    // the pixel's window was fitted
	dg, widthG        float64 // D/G, and the width of G, cm-1
	leastG, least2D   float64 // smallest height of a film over the height's standard error; NaN where no film is known
}

// A verdict is the posterior over the hypotheses.
type verdict struct {
	p      [hypotheses]float64
	silent bool // no evidence, or evidence that fits no layer number
}

// judge weighs the evidence of a pixel. Priors are flat over the six layer numbers, but see hiddenPrior. The likelihoods of 2D width, 2D/G ratio and
// G area are multiplied, in logarithms; each has a broad component, so that one odd quantity does not decide alone.
func (e *expectation) judge(px *pixel, v *verdict) {
	v.silent = true
	if !px.windowG && !px.window2D {
		return
	}
	var l [hypotheses]float64
	l[partly] = math.Log(partlyPrior)
	known := px.area == px.area || px.height2D == px.height2D // a level is known
	switch {
	case px.foundG || px.found2D:
		if lost2D(px) {
			return
		}
		trust := 1 - damage(px)
		if !known {
			l[bare], l[partly] = math.Inf(-1), math.Inf(-1)
		}
		if trust > 0 {
			e.shape(&l, px, trust)
		}
		if px.area == px.area {
			e.amount(&l, px, trust)
		}
		if !px.foundG && px.height2D == px.height2D {
			e.brightness(&l, px)
		}
	case known:
		if px.area == px.area {
			e.amount(&l, px, 1)
		}
		if px.height2D == px.height2D {
			e.brightness(&l, px)
		}
	default:
		l[partly] = math.Inf(-1)
		e.absence(&l, px)
	}
	top := math.Inf(-1)
	for _, x := range l {
		top = max(top, x)
	}
	if !(top > math.Inf(-1)) {
		return
	}
	v.silent = false
	sum := 0.0
	for k, x := range l {
		v.p[k] = math.Exp(x - top)
		sum += v.p[k]
	}
	for k := range v.p {
		v.p[k] /= sum
	}
}

// shape adds the evidence of 2D width and 2D/G ratio, which belong together: twisted layers have both of one layer.
func (e *expectation) shape(l *[hypotheses]float64, px *pixel, trust float64) {
	hasWidth := px.found2D && px.widthSE < math.Inf(1)
	ratioError := px.ratioSE / px.ratio
	hasRatio := px.found2D && px.ratio > 0 && ratioError < 1
	if !hasWidth && !hasRatio {
		return
	}
	width := func(s spread) float64 {
		if !hasWidth {
			return 1
		}
		return normal(px.width-s.centre, math.Hypot(s.sd, px.widthSE))
	}
	logRatio := 0.0
	if hasRatio {
		logRatio = math.Log(px.ratio)
	}
	ratio := func(s spread) float64 {
		if !hasRatio {
			return 1
		}
		return normal(logRatio-s.centre, math.Hypot(s.sd, ratioError))
	}
	odd := width(oddWidth)
	oddR := ratio(oddRatio)
	// A spot that is hardly covered may show any film.
	l[bare] += trust * math.Log(odd*oddR)
	l[partly] += trust * math.Log(odd*oddR)
	twisted := (width(twistedWidth)*(1-e.odd) + e.odd*odd) * (ratio(twistedRatio)*(1-e.odd) + e.odd*oddR)
	for n := 1; n < classes; n++ {
		w := width(e.width[n])
		if n == fivePlus {
			w = (w + width(e.graphite)) / 2
		}
		r := ratio(spread{e.ratio[n], ratioSpread})
		ordered := (w*(1-e.odd) + e.odd*odd) * (r*(1-e.odd) + e.odd*oddR)
		l[n] += trust * math.Log(ordered*(1-e.twisted[n])+twisted*e.twisted[n])
	}
}

// amount adds the evidence of the G area. Where the spot covers two materials, the one with the larger part counts: areas half
// way to the neighbouring layer numbers belong to a layer number too, with a small share.
func (e *expectation) amount(l *[hypotheses]float64, px *pixel, trust float64) {
	a, se := px.area, px.areaSE
	odd := e.odd * oddArea
	l[bare] += math.Log((1-e.odd)*normal(a, math.Hypot(se, strayCoverage)) + odd)
	soft := math.Hypot(se, strayCoverage)
	l[partly] += math.Log((1-e.odd)*flat(a, strayCoverage, leastCoverage, soft) + odd)
	// Damage changes the G area little; the spread is doubled at most (our choice).
	rel := e.areaSpread * (2 - trust)
	for n := 1; n < fivePlus; n++ {
		lower := leastCoverage
		if n > 1 {
			lower = (e.area[n-1] + e.area[n]) / 2
		}
		upper := (e.area[n] + e.area[n+1]) / 2
		pure := normal(a-e.area[n], math.Hypot(se, rel*e.area[n]))
		l[n] += math.Log((1-e.odd)*((1-edgeShare)*pure+edgeShare*flat(a, lower, upper, soft)) + odd)
	}
	// The area of five and more layers rises to its maximum and falls towards that of bulk graphite.
	five := e.area[fivePlus]
	low, high := min(e.areaBulk, five), max(e.areaTop, five)
	wide := math.Hypot(se, rel*five)
	l[fivePlus] += math.Log((1-e.odd)*(0.7*flat(a, five, high, wide)+0.3*flat(a, low, five, wide)) + odd)
}

// brightness adds the evidence of the 2D height where G is not found. It says whether there is film, not how much.
func (e *expectation) brightness(l *[hypotheses]float64, px *pixel) {
	t, se := px.height2D, px.height2DSE
	odd := e.odd * oddArea
	soft := math.Hypot(se, strayCoverage)
	l[bare] += math.Log((1-e.odd)*normal(t, soft) + odd)
	l[partly] += math.Log((1-e.odd)*flat(t, strayCoverage, leastCoverage, soft) + odd)
	film := math.Log((1-e.odd)*flat(t, leastCoverage, 1.5, math.Hypot(se, 0.2)) + odd)
	for n := 1; n < classes; n++ {
		l[n] += film
	}
}

// absence weighs bare substrate against film that noise hides, where no single layer tells how bright film is. Hidden film may
// have any height between that of the weakest film of the map, or nothing if there is none, and the detection limit.
func (e *expectation) absence(l *[hypotheses]float64, px *pixel) {
	const limit = 5 // heights over their standard error; as in the built-in recipe
	for _, band := range [2]struct {
		there      bool
		snr, least float64
	}{{px.windowG, px.snrG, px.leastG}, {px.window2D, px.snr2D, px.least2D}} {
		if !band.there {
			continue
		}
		low := 0.0
		if band.least > 0 {
			low = leastCoverage * band.least
		}
		film := math.Log(flat(band.snr, low, max(low, limit)+1, 1) + 1e-9)
		l[bare] += math.Log(normal(band.snr, 1) + 1e-9)
		for n := 1; n < classes; n++ {
			l[n] += film
		}
	}
	for n := 1; n < classes; n++ {
		l[n] += math.Log(hiddenPrior)
	}
}

// lost2D tells whether a film with a G band lacks a 2D band that any graphene would show at this noise, as amorphous carbon,
// resist and heavily damaged film do. Graphite has at least 0.3 of G (common practice); half of that counts.
func lost2D(px *pixel) bool {
	return px.foundG && px.window2D && !px.found2D && px.ratio+2*px.ratioSE < 0.15
}

// damage says how far disorder spoils the evidence of 2D: 0 not at all, 1 fully. Disorder broadens 2D and lowers 2D/G as more
// layers do. D/G of 0.3 to 0.8 with a G width of 17 to 22 cm-1 is the transition, defects some 10 nm apart (guide from Carbon
// 48, 1592 (2010), from memory; the limits are our choice). Near amorphous carbon D/G falls again, and G alone tells.
func damage(px *pixel) float64 {
	if !(px.widthG > 0) {
		return 0
	}
	d := 0.0
	if px.dg == px.dg {
		d = ramp(px.dg, 0.3, 0.8) * ramp(px.widthG, 17, 22)
	}
	return max(d, ramp(px.widthG, 30, 40))
}

func ramp(x, from, to float64) float64 { return min(max((x-from)/(to-from), 0), 1) }

// normal is the density of the normal distribution.
func normal(d, sd float64) float64 {
	z := d / sd
	return math.Exp(-z*z/2) / (sd * math.Sqrt(2*math.Pi))
}

// flat is the density of a uniform distribution between two limits, blurred by a normal one. Limits that coincide are a point.
func flat(x, from, to, sd float64) float64 {
	if !(to > from) {
		return normal(x-from, sd)
	}
	k := 1 / (sd * math.Sqrt2)
	return max((math.Erf((x-from)*k)-math.Erf((x-to)*k))/(2*(to-from)), 0)
}
