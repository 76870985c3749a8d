package synth

import "math"

// film works out what an object shows in its share of the spot. Heights are those of a spot that it fills alone.
func (g *Generator) film(o *object, sh *share) (f film) {
	s := g.s
	f.d, f.g, f.dprime, f.twoD = absent, absent, absent, absent
	f.distance = math.Inf(1)
	if o.Strain != nil {
		f.strain = g.average(o.Strain, sh, same)
	}
	if o.HoleDensity != nil {
		f.holes = g.average(o.HoleDensity, sh, same)
	}
	distance := 0.0 // none
	switch {
	case o.DGRatio != nil:
		f.ratio = max(0, g.average(o.DGRatio, sh, same))
		distance = defectDistance(f.ratio, s.energy)
	case o.DefectDistance != nil: // it is the density that averages
		if density := g.average(o.DefectDistance, sh, density); density > 0 {
			distance = 1 / math.Sqrt(density)
		}
		f.ratio = defectRatio(distance, s.energy)
	}
	if distance > 0 {
		f.distance = distance
	}
	if o.Layers == 0 || o.Bands != nil {
		return f
	}
	layers := float64(o.Layers)
	shift, pairs := gDoping(f.holes / layers) // carriers spread over the layers
	slope := holeSlope
	if f.holes < 0 {
		slope = electronSlope
	}
	broaden, weaken := damage(distance)
	f.broaden = 2 * broaden // two phonons and the electrons between them lose their memory

	f.g = band(o.gPosition+shift+gStrainRate*f.strain, gWidth+pairs+broaden, 0)
	f.g.Height = o.gArea / lorentzArea(1, f.g.Width)
	if f.ratio > 0 {
		f.d = band(o.dPosition+dStrainRate*f.strain, dWidth+broaden, f.ratio*f.g.Height)
		f.dprime = band(o.dprimePosition+shift+dprimeStrainRate*f.strain, dprimeWidth+broaden, f.d.Height/o.DOverDPrime)
	}
	// Phys. Rev. B 80, 165413 (2009), from memory: A(2D) falls as (0.033 eV + 0.06 |E_F|)^-2 for the energy of holes.
	doped := 0.033 / (0.033 + 0.06*fermiEnergy(f.holes/layers))
	// Undoped and undamaged 2D/G as the scene has it, for the height that G would have without damage.
	height := o.twoDG * doped * doped * o.gArea / lorentzArea(1, gWidth+pairs)
	width := o.makeup.width
	f.twoD = band(o.twoDPosition+slope*shift+twoDStrainRate*f.strain, width+f.broaden, height*weaken*width/(width+f.broaden))
	return f
}

func same(v float64) float64 { return v }

// density is proportional to the density of defects at a mean distance; 0 stands for no defects.
func density(distance float64) float64 {
	if distance <= 0 {
		return 0
	}
	return 1 / (distance * distance)
}

func band(position, width, height float64) BandTruth {
	return BandTruth{Position: position, Width: width, Height: height}
}

// paint adds the bands of a film to the spectrum.
func (g *Generator) paint(o *object, weight, drift float64, f *film) {
	y, x := g.mean, g.s.shifts
	for _, b := range [...]*BandTruth{&f.d, &f.g, &f.dprime} {
		addLorentzian(y, x, weight*b.Height, b.Position+drift, b.Width, g.sigma)
	}
	// Damage folds each component with a Lorentzian: areas stay but for the weakening that is in the height already. The single
	// Lorentzian that stands for them broadens alike (exactly so for one component).
	height := f.twoD.Height * f.twoD.Width / o.makeup.width
	for _, p := range o.makeup.parts {
		width := p.width + f.broaden
		addLorentzian(y, x, weight*height*p.height*p.width/width, f.twoD.Position+p.offset+drift, width, g.sigma)
	}
}

// paintBands adds bands that the scene gives as numbers.
func (g *Generator) paintBands(o *object, weight, drift float64, f *film) {
	for _, b := range o.Bands {
		addLorentzian(g.mean, g.s.shifts, weight*b.Height, b.Position+drift, b.Width, g.sigma)
		truth := band(b.Position, b.Width, b.Height)
		switch b.Name {
		case "d":
			f.d = truth
		case "g":
			f.g = truth
		case "dprime":
			f.dprime = truth
		case "2d":
			f.twoD = truth
		}
	}
	if f.g.Height > 0 {
		f.ratio = f.d.Height / f.g.Height
	}
}
