package carbon

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"bandgrid/fit"
	"bandgrid/mapio/survey"
)

// A spot is what lies under one pixel, and how well it is measured.
type spot struct {
	layers int
	width  float64 // of 2D, cm-1
	ratio  float64 // 2D/G
	area   float64 // of G, relative to one layer
	dg     float64
	widthG float64 // cm-1; 0 for 14
	noise  float64 // standard error of a height, relative to the G height of one layer
}

// oneLayer is the G height of one layer in the tests' maps, counts.
const oneLayer = 400.0

var quantityNames = []string{"g_position", "g_width", "g_height", "g_area", "2d_position", "2d_width", "2d_height", "2d_area", "2d_g_ratio", "d_g_ratio"}

// newMap makes a survey of the spots as the fit would give it: with errors as large as their standard errors say, and nothing
// found below five of them.
func newMap(r *rand.Rand, spots []spot) *survey.Survey {
	n := len(spots)
	s := &survey.Survey{}
	s.Laser = 532
	s.Grid.Rows, s.Grid.Cols = 1, n
	for _, name := range quantityNames {
		q := survey.Quantity{Name: name, Values: make([]float32, n), SE: make([]float32, n)}
		for i := range n {
			q.Values[i], q.SE[i] = nan32, nan32
		}
		s.Put(q)
	}
	for i, p := range spots {
		put := func(name string, v, se float64) {
			q := s.Map(name)
			q.Values[i], q.SE[i] = float32(v+se*r.NormFloat64()), float32(se)
		}
		widthG := p.widthG
		if widthG == 0 {
			widthG = 14
		}
		se := p.noise * oneLayer
		height := p.area * oneLayer * 14 / widthG
		put("g_height", height, se)
		measured := float64(s.Map("g_height").Values[i])
		// Relative errors of a Lorentzian in white noise, that of the height being 1: width sqrt 2, position sqrt 2/4 of the width.
		// Height and width are correlated by -1/sqrt 2, so that the area has 1 + 2 - 2 = 1. (Cramér-Rao bounds, computed.)
		areaSE := math.Pi / 2 * widthG * se
		found := measured > 5*se
		if found {
			put("g_position", 1582, math.Sqrt2/4*widthG*se/height)
			put("g_width", widthG, math.Sqrt2*widthG*se/height)
			put("d_g_ratio", p.dg, math.Hypot(1, p.dg)*se/height)
		}
		put("g_area", math.Pi/2*height*widthG, areaSE)
		height2D := height * p.ratio
		put("2d_height", height2D, se)
		measured2D := float64(s.Map("2d_height").Values[i])
		if measured2D > 5*se {
			put("2d_position", 2670, math.Sqrt2/4*p.width*se/height2D)
			put("2d_width", p.width, math.Sqrt2*p.width*se/height2D)
		}
		put("2d_area", math.Pi/2*height2D*p.width, math.Pi/2*p.width*se)
		if found {
			s.Map("2d_g_ratio").Values[i] = float32(measured2D / measured)
			s.Map("2d_g_ratio").SE[i] = float32(math.Hypot(1, measured2D/measured) * se / measured)
		}
	}
	return s
}

// publishedSpot draws a spot of that many layers from the published distributions. The spread of 2D/G spans the customary
// ranges as about 1.5 standard deviations; G area varies by 7 % (our choice: published values are missing).
func publishedSpot(r *rand.Rand, layers int, noise float64) spot {
	p := spot{layers: layers, noise: noise}
	if layers == 0 {
		p.width, p.ratio = 30, 1
		return p
	}
	w := widths2D[layers-1]
	if layers == fivePlus && r.IntN(2) == 0 {
		w = graphiteWidth
	}
	area := [...]float64{0, 1, 1.867, 2.617, 3.262, 3.817} // 532 nm, 300 nm oxide: g_area_by_layer.csv
	p.width = w.centre + w.sd*r.NormFloat64()
	p.ratio = ratioCentre(layers) * math.Exp(0.23*r.NormFloat64())
	p.area = area[layers] * (1 + 0.07*r.NormFloat64())
	if layers == fivePlus { // up to ten layers
		p.area *= 1 + 0.4*r.Float64()
	}
	return p
}

