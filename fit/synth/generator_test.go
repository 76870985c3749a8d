package synth

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// must prepares a scene put together in a test.
func must(t testing.TB, s *Scene) *Scene {
	t.Helper()
	if err := s.Prepare(); err != nil {
		t.Fatal(err)
	}
	return s
}

func TestPixelsDependOnTheirNumberOnly(t *testing.T) {
	s := must(t, &Scene{Seed: 9, Stage: Stage{Cols: 7, Rows: 5, Jitter: 0.1, Order: "serpentine"},
		Instrument: Instrument{Channels: 80, Spot: 1, Width: 3, Background: 20, ReadNoise: 2, Correlation: 0.2, Descending: true},
		Spikes:     Spikes{Rate: 0.5},
		Objects: []Object{{Layers: 1, Shape: Shape{Disc: &Disc{3, 2, 2}}, Strain: &Field{Spread: 0.1}},
			{Layers: 2, Shape: Shape{Polygon: [][2]float64{{1, 1}, {3, 1}, {2, 3}}}}}})
	type pixel struct {
		x, y   float64
		counts []float32
		spikes []int32
	}
	make1 := func(g *Generator, i int) pixel {
		p := pixel{counts: make([]float32, 80)}
		var truth Truth
		p.x, p.y, truth = g.Pixel(i, p.counts)
		p.spikes = slices.Clone(truth.Spikes)
		return p
	}
	forwards := make([]pixel, s.Len())
	for i, g := 0, s.NewGenerator(); i < s.Len(); i++ {
		forwards[i] = make1(g, i)
	}
	g := s.NewGenerator()
	for i := s.Len() - 1; i >= 0; i-- {
		p, q := make1(g, i), forwards[i]
		if p.x != q.x || p.y != q.y || !slices.Equal(p.counts, q.counts) || !slices.Equal(p.spikes, q.spikes) {
			t.Fatalf("pixel %d differs when pixels are made in another order", i)
		}
	}
	if slices.Equal(forwards[0].counts, forwards[1].counts) {
		t.Error("two pixels have the same noise")
	}
	// The same pixels as a scan.
	i := 0
	for block, err := range s.Scan().Blocks(context.Background()) {
		if err != nil {
			t.Fatal(err)
		}
		for p, err := range block.Pixels() {
			if err != nil || !slices.Equal(p.Counts, forwards[i].counts) || p.X != forwards[i].x || p.Index != i%blockPixels {
				t.Fatalf("pixel %d of the scan differs (%v)", i, err)
			}
			i++
		}
	}
	if i != s.Len() {
		t.Errorf("the scan has %d pixels, want %d", i, s.Len())
	}
}

func TestPixelsAllocateNothing(t *testing.T) {
	s := must(t, &Scene{Stage: Stage{Cols: 20, Rows: 20, DX: 0.3}, Instrument: Instrument{Spot: 1, Width: 2, Background: 50},
		Spikes: Spikes{Rate: 1}, Objects: []Object{{Layers: 2, Shape: Shape{Disc: &Disc{3, 3, 2}},
			DGRatio: &Field{Areas: []Area{{Shape: Shape{Disc: &Disc{3, 3, 1}}, Value: 1}}}}}})
	g := s.NewGenerator()
	counts := make([]float32, len(s.Axis()))
	i := 0
	for ; i < s.Len(); i++ { // scratch memory grows to what the scene needs
		g.Pixel(i, counts)
	}
	if n := testing.AllocsPerRun(s.Len(), func() { i = (i + 1) % s.Len(); g.Pixel(i, counts) }); n > 0.02 { // a rare pixel has more spikes
		t.Errorf("%g allocations per pixel", n)
	}
}

