package synth

import (
	"errors"
	"fmt"
	"math/rand/v2"
)

// An object is an Object made ready.
type object struct {
	*Object
	x0, y0, x1, y1 float64 // box
	makeup         makeup
	gArea          float64 // undamaged, counts cm-1
	twoDG          float64 // undoped 2D/G height ratio
	gPosition      float64 // without strain and doping
	dPosition      float64
	dprimePosition float64
	twoDPosition   float64
}

// Widths of bands of an undoped and perfect layer, cm-1, from memory: G is 5 plus what electron-hole pairs add (15.6).
const (
	dWidth      = 22
	dprimeWidth = 12
	gWidth      = 5
)

// Shifts by biaxial strain, cm-1 per %: G and 2D from the Grüneisen parameters 1.8 and 2.4 of Phys. Rev. Applied 2, 054008
// (2014); D from Nano Lett. 10, 3453 (2010), from memory; D' as its mode, close to G's.
const (
	gStrainRate      = -57
	twoDStrainRate   = -128
	dStrainRate      = -61.2
	dprimeStrainRate = -58
)

// Shift of 2D over that of G by doping: holes Nat. Commun. 3, 1024 (2012), electrons Phys. Rev. B 91, 205413 (2015), from memory.
const holeSlope, electronSlope = 0.70, 0.2

// upshift is how far the 2D band of 1, 2, 3, 4, 5 and 10 layers, as one Lorentzian sees it, lies above that of one layer, cm-1
// (common practice; graphite's main component is then about 40 above).
var upshift = [...]float64{0, 12, 17, 20, 22, 29}

var upshiftLayers = []float64{1, 2, 3, 4, 5, 10}

// twoDG is the default of [Signal.TwoDG].
var twoDG = [...]float64{3, 1.05, 0.75, 0.62, 0.55, 0.4}

func (s *Scene) prepareObject(i int) error {
	o := &s.Objects[i]
	r := rand.New(rand.NewPCG(s.Seed, streamObjects-uint64(i)))
	area, width := 1+s.Signal.GAreaSpread*min(3, max(-3, r.NormFloat64())), drawWidth(max(1, o.Layers), o.Turbostratic, r)
	if o.Bands == nil {
		if o.GAreaFactor != 0 {
			area = o.GAreaFactor
		}
		if o.TwoDWidth != 0 {
			width = o.TwoDWidth
		}
	}
	if err := o.check(); err != nil {
		return err
	}
	for name, f := range map[string]*Field{"d_g_ratio": o.DGRatio, "defect_distance_nm": o.DefectDistance, "strain": o.Strain,
		"hole_density": o.HoleDensity} {
		if f == nil {
			continue
		}
		// A stream for each field: none changes with another's presence.
		if err := f.prepare(rand.New(rand.NewPCG(s.Seed^hash(name), streamObjects-uint64(i)))); err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
	}
	setDefault(&o.DOverDPrime, 7)
	p := object{Object: o}
	p.x0, p.y0, p.x1, p.y1 = o.box()
	s.objects[i] = p
	if o.Layers == 0 || o.Bands != nil {
		return nil
	}
	p.makeup = newMakeup(o.Layers, o.Turbostratic, width, o.TwoDSkew)
	_, pairs := gDoping(0)
	one := s.optics.enhancement(1, 1581.6)
	p.gArea = lorentzArea(s.Signal.G, gWidth+pairs) * area * s.optics.enhancement(o.Layers, 1581.6) / one
	layers := float64(o.Layers)
	ratios := make([]float64, len(twoDG))
	oxide300 := newOptics(s.Laser, 300)
	interference := s.optics.enhancement(1, 2670) / one * oxide300.enhancement(1, 1581.6) / oxide300.enhancement(1, 2670)
	for k, v := range twoDG {
		ratios[k] = v * interference
	}
	copy(ratios, s.Signal.TwoDG)
	shift := interpolate(upshiftLayers, upshift[:], layers)
	if o.Turbostratic {
		layers = 1
		shift = 12 // 10 to 20, Phys. Rev. Lett. 97, 187401 (2006), from memory
	}
	p.twoDG = interpolate(upshiftLayers, ratios, layers)
	// Dispersion with the laser: anchors at 2.41 eV and slopes from Phys. Rev. B 61, 14095 (2000) and 76, 233407 (2007), Nat.
	// Commun. 3, 1024 (2012), from memory.
	p.gPosition = 1581.6
	p.dPosition = 1345 + 50*(s.energy-2.41)
	p.dprimePosition = 1620 + 10*(s.energy-2.41)
	p.twoDPosition = 2676.9 + 88*(s.energy-1239.842/514.5) + shift
	s.objects[i] = p
	return nil
}

func (o *Object) check() error {
	switch {
	case o.Layers < 0 || o.Layers > 1000:
		return fmt.Errorf("%d layers", o.Layers)
	case o.DGRatio != nil && o.DefectDistance != nil:
		return errors.New("give d_g_ratio or defect_distance_nm, not both")
	case !(o.GAreaFactor >= 0 && o.TwoDWidth >= 0 && o.DOverDPrime >= 0):
		return errors.New("g_area_factor, 2d_width and d_over_dprime must not be negative")
	case !(o.TwoDSkew >= 0 && o.TwoDSkew <= 0.5):
		return fmt.Errorf("2d_skew is %g; it must lie between 0 and 0.5", o.TwoDSkew)
	}
	for _, b := range o.Bands {
		if err := b.check(); err != nil {
			return err
		}
	}
	return o.Shape.check()
}

// hash is FNV-1a, for streams of random numbers that go by a name.
func hash(name string) uint64 {
	h := uint64(14695981039346656037)
	for _, c := range []byte(name) {
		h = (h ^ uint64(c)) * 1099511628211
	}
	return h
}

// lorentzArea is the area of a Lorentzian of that height and FWHM.
func lorentzArea(height, width float64) float64 { return 1.5707963267948966 * height * width }
