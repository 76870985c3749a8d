package carbon

import (
	"math"

	"bandgrid/mapio/survey"
)

var nan32 = float32(math.NaN())

// countLayers puts layer_number and layer_probability into the survey.
func (set Settings) countLayers(s *survey.Survey) {
	q := openQuantities(s)
	if !q.hasG() && !q.has2D() {
		return // a recipe for another material
	}
	laser := set.laser(s)
	e := set.expect(laser)
	level := loadLevel(s)
	n := s.Grid.Cells()
	number := survey.Quantity{Name: "layer_number", Values: make([]float32, n),
		Description: "layers: 0 bare, 1 to 4, 5 five or more; undetermined where the evidence does not suffice"}
	probability := survey.Quantity{Name: "layer_probability", Values: make([]float32, n),
		Description: "probability of the most probable layer number"}
	least := set.minProbability()
	var px pixel
	var v verdict
	for i := range n {
		q.load(&px, i, &level)
		e.judge(&px, &v)
		number.Values[i], probability.Values[i] = v.answer(least)
	}
	s.Put(number)
	s.Put(probability)
	set.caution(s, q, laser)
}

// answer returns the layer number, NaN where its probability is below the least, and the probability.
func (v *verdict) answer(least float64) (number, probability float32) {
	if v.silent {
		return nan32, nan32
	}
	best := 0
	for n := range classes {
		if v.p[n] > v.p[best] {
			best = n
		}
	}
	number = float32(best)
	if !(v.p[best] >= least) {
		number = nan32
	}
	return number, float32(v.p[best])
}

// caution warns of evidence that the run does not have.
func (set Settings) caution(s *survey.Survey, q *quantities, laser float64) {
	if !q.has2D() {
		warn(s, "the run has no 2D window: layers cannot be counted; only bare substrate is told from film, by the absence of G")
	}
	if !q.hasG() {
		warn(s, "the run has no G window: layer number is from 2D width alone, and damage is not seen")
	}
	if q.has2D() && !green(laser) {
		line := "an unknown laser line"
		if laser > 0 {
			line = trim(laser) + " nm"
		}
		warn(s, "published 2D widths against layer number hold for green lines (488 to 532 nm); at %s they count for less", line)
	}
}

// quantities are the maps that layer numbers are made from; nil where the run does not have them.
type quantities struct {
	gHeight, gArea, gWidth, gPosition *survey.Quantity
	tHeight, tWidth                   *survey.Quantity // of 2D
	ratio, dg                         *survey.Quantity
}

func openQuantities(s *survey.Survey) *quantities {
	return &quantities{
		gHeight: s.Map("g_height"), gArea: s.Map("g_area"), gWidth: s.Map("g_width"), gPosition: s.Map("g_position"),
		tHeight: s.Map("2d_height"), tWidth: s.Map("2d_width"),
		ratio: s.Map("2d_g_ratio"), dg: s.Map("d_g_ratio"),
	}
}

func (q *quantities) hasG() bool  { return q.gHeight != nil && q.gArea != nil && q.gWidth != nil }
func (q *quantities) has2D() bool { return q.tHeight != nil && q.tWidth != nil }

// load fills in a pixel. A band counts as found where it has a width.
func (q *quantities) load(px *pixel, i int, level *level) {
	nan := math.NaN()
	*px = pixel{area: nan, areaSE: nan, height2D: nan, height2DSE: nan, width: nan, widthSE: nan, widthG: nan, leastG: nan, least2D: nan}
	px.ratio, px.ratioSE = at(q.ratio, i)
	px.dg, _ = at(q.dg, i)
	if q.hasG() {
		h, se := at(q.gHeight, i)
		px.windowG, px.snrG, px.leastG = usable(h, se), h/se, level.weakestG/se
		px.widthG, _ = at(q.gWidth, i)
		px.foundG = px.windowG && px.widthG == px.widthG
		if a, se := at(q.gArea, i); usable(a, se) && level.area > 0 {
			px.area, px.areaSE = a/level.area, math.Hypot(se, a*level.areaSE/level.area)/level.area
		}
	}
	if q.has2D() {
		h, se := at(q.tHeight, i)
		px.window2D, px.snr2D, px.least2D = usable(h, se), h/se, level.weakest2D/se
		px.width, px.widthSE = at(q.tWidth, i)
		px.found2D = px.window2D && px.width == px.width && usable(px.width, px.widthSE)
		if px.window2D && level.height2D > 0 {
			px.height2D, px.height2DSE = h/level.height2D, se/level.height2D
		}
	}
}

// at returns a quantity and its standard error at a cell, NaN where there is none.
func at(q *survey.Quantity, i int) (value, se float64) {
	value, se = math.NaN(), math.NaN()
	if q == nil {
		return value, se
	}
	value = float64(q.Values[i])
	if q.SE != nil {
		se = float64(q.SE[i])
	}
	return value, se
}

func usable(value, se float64) bool {
	return !math.IsNaN(value) && !math.IsInf(value, 0) && se > 0 && !math.IsInf(se, 0)
}
