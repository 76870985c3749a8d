package carbon

import (
	"math"
	"slices"
	"strconv"

	"bandgrid/mapio/survey"
)

// A level is how bright one layer is in this map, in the counts of this run. It is stored in the survey's settings, so that
// steps on single pixels can be run apart. Zero means that it is not known.
type level struct {
	area, areaSE float64 // of G, counts cm-1
	height2D     float64 // counts
	// The weakest film: 5th percentile of the heights of pixels where the band is found, counts; only where there are enough.
	weakestG, weakest2D float64
}

// Names in the survey's settings.
const (
	keyArea      = "single_layer_g_area"
	keyAreaSE    = "single_layer_g_area_se"
	keyHeight2D  = "single_layer_2d_height"
	keyWeakestG  = "weakest_g_height"
	keyWeakest2D = "weakest_2d_height"
)

func (l *level) fields() map[string]*float64 {
	return map[string]*float64{
		keyArea: &l.area, keyAreaSE: &l.areaSE, keyHeight2D: &l.height2D, keyWeakestG: &l.weakestG, keyWeakest2D: &l.weakest2D,
	}
}

func loadLevel(s *survey.Survey) (l level) {
	for key, p := range l.fields() {
		*p, _ = s.Settings[key].(float64)
	}
	return l
}

func (l *level) store(s *survey.Survey) {
	if s.Settings == nil {
		s.Settings = map[string]any{}
	}
	for key, p := range l.fields() {
		delete(s.Settings, key) // of an earlier interpretation
		if *p > 0 {
			s.Settings[key] = *p
		}
	}
}

// What makes a level trustworthy (our choices).
const (
	leastPixels  = 10   // that agree on it
	peakReach    = 0.15 // half-width of the window that finds the commonest G area, of its logarithm
	trimReach    = 0.25 // half-width of the window for its median
	twinShare    = 0.25 // a lower level with this share of the pixels is preferred
	maxWidthSE   = 6.0  // cm-1: a 2D width that tells one layer from two by some standard errors
	maxAreaError = 0.3  // relative
	tryPeaks     = 5
)

// A sighting is a well-measured pixel of film.
type sighting struct {
	logArea  float64
	height2D float64
	layers   int // by 2D width and 2D/G ratio alone, more likely than not; 0 none
}

// findLevel finds the G area of one layer: the commonest one among pixels that are single layers by 2D width and 2D/G ratio.
// Since width errors make some pixels of every map look like one layer, a level counts only if most well-measured film pixels
// of that area look like one layer. Where many of them have about half that area, the commonest were twisted bilayers, and the
// lower level is taken. All sums are over sorted values: the result does not depend on the order of pixels.
func (set Settings) findLevel(s *survey.Survey) {
	q := openQuantities(s)
	var l level
	if !q.hasG() && !q.has2D() {
		return
	}
	e := set.expect(set.laser(s))
	e.twisted = [classes]float64{} // 2D cannot tell; the areas do, below
	film, anyFilm := sightings(s, q, e, &l)
	switch {
	case q.hasG() && q.has2D():
		l.fromArea(s, film, e)
		if l.area == 0 && anyFilm {
			warn(s, "no G area that belongs to single layers was found in the map (fewer than %d clear pixels, or none): layer number is from 2D width and 2D/G ratio alone", leastPixels)
		}
	case q.has2D():
		var heights []float64
		for _, f := range film {
			if f.layers == 1 {
				heights = append(heights, f.height2D)
			}
		}
		if len(heights) >= leastPixels {
			slices.Sort(heights)
			l.height2D = median(heights)
		}
	}
	if !anyFilm {
		warn(s, "no pixel shows a G or 2D band above its detection limit: bare substrate is told by that alone, and nothing in the map says how bright film would be")
	}
	l.store(s)
}

// sightings collects the well-measured film, and the weakest film's heights.
func sightings(s *survey.Survey, q *quantities, e *expectation, l *level) (film []sighting, anyFilm bool) {
	var px pixel
	var v verdict
	var heightsG, heights2D []float64
	for i := range s.Grid.Cells() {
		q.load(&px, i, &level{})
		if px.foundG {
			h, _ := at(q.gHeight, i)
			heightsG = append(heightsG, h)
		}
		if px.found2D {
			h, _ := at(q.tHeight, i)
			heights2D = append(heights2D, h)
		}
		if !px.found2D || q.hasG() && !px.foundG || !(px.widthSE <= maxWidthSE) || damage(&px) > 0.2 {
			continue
		}
		f := sighting{}
		if q.hasG() {
			a, se := at(q.gArea, i)
			if !(a > 0 && se < maxAreaError*a) {
				continue
			}
			f.logArea = math.Log(a)
		}
		f.height2D, _ = at(q.tHeight, i)
		e.judge(&px, &v)
		for n := 1; n < classes; n++ {
			if v.p[n] > 0.5 {
				f.layers = n
			}
		}
		film = append(film, f)
	}
	l.weakestG, l.weakest2D = weakest(heightsG), weakest(heights2D)
	return film, len(heightsG)+len(heights2D) > 0
}