// A spot near a straight edge: its share on the film is the error function of the distance.
func TestSpotOnEdge(t *testing.T) {
	const fwhm = 0.8
	sigma := fwhm / (2 * math.Sqrt(2*math.Ln2))
	var squares, n float64
	for angle := 0.0; angle < 2*math.Pi; angle += 0.1 {
		sin, cos := math.Sincos(angle)
		turn := func(x, y float64) [2]float64 { return [2]float64{cos*x - sin*y, sin*x + cos*y} }
		s := must(t, &Scene{Instrument: Instrument{Spot: fwhm, Noiseless: true},
			Objects: []Object{{Layers: 1, Shape: Shape{Polygon: [][2]float64{turn(0, -50), turn(50, -50), turn(50, 50), turn(0, 50)}}}}})
		g := s.NewGenerator()
		counts := make([]float32, len(s.Axis()))
		full := 0.0
		for _, d := range []float64{5, 0.5, 0.34, 0.2, 0.1, 0, -0.07, -0.3, -0.6, -5} {
			p := turn(d, 1.7)
			s.Stage.X0, s.Stage.Y0 = p[0], p[1]
			_, _, truth := g.Pixel(0, counts)
			want := phi(d / sigma)
			if math.Abs(d) < 1 {
				squares += (truth.Coverage - want) * (truth.Coverage - want)
				n++
			}
			if !(math.Abs(truth.Coverage-want) <= 0.012) { // documented for the spot's samples
				t.Errorf("edge at angle %g, %g um away: share %.4f, want %.4f", angle, d, truth.Coverage, want)
			}
			if truth.Coverage > 0 {
				if d == 5 {
					full = truth.G.Height
				}
				if !(math.Abs(truth.G.Height-truth.Coverage*full) <= 1e-9*full) {
					t.Errorf("%g um away: G height %.3f, want the share of %.3f", d, truth.G.Height, full)
				}
			}
			if truth.Coverage != 0.5 && (truth.LayerNumber == 1) != (truth.Coverage > 0.5) ||
				!(math.Abs(truth.PureFraction-max(truth.Coverage, 1-truth.Coverage)) <= 1e-12) {
				t.Errorf("%g um away: layer number %d pure to %g, share of film %g", d, truth.LayerNumber, truth.PureFraction, truth.Coverage)
			}
		}
	}
	if rms := math.Sqrt(squares / n); !(rms <= 0.0035) { // documented 0.0024 over all distances; here the steep ones
		t.Errorf("shares are off by %.4f (root mean square)", rms)
	}
}

// The noiseless spectrum of one layer is the sum of its bands in closed form, and the truth names them.
func TestSpectrumOfOneLayer(t *testing.T) {
	s := must(t, &Scene{Instrument: Instrument{Noiseless: true, Background: 30, Slope: 0.01, Offset: 7, Response: 0.8, Channels: 300},
		Objects: []Object{{Layers: 1, Shape: Shape{Everywhere: true}, DGRatio: Const(0.4), Strain: Const(0.1), HoleDensity: Const(3),
			TwoDWidth: 26, GAreaFactor: 1.1}}})
	counts := make([]float32, 300)
	_, _, truth := s.NewGenerator().Pixel(0, counts)
	for k, x := range s.Axis() {
		r := 1 - 0.2*(x-1580)/1090
		want := r * (30 + 0.01*(x-1200))
		for _, b := range []BandTruth{truth.D, truth.G, truth.DPrime, truth.TwoD} {
			u := 2 * (x - b.Position) / b.Width
			atBand := 1 - 0.2*(b.Position-1580)/1090
			want += b.Height * r / atBand / (1 + u*u)
		}
		if got := float64(counts[k]) - 7; !(math.Abs(got-want) <= 1e-4) { // float32
			t.Fatalf("%.1f cm-1: %.5f counts, want %.5f", x, got, want)
		}
	}
	// 3e12 holes move G by 7.77 (Nat. Mater. 6, 198 (2007), computed), 0.1 % of strain by -5.7 and 2D by -12.8.
	if want := 1581.6 + 7.77 - 5.7; !(math.Abs(truth.G.Position-want) <= 0.03) {
		t.Errorf("G at %.2f, want %.2f", truth.G.Position, want)
	}
	// 2D at 532 nm: 2669.9 with holes 0.7 times what they move G.
	if want := 2669.9 + 0.7*7.77 - 12.8; !(math.Abs(truth.TwoD.Position-want) <= 0.1) {
		t.Errorf("2D at %.2f, want %.2f", truth.TwoD.Position, want)
	}
	if truth.TwoD.Width <= 26 || truth.TwoD.Width > 26.5 { // D/G of 0.4 is 18 nm: hardly any broadening
		t.Errorf("2D is %.3f wide, want a little above 26", truth.TwoD.Width)
	}
	if ratio := truth.DGRatio / 0.4; !(math.Abs(ratio-truth.D.Height/truth.G.Height/0.4) <= 1e-12 && ratio > 1 && ratio < 1.07) {
		t.Errorf("D/G is %.4f; the response should raise 0.4 a little", truth.DGRatio)
	}
	if !(math.Abs(truth.G.Area/(math.Pi/2*truth.G.Height*truth.G.Width)-1) <= 1e-12) {
		t.Error("the area of G is not π/2 times height and width")
	}
}

func TestGAreaByLayer(t *testing.T) {
	// Times that of one layer on 300 nm oxide at 532 nm, by the multilayer formula of Appl. Phys. Lett. 92, 043121 (2008).
	area := map[int]float64{}
	for _, n := range []int{1, 2, 3, 4, 5} {
		s := Uniform(1, Object{Layers: n}, Instrument{Noiseless: true}, 1)
		_, _, truth := s.NewGenerator().Pixel(0, make([]float32, len(s.Axis())))
		area[n] = truth.G.Area
	}
	for n, want := range map[int]float64{2: 1.867, 3: 2.617, 4: 3.262, 5: 3.817} {
		if got := area[n] / area[1]; !(math.Abs(got-want) <= 2e-3) {
			t.Errorf("%d layers: %.4f, want %g", n, got, want)
		}
	}
}