func repeat(n int, p spot) []spot {
	spots := make([]spot, n)
	for i := range spots {
		spots[i] = p
	}
	return spots
}

func interpret(t *testing.T, s *survey.Survey, set Settings) (number, probability []float32) {
	t.Helper()
	if err := fit.Apply(s, Steps(set)); err != nil {
		t.Fatal(err)
	}
	return s.Map("layer_number").Values, s.Map("layer_probability").Values
}

func warned(s *survey.Survey, part string) bool {
	return slices.ContainsFunc(s.Warnings, func(w string) bool { return strings.Contains(w, part) })
}

// share is the part of pixels that got that layer number; NaN asks for undetermined.
func share(number []float32, want float32) float64 {
	n := 0
	for _, v := range number {
		if v == want || v != v && want != want {
			n++
		}
	}
	return float64(n) / float64(len(number))
}

// Each layer number is the most probable one at the centre of what was published for it. Four and five layers overlap too much
// to ask for more.
func TestCentres(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	area := [...]float64{0, 1, 1.867, 2.617, 3.262, 3.817}
	spots := repeat(20, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.01})
	for n := 1; n <= 5; n++ {
		spots = append(spots, spot{layers: n, width: widths2D[n-1].centre, ratio: ratioCentre(n), area: area[n], noise: 0.01})
	}
	spots = append(spots, spot{layers: 5, width: graphiteWidth.centre, ratio: 0.4, area: 5, noise: 0.01}, spot{layers: 0, noise: 0.01})
	number, p := interpret(t, newMap(r, spots), Settings{Film: Exfoliated, MinProbability: 0.5})
	for i, sp := range spots[20:] {
		if got := number[20+i]; got != float32(sp.layers) {
			t.Errorf("%d layers: got %v, probability %.3f", sp.layers, got, p[20+i])
		}
	}
}

func TestPurePixels(t *testing.T) {
	const each = 4000
	for _, tt := range []struct {
		noise float64
		film  string
	}{{0.02, ""}, {0.05, ""}, {0.08, ""}, {0.05, Exfoliated}, {0.05, Grown}} {
		r := rand.New(rand.NewPCG(2, 3))
		var spots []spot
		for range each {
			for n := range 3 {
				spots = append(spots, publishedSpot(r, n, tt.noise))
			}
		}
		number, _ := interpret(t, newMap(r, spots), Settings{Film: tt.film})
		var right [3]int
		for i, v := range number {
			if v == float32(spots[i].layers) {
				right[spots[i].layers]++
			}
		}
		for n, k := range right {
			got := float64(k) / each
			t.Logf("noise %g, film %q, %d layers: %.2f %% of %d right", tt.noise, tt.film, n, 100*got, each)
			if !(got >= 0.97) {
				t.Errorf("noise %g, film %q, %d layers: %.2f %% right, want 97", tt.noise, tt.film, n, 100*got)
			}
		}
	}
}

// A probability must not promise more than it keeps. The expectations are wider than what the test draws from (a floor for
// other laboratories' flakes, twisted layers, odd quantities), so it may keep more.
func TestCalibration(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	var spots []spot
	for range 6000 {
		for n := range classes {
			spots = append(spots, publishedSpot(r, n, 0.02+0.2*r.Float64()))
		}
	}
	for _, film := range []string{Exfoliated, Unknown, Grown} {
		number, p := interpret(t, newMap(r, spots), Settings{Film: film, MinProbability: 0.5})
		for _, bin := range [][2]float32{{0.5, 0.65}, {0.65, 0.75}, {0.75, 0.85}, {0.85, 0.95}, {0.95, 1}} {
			n, right, promised := 0, 0, 0.0
			for i, v := range number {
				if v != v || p[i] < bin[0] || p[i] >= bin[1] {
					continue
				}
				n++
				promised += float64(p[i])
				if v == float32(spots[i].layers) {
					right++
				}
			}
			if n < 300 {
				t.Errorf("film %s, probability %g to %g: only %d pixels", film, bin[0], bin[1], n)
			}
			promised /= float64(n)
			got := float64(right) / float64(n)
			t.Logf("film %s, probability %g to %g: %d pixels, promised %.3f, right %.3f", film, bin[0], bin[1], n, promised, got)
			if se := math.Sqrt(promised * (1 - promised) / float64(n)); !(got >= promised-3*se) {
				t.Errorf("film %s, probability %g to %g: %.3f right, promised %.3f", film, bin[0], bin[1], got, promised)
			}
		}
	}
}

