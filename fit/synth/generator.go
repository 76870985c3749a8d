package synth

import (
	"math"
	"math/rand/v2"
)

// A Generator makes pixels. It owns scratch memory: each worker needs its own.
type Generator struct {
	s       *Scene
	pcg     rand.PCG
	r       *rand.Rand
	det     detector
	mean    []float64 // ascending shifts
	turned  []float64 // in the run's order
	shares  []share
	partial []int
	owner   []int   // object of each sub-sample of the spot, -1 bare
	x, y    float64 // centre of the spot, um, on the sample
	hit     []int32
	sigma   float64 // of the instrument's Gaussian, cm-1
}

// A share is the part of the spot that one object fills.
type share struct {
	object int // -1 bare
	weight float64
	x, y   float64 // its centre of gravity, um, on the sample
}

// NewGenerator returns a generator of the scene's pixels.
func (s *Scene) NewGenerator() *Generator {
	g := &Generator{s: s, mean: make([]float64, len(s.shifts)), owner: make([]int, len(s.spot)),
		sigma: s.Instrument.Width / 2.354820045}
	if s.Instrument.Descending {
		g.turned = make([]float64, len(s.shifts))
	}
	g.r = rand.New(&g.pcg)
	g.det = newDetector(&s.Instrument, g.r)
	return g
}

// Pixel makes pixel i, in order of acquisition: its counts, one for each channel in the run's order, the stage position that the
// run reports, um, and the truth. It panics where counts has another length than the axis. It allocates nothing.
func (g *Generator) Pixel(i int, counts []float32) (x, y float64, truth Truth) {
	s := g.s
	if len(counts) != len(s.shifts) {
		panic("synth: counts and axis differ in length")
	}
	// A pixel's stream is chosen by two numbers. The second one is stirred: neighbouring states of this generator stay
	// neighbours for a step.
	g.pcg.Seed(s.Seed, stir(uint64(i)))
	truth.Row, truth.Col = s.Cell(i)
	x = s.Stage.X0 + float64(truth.Col)*s.Stage.DX + s.Stage.Jitter*g.r.NormFloat64()
	y = s.Stage.Y0 + float64(truth.Row)*s.Stage.DY + s.Stage.Jitter*g.r.NormFloat64()
	truth.Drift = s.Instrument.Drift * float64(i) / 1000
	truth.Focus = 1 - s.Instrument.Focus*(1-math.Cos(2*math.Pi*float64(i)/s.Instrument.FocusPeriod))/2
	g.spectrum(x, y, &truth)
	mean := g.mean
	if g.turned != nil {
		for k, v := range g.mean {
			g.turned[len(g.turned)-1-k] = v
		}
		mean = g.turned
	}
	g.det.measure(counts, mean)
	g.spikes(counts, &truth)
	return x, y, truth
}

// stir is a bijection of 64-bit numbers, the finalizer of SplitMix64 (ACM SIGPLAN Not. 49, 453 (2014)).
func stir(v uint64) uint64 {
	v += 0x9e3779b97f4a7c15
	v = (v ^ v>>30) * 0xbf58476d1ce4e5b9
	v = (v ^ v>>27) * 0x94d049bb133111eb
	return v ^ v>>31
}

// spectrum fills g.mean, counts without noise and offset, and the truth.
func (g *Generator) spectrum(x, y float64, truth *Truth) {
	s := g.s
	g.cover(s.Stage.onSample(x, y))
	truth.D, truth.G, truth.DPrime, truth.TwoD = absent, absent, absent, absent
	truth.DGRatio, truth.DefectDistance, truth.Strain, truth.HoleDensity = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	clear(g.mean)
	var best, most float64
	for k := range g.shares {
		sh := &g.shares[k]
		layers := g.layers(sh)
		if layers > 0 {
			truth.Coverage += sh.weight
		}
		same := 0.0 // share of this layer number, whatever the object
		for j := range g.shares {
			if g.layers(&g.shares[j]) == layers {
				same += g.shares[j].weight
			}
		}
		if same > most {
			most = same
			truth.LayerNumber, truth.PureFraction = layers, same
		}
		if sh.object < 0 || layers == 0 && s.objects[sh.object].Bands == nil {
			continue
		}
		o := &s.objects[sh.object]
		f := g.film(o, sh)
		if o.Bands != nil {
			g.paintBands(o, sh.weight, truth.Drift, &f)
		} else {
			g.paint(o, sh.weight, truth.Drift, &f)
		}
		if sh.weight > best {
			best = sh.weight
			truth.D, truth.G, truth.DPrime, truth.TwoD = f.d, f.g, f.dprime, f.twoD
			truth.DGRatio, truth.DefectDistance = f.ratio, f.distance
			truth.Strain, truth.HoleDensity = f.strain, f.holes
		}
	}
	for _, line := range s.Signal.Lines {
		left := 0.0
		for k := range g.shares {
			left += g.shares[k].weight * math.Pow(line.PerLayer, float64(g.layers(&g.shares[k])))
		}
		addLorentzian(g.mean, s.shifts, line.Height*left, line.Position+truth.Drift, line.Width, g.sigma)
	}
	for i := range g.mean {
		g.mean[i] = max(0, truth.Focus*s.respond[i]*(g.mean[i]+s.back[i]))
	}
	for _, b := range [...]*BandTruth{&truth.D, &truth.G, &truth.DPrime, &truth.TwoD} {
		if b.Height != 0 {
			b.Height *= best * truth.Focus * max(0, 1+(s.Instrument.Response-1)*(b.Position-1580)/(2670-1580))
			b.Area = lorentzArea(b.Height, b.Width)
		}
	}
	if truth.G.Height > 0 && s.Instrument.Response != 1 {
		truth.DGRatio = truth.D.Height / truth.G.Height
	}
}