func weakest(heights []float64) float64 {
	if len(heights) < leastPixels {
		return 0
	}
	slices.Sort(heights)
	return max(heights[len(heights)/20], 0)
}

// fromArea finds the level.
func (l *level) fromArea(s *survey.Survey, film []sighting, e *expectation) {
	slices.SortFunc(film, func(a, b sighting) int {
		switch {
		case a.logArea < b.logArea:
			return -1
		case a.logArea > b.logArea:
			return 1
		}
		return 0
	})
	var all, single []float64
	for _, f := range film {
		all = append(all, f.logArea)
		if f.layers == 1 {
			single = append(single, f.logArea)
		}
	}
	candidates := slices.Clone(single)
	for range tryPeaks {
		at, n := peak(candidates)
		if n < leastPixels {
			return
		}
		if lower := at - math.Log(e.area[2]); count(single, lower, peakReach) >= max(leastPixels, int(twinShare*float64(n))) &&
			trusted(single, all, lower) {
			warn(s, "single layers by their 2D come with two G areas, one about %.2g times the other; the lower one is taken for one layer, the higher for twisted layers", e.area[2])
			at = lower
		}
		if trusted(single, all, at) {
			l.settle(s, film, single, at, e)
			return
		}
		candidates = slices.DeleteFunc(candidates, func(x float64) bool { return math.Abs(x-at) <= peakReach })
	}
}

// trusted tells whether most film pixels with that area look like one layer.
func trusted(single, all []float64, at float64) bool {
	return 2*count(single, at, peakReach) > count(all, at, peakReach)
}

// settle takes the median around the peak, and checks it against pixels that look like two layers.
func (l *level) settle(s *survey.Survey, film []sighting, single []float64, at float64, e *expectation) {
	for range 20 {
		next := median(within(single, at, trimReach))
		if next == at {
			break
		}
		at = next
	}
	near := within(single, at, trimReach)
	l.area = math.Exp(at)
	var off, heights, double []float64
	for _, x := range near {
		off = append(off, math.Abs(x-at))
	}
	slices.Sort(off)
	// Standard error of a median of normal values. Neighbouring pixels share the spot and the focus, so it is at least 1 % (our
	// choice).
	l.areaSE = l.area * max(1.2533*1.4826*median(off)/math.Sqrt(float64(len(near))), 0.01)
	for _, f := range film {
		switch {
		case f.layers == 1 && math.Abs(f.logArea-at) <= trimReach:
			heights = append(heights, f.height2D)
		case f.layers == 2:
			double = append(double, f.logArea)
		}
	}
	slices.Sort(heights)
	l.height2D = median(heights)
	if len(double) >= leastPixels {
		if got := math.Exp(median(double) - at); !(math.Abs(got/e.area[2]-1) <= 0.2) {
			warn(s, "pixels with the 2D width of two layers have %.2f times the G area of single layers, where %.2f is expected: check focus, oxide and doping", got, e.area[2])
		}
	}
}

// peak returns the middle of the commonest values: the median of the window that holds most of them, the lowest such window.
// The values are sorted.
func peak(x []float64) (at float64, n int) {
	first, last := 0, 0
	for i := range x {
		for last < len(x) && x[last]-x[i] <= 2*peakReach {
			last++
		}
		if last-i > n {
			first, n = i, last-i
		}
	}
	if n > 0 {
		at = median(x[first : first+n])
	}
	return at, n
}

// within returns the part of the sorted values that lies within reach of at.
func within(x []float64, at, reach float64) []float64 {
	from, _ := slices.BinarySearch(x, at-reach)
	to, _ := slices.BinarySearch(x, math.Nextafter(at+reach, math.Inf(1)))
	return x[from:to]
}

func count(x []float64, at, reach float64) int { return len(within(x, at, reach)) }

// median of sorted values; NaN where there are none.
func median(x []float64) float64 {
	n := len(x)
	if n == 0 {
		return math.NaN()
	}
	return (x[(n-1)/2] + x[n/2]) / 2
}

func trim(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