// Where a map has no single layer, two layers must not be taken for one.
func TestOnlyBilayer(t *testing.T) {
	for _, noise := range []float64{0.03, 0.1, 0.2} {
		r := rand.New(rand.NewPCG(7, 8))
		var spots []spot
		for range 5000 {
			spots = append(spots, publishedSpot(r, 2, noise))
		}
		s := newMap(r, spots)
		s.Settings = map[string]any{keyArea: 1.0} // of an earlier interpretation
		number, _ := interpret(t, s, Settings{})
		t.Logf("noise %g: one %.4f, two %.4f, undetermined %.4f", noise, share(number, 1), share(number, 2), share(number, nan32))
		if !(share(number, 1) <= 0.002) {
			t.Errorf("noise %g: %.4f of a bilayer taken for single layer", noise, share(number, 1))
		}
		if _, ok := s.Settings[keyArea]; ok || !warned(s, "no G area that belongs to single layers") {
			t.Errorf("noise %g: level %v, warnings %q", noise, s.Settings[keyArea], s.Warnings)
		}
	}
}

func TestOnlyBare(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 9))
	s := newMap(r, repeat(5000, spot{width: 30, ratio: 1, noise: 0.05}))
	number, _ := interpret(t, s, Settings{})
	// Noise beyond two standard errors in both bands, or three in one, is left undetermined: about 1 %.
	if got := share(number, 0); !(got >= 0.97) {
		t.Errorf("%.4f bare", got)
	}
	if !warned(s, "no pixel shows") {
		t.Errorf("warnings %q", s.Warnings)
	}
}

func TestOnePixel(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 9))
	for _, tt := range []struct {
		name string
		spot spot
		want float32
	}{
		{"single", spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.02}, 1},
		{"bare", spot{noise: 0.02}, 0},
	} {
		s := newMap(r, []spot{tt.spot})
		number, p := interpret(t, s, Settings{})
		if number[0] != tt.want || !(p[0] >= 0.8 && p[0] <= 1) {
			t.Errorf("%s: got %v with %v", tt.name, number[0], p[0])
		}
		if _, ok := s.Settings[keyArea]; ok {
			t.Errorf("%s: the pixel is a reference to itself", tt.name)
		}
	}
}

func TestNoData(t *testing.T) {
	s := newMap(rand.New(rand.NewPCG(1, 1)), repeat(7, spot{}))
	for k := range s.Maps {
		for i := range s.Maps[k].Values {
			s.Maps[k].Values[i], s.Maps[k].SE[i] = nan32, nan32
		}
	}
	number, p := interpret(t, s, Settings{})
	if share(number, nan32) != 1 || share(p, nan32) != 1 {
		t.Errorf("got %v with %v", number, p)
	}
}

// Disorder broadens 2D and lowers 2D/G as more layers do.
func TestDamagedSingleLayer(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	damaged := repeat(500, spot{width: 40, ratio: 0.8, area: 1, dg: 1.5, widthG: 25, noise: 0.03})
	number, _ := interpret(t, newMap(r, damaged), Settings{})
	if got := share(number, nan32); got != 1 {
		t.Errorf("without pristine film: %.3f undetermined, want all", got)
	}
	both := append(repeat(500, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.03}), damaged...)
	number, _ = interpret(t, newMap(r, both), Settings{})
	if got := share(number[500:], 1); !(got >= 0.97) {
		t.Errorf("beside pristine film of the same G area: %.3f single", got)
	}
}