func (g *Generator) layers(sh *share) int {
	if sh.object < 0 {
		return 0
	}
	return g.s.objects[sh.object].Layers
}

// cover finds which objects the spot at a place on the sample sees. Most pixels see one: no edge is within the spot's reach, and
// its samples need not be looked at.
func (g *Generator) cover(x, y float64) {
	s := g.s
	g.x, g.y = x, y
	g.partial, g.shares = g.partial[:0], g.shares[:0]
	base := -1
	for i := len(s.objects) - 1; i >= 0; i-- {
		o := &s.objects[i]
		if x < o.x0-s.reach || x > o.x1+s.reach || y < o.y0-s.reach || y > o.y1+s.reach {
			continue
		}
		m := o.margin(x, y)
		if m > s.reach {
			base = i
			break
		}
		if m > -s.reach {
			g.partial = append(g.partial, i)
		}
	}
	if len(g.partial) == 0 {
		g.shares = append(g.shares, share{base, 1, x, y})
		for i := range g.owner {
			g.owner[i] = base
		}
		return
	}
	for i, p := range s.spot {
		px, py := x+p.x, y+p.y
		owner := base
		for _, k := range g.partial {
			if s.objects[k].inside(px, py) {
				owner = k
				break
			}
		}
		g.owner[i] = owner
		k := 0
		for k < len(g.shares) && g.shares[k].object != owner {
			k++
		}
		if k == len(g.shares) {
			g.shares = append(g.shares, share{object: owner})
		}
		sh := &g.shares[k]
		sh.weight++
		sh.x += px
		sh.y += py
	}
	for k := range g.shares {
		sh := &g.shares[k]
		sh.x /= sh.weight
		sh.y /= sh.weight
		sh.weight /= float64(len(s.spot))
	}
}

// average returns the mean of a function of a field over the part of the spot that an object fills: of the smooth part at the
// share's centre, of areas by their share.
func (g *Generator) average(f *Field, sh *share, of func(float64) float64) float64 {
	v := of(f.smooth(sh.x, sh.y))
	near := false
	for i := range f.Areas {
		near = near || f.Areas[i].margin(g.x, g.y) > -g.s.reach
	}
	if !near {
		return v
	}
	sum, n := 0.0, 0
	for i, p := range g.s.spot {
		if g.owner[i] != sh.object {
			continue
		}
		n++
		if a := f.area(g.x+p.x, g.y+p.y); a >= 0 {
			sum += of(f.Areas[a].Value)
		} else {
			sum += v
		}
	}
	return sum / float64(n)
}

// spikes adds cosmic rays.
func (g *Generator) spikes(counts []float32, truth *Truth) {
	g.hit = g.hit[:0]
	for n := poisson(g.r, g.s.Spikes.Rate); n > 0; n-- {
		channel := g.r.IntN(len(counts))
		height := g.s.Spikes.Least + g.s.Spikes.Mean*g.r.ExpFloat64()
		width := 1
		if u := g.r.Float64(); u > 0.9 { // slanted tracks
			width = 3
		} else if u > 0.6 {
			width = 2
		}
		for w := range width {
			if channel+w >= len(counts) {
				break
			}
			v := float64(counts[channel+w]) + height
			if g.det.whole {
				v = math.Floor(v + 0.5)
			}
			counts[channel+w] = float32(min(g.det.top, v))
			g.hit = append(g.hit, int32(channel+w))
			height *= 0.2 + 0.6*g.r.Float64()
		}
	}
	truth.Spikes = g.hit
}