func TestWidthsDrawn(t *testing.T) {
	// Small 6, 195 (2010), from memory; tolerances of four standard errors.
	r := rand.New(rand.NewPCG(3, 4))
	for layers, want := range map[int][2]float64{1: {27.5, 3.8}, 2: {51.7, 1.7}, 3: {56.2, 1.6}, 5: {66.1, 1.4}} {
		var sum, square float64
		const n = 2000
		for range n {
			w := drawWidth(layers, false, r)
			sum += w
			square += (w - want[0]) * (w - want[0])
		}
		// The limits cut off 0.6 % on either side, which lowers the spread by up to 4 % and moves the mean of one layer by 0.01.
		if mean := sum / n; !(math.Abs(mean-want[0]) <= 4*want[1]/math.Sqrt(n)+0.01) {
			t.Errorf("%d layers: mean width %.2f, want %g", layers, mean, want[0])
		}
		if sd := math.Sqrt(square / n); !(sd/want[1] >= 0.96-4/math.Sqrt(2*n) && sd/want[1] <= 1+4/math.Sqrt(2*n)) {
			t.Errorf("%d layers: spread %.2f, want %g", layers, sd, want[1])
		}
	}
}

func TestExposedAreaAndScratch(t *testing.T) {
	s := must(t, &Scene{Stage: Stage{Cols: 3, DX: 10}, Instrument: Instrument{Spot: 0.5, Noiseless: true},
		Objects: []Object{{Layers: 1, Shape: Shape{Everywhere: true}, DGRatio: &Field{Value: 0.1, Areas: []Area{
			{Shape: Shape{Disc: &Disc{10, 0, 3}}, Value: 1.5}, {Shape: Shape{Path: [][2]float64{{20, -5}, {20.25, 5}}, PathWidth: 0.25}, Value: 2}}}}}})
	g, counts := s.NewGenerator(), make([]float32, len(s.Axis()))
	var ratio [3]float64
	for i := range ratio {
		_, _, truth := g.Pixel(i, counts)
		ratio[i] = truth.DGRatio
	}
	// The scratch's edges lie 0.0002 from ±0.125 about 20.125; the spot at 20 sees it from 0 to 0.25.
	share := phi(0.25/(0.5/2.354820045)) - 0.5
	if want := 0.1 + 1.9*share; ratio[0] != 0.1 || ratio[1] != 1.5 || !(math.Abs(ratio[2]-want) <= 1.9*0.024) {
		t.Errorf("D/G is %v, want 0.1, 1.5, %.3f (within twice the error of an edge)", ratio, want)
	}
}

func TestFieldStatistics(t *testing.T) {
	// Over many seeds: standard deviation as asked, and exp(-d²/2l²) between points d apart.
	var a, ab float64
	const n = 4000
	for seed := range uint64(n) {
		f := Field{Spread: 0.2, Length: 3}
		if err := f.prepare(rand.New(rand.NewPCG(seed, 0))); err != nil {
			t.Fatal(err)
		}
		p, q := f.smooth(1, 2), f.smooth(1, 5)
		a, ab = a+p*p, ab+p*q
	}
	if got := math.Sqrt(a / n); !(math.Abs(got/0.2-1) <= 5/math.Sqrt(2*n)) {
		t.Errorf("spread %.4f, want 0.2", got)
	}
	if got := ab / a; !(math.Abs(got-math.Exp(-0.5)) <= 5/math.Sqrt(n)) {
		t.Errorf("correlation at one length %.3f, want %.3f", got, math.Exp(-0.5))
	}
}

func TestDriftAndFocus(t *testing.T) {
	s := Uniform(2001, Object{Bands: []Band{{Name: "g", Position: 1580, Width: 15, Height: 100}}},
		Instrument{Noiseless: true, Drift: 0.5, Focus: 0.3, FocusPeriod: 2000, From: 1500, To: 1660, Channels: 1601}, 1)
	g, counts := s.NewGenerator(), make([]float32, 1601)
	top := func(i int) (at float64, height float32) {
		g.Pixel(i, counts)
		for k, v := range counts {
			if v > height {
				at, height = s.Axis()[k], v
			}
		}
		return at, height
	}
	if at, h := top(0); !(math.Abs(at-1580) <= 1e-9) || h != 100 {
		t.Errorf("first pixel: %g counts at %g", h, at)
	}
	if at, h := top(1000); !(math.Abs(at-1580.5) <= 1e-9) || !(math.Abs(float64(h)-70) <= 1e-4) {
		t.Errorf("pixel 1000: %g counts at %g, want 70 at 1580.5", h, at)
	}
}