// Carbon without 2D is no layer to be counted, whatever its G area.
func TestAmorphousCarbon(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	spots := append(repeat(100, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.01}),
		repeat(100, spot{width: 60, ratio: 0, area: 2, dg: 0.8, widthG: 90, noise: 0.01})...)
	number, p := interpret(t, newMap(r, spots), Settings{})
	if share(number[100:], nan32) != 1 || share(p[100:], nan32) != 1 {
		t.Errorf("got %v", number[100:])
	}
}

// A spot at an edge gets the layer number of the film that covers more than half of it, or none.
func TestEdges(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	spots := repeat(100, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.01})
	edge := []struct {
		coverage float64
		want     float32
	}{{0.02, 0}, {0.25, nan32}, {0.4, nan32}, {0.65, 1}, {0.8, 1}}
	for _, e := range edge {
		spots = append(spots, spot{width: 27.5, ratio: 2.8, area: e.coverage, noise: 0.01})
	}
	number, p := interpret(t, newMap(r, spots), Settings{})
	for i, e := range edge {
		if got := number[100+i]; got != e.want && !(got != got && e.want != e.want) {
			t.Errorf("covered by %g: got %v with %.3f, want %v", e.coverage, got, p[100+i], e.want)
		}
	}
}

// Transferred film is strained and doped: its 2D is broader and lower than in the table, but its G areas agree, whether or not
// 2D could as well be that of twisted layers.
func TestStrainedFilm(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 5))
	var spots []spot
	for range 4000 {
		spots = append(spots, spot{width: 36 + 2*r.NormFloat64(), ratio: 1.3 * math.Exp(0.2*r.NormFloat64()), area: 1 + 0.07*r.NormFloat64(), noise: 0.05})
	}
	for _, film := range []string{Unknown, Grown} {
		number, _ := interpret(t, newMap(r, spots), Settings{Film: film})
		if got := share(number, 1); !(got >= 0.97) {
			t.Errorf("film %s: %.4f single", film, got)
		}
	}
}

// Twisted layers look like one in 2D; the G area tells.
func TestTwistedLayers(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 4))
	one, two := spot{width: 29, ratio: 2.8, area: 1, noise: 0.03}, spot{width: 29, ratio: 2.8, area: 1.87, noise: 0.03}
	s := newMap(r, append(repeat(300, one), repeat(700, two)...))
	number, _ := interpret(t, s, Settings{Film: Grown})
	if got := share(number[:300], 1); !(got >= 0.97) {
		t.Errorf("%.3f of the single layers", got)
	}
	if got := share(number[300:], 2); !(got >= 0.9) {
		t.Errorf("%.3f of the twisted bilayer", got)
	}
	if !warned(s, "twisted layers") {
		t.Errorf("warnings %q", s.Warnings)
	}
}

func without(s *survey.Survey, prefix ...string) *survey.Survey {
	s.Maps = slices.DeleteFunc(s.Maps, func(q survey.Quantity) bool {
		return q.Name == "2d_g_ratio" || slices.ContainsFunc(prefix, func(p string) bool { return strings.HasPrefix(q.Name, p) })
	})
	return s
}

func TestOneWindow(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 8))
	spots := append(repeat(200, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.05}), repeat(200, spot{width: 30, noise: 0.05})...)

	s := without(newMap(r, spots), "2d_")
	number, _ := interpret(t, s, Settings{})
	if share(number[:200], nan32) != 1 || !(share(number[200:], 0) >= 0.99) {
		t.Errorf("without 2D: %.3f of the film undetermined, %.3f of the substrate bare", share(number[:200], nan32), share(number[200:], 0))
	}
	if !warned(s, "no 2D window") {
		t.Errorf("without 2D: warnings %q", s.Warnings)
	}

	s = without(newMap(r, spots), "g_", "d_")
	number, _ = interpret(t, s, Settings{})
	if !(share(number[:200], 1) >= 0.97) || !(share(number[200:], 0) >= 0.99) {
		t.Errorf("without G: %.3f of the film single, %.3f of the substrate bare", share(number[:200], 1), share(number[200:], 0))
	}
	quarter := append(repeat(50, spot{width: 27.5, ratio: 2.8, area: 1, noise: 0.02}), spot{width: 27.5, ratio: 2.8, area: 0.25, noise: 0.02})
	if number, p := interpret(t, without(newMap(r, quarter), "g_", "d_"), Settings{}); number[50] == number[50] {
		t.Errorf("without G: a spot covered by a quarter is %v with %v", number[50], p[50])
	}
	if !warned(s, "no G window") {
		t.Errorf("without G: warnings %q", s.Warnings)
	}

	s = without(newMap(r, spots), "2d_", "g_", "d_")
	if err := fit.Apply(s, Steps(Settings{})); err != nil || len(s.Maps) != 0 {
		t.Errorf("without either: %v, %d maps", err, len(s.Maps))
	}
}

func TestOtherLaser(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 9))
	spots := []spot{{width: 51.7, ratio: 1.05, area: 1.87, noise: 0.01}}
	s := newMap(r, spots)
	_, green := interpret(t, s, Settings{})
	if warned(s, "green") {
		t.Errorf("532 nm: warnings %q", s.Warnings)
	}
	s = newMap(r, spots)
	s.Laser = 632.8
	_, red := interpret(t, s, Settings{})
	if !warned(s, "632.8 nm") || !(red[0] < green[0]) {
		t.Errorf("632.8 nm: probability %v, at 532 nm %v, warnings %q", red[0], green[0], s.Warnings)
	}
}

// Neither the order of pixels nor a second interpretation changes anything.
func TestOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(10, 10))
	var spots []spot
	for range 3000 {
		spots = append(spots, publishedSpot(r, r.IntN(classes), 0.05))
	}
	s := newMap(r, spots)
	number, p := interpret(t, s, Settings{})
	order := r.Perm(len(spots))
	shuffled := newMap(r, spots)
	for _, name := range quantityNames {
		from, to := s.Map(name), shuffled.Map(name)
		for i, k := range order {
			to.Values[i], to.SE[i] = from.Values[k], from.SE[k]
		}
	}
	for range 2 {
		number2, p2 := interpret(t, shuffled, Settings{})
		for to, from := range order {
			if math.Float32bits(number[from]) != math.Float32bits(number2[to]) || math.Float32bits(p[from]) != math.Float32bits(p2[to]) {
				t.Fatalf("pixel %d: %v with %v, elsewhere in the map %v with %v", from, number[from], p[from], number2[to], p2[to])
			}
		}
	}
	for key, v := range s.Settings {
		if shuffled.Settings[key] != v {
			t.Errorf("%s: %v and %v", key, v, shuffled.Settings[key])
		}
	}
}

// The broadening of the instrument is not taken for a further layer.
func TestInstrumentWidth(t *testing.T) {
	e := Settings{InstrumentWidth: 12}.expect(532)
	// The sum of a Lorentzian's and a Gaussian's width is above that of their Voigt profile, and the larger of them below it.
	for n := 1; n < classes; n++ {
		if w, got := widths2D[n-1].centre, e.width[n].centre; !(got > w && got < w+12) {
			t.Errorf("%d layers: %.2f seen by an instrument of 12, %.2f without", n, got, w)
		}
	}
	r := rand.New(rand.NewPCG(8, 7))
	s := newMap(r, []spot{{width: 36, ratio: 1.5, area: 1, noise: 0.01}})
	_, sharp := interpret(t, s, Settings{Film: Grown})
	_, broad := interpret(t, s, Settings{Film: Grown, InstrumentWidth: 12})
	if !(broad[0] > sharp[0]) {
		t.Errorf("probability of one layer %v with a broad instrument, %v with a sharp one", broad[0], sharp[0])
	}
}

// Damage leaves the G area to decide, and makes it less sure.
func TestDamageAndArea(t *testing.T) {
	e := Settings{}.expect(532)
	px := pixel{area: 1.2, areaSE: 0.02}
	var pristine, damaged [hypotheses]float64
	e.amount(&pristine, &px, 1)
	e.amount(&damaged, &px, 0)
	if a, b := pristine[1]-pristine[2], damaged[1]-damaged[2]; !(b > 0 && b < a) {
		t.Errorf("log likelihood ratio of one to two layers: %.2f damaged, %.2f pristine", b, a)
	}
}

func TestDamage(t *testing.T) {
	for _, tt := range []struct{ dg, widthG, least, most float64 }{
		{0, 14, 0, 0}, {0.02, 16, 0, 0}, {1.5, 25, 1, 1}, {0.05, 60, 1, 1}, {0.5, 20, 0.1, 0.9}, {math.NaN(), 14, 0, 0}, {1, math.NaN(), 0, 0},
	} {
		if got := damage(&pixel{dg: tt.dg, widthG: tt.widthG}); !(got >= tt.least && got <= tt.most) {
			t.Errorf("D/G %g, G width %g: %g, want %g to %g", tt.dg, tt.widthG, got, tt.least, tt.most)
		}
	}
}

func TestSettings(t *testing.T) {
	nan := math.NaN()
	for _, set := range []Settings{
		{MinProbability: 0.3}, {MinProbability: 1}, {MinProbability: nan}, {Film: "flakes"}, {Laser: -1}, {Laser: nan}, {Oxide: -3},
		{Oxide: nan}, {InstrumentWidth: nan}, {InstrumentWidth: -1},
	} {
		if set.Check() == nil {
			t.Errorf("%+v passes", set)
		}
		s := newMap(rand.New(rand.NewPCG(1, 1)), repeat(1, spot{}))
		if fit.Apply(s, Steps(set)) == nil {
			t.Errorf("%+v runs", set)
		}
	}
	if err := (Settings{}).Check(); err != nil {
		t.Error(err)
	}
}

// A stack passes for one layer only where all of its layers are twisted, so the more layers, the less often.
func TestTwistedShare(t *testing.T) {
	for _, film := range []string{Exfoliated, Unknown, Grown} {
		e := Settings{Film: film}.expect(532)
		if e.twisted[1] != 0 || e.twisted[2] != twistedShare[film] {
			t.Errorf("film %s: %v", film, e.twisted)
		}
		for n := 3; n < classes; n++ {
			if want := e.twisted[n-1] * e.twisted[2]; !(math.Abs(e.twisted[n]/want-1) <= 1e-12) {
				t.Errorf("film %s, %d layers: %g, want %g", film, n, e.twisted[n], want)
			}
		}
	}
}

// A level needs pixels that agree on it.
func TestTwin(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 6))
	one, two := spot{width: 28, ratio: 2.8, area: 1, noise: 0.01}, spot{width: 28, ratio: 2.8, area: 1.87, noise: 0.01}
	for _, tt := range []struct {
		ones int
		want float64
	}{{leastPixels - 2, 1.87}, {leastPixels + 2, 1}} {
		s := newMap(r, append(repeat(tt.ones, one), repeat(30, two)...))
		interpret(t, s, Settings{Film: Grown})
		got, _ := s.Settings[keyArea].(float64)
		// 1 % of noise on a few pixels
		if got /= math.Pi / 2 * 14 * oneLayer; !(math.Abs(got/tt.want-1) <= 0.02) {
			t.Errorf("%d pixels at half the area: level %.3f, want %.3f", tt.ones, got, tt.want)
		}
	}
}

func BenchmarkLayerNumber(b *testing.B) {
	r := rand.New(rand.NewPCG(11, 11))
	var spots []spot
	for range 10000 {
		spots = append(spots, publishedSpot(r, r.IntN(classes), 0.05))
	}
	s := newMap(r, spots)
	set := Settings{}
	set.findLevel(s)
	e, q, l := set.expect(532), openQuantities(s), loadLevel(s)
	var px pixel
	var v verdict
	b.ReportAllocs()
	for b.Loop() {
		for i := range spots {
			q.load(&px, i, &l)
			e.judge(&px, &v)
		}
	}
	b.ReportMetric(float64(b.N*len(spots))/b.Elapsed().Seconds(), "pixels/s")
}
