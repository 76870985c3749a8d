package synth

import "math"

// A BandTruth is a band as the film has it at a pixel: without noise, drift and the instrument's width; heights and areas with
// focus and response as measured. For a band of several components it is the single Lorentzian that fits them best. A band that
// is not there has height and area 0 and NaN for position and width.
type BandTruth struct {
	Position float64 // cm-1
	Width    float64 // FWHM, cm-1
	Height   float64 // counts
	Area     float64 // counts cm-1
}

// A Truth is what a pixel was made from. Where the spot sees several materials, the bands and fields are those of the film that
// fills most of it, heights and areas times its share; NaN where there is no film. It is overwritten by the next pixel as far as
// Spikes go.
type Truth struct {
	Row, Col           int     // on the grid
	LayerNumber        int     // of the material with the largest share; 0 bare
	PureFraction       float64 // its share of the spot
	Coverage           float64 // share of film of any kind
	D, G, DPrime, TwoD BandTruth
	DGRatio            float64 // heights
	DefectDistance     float64 // nm; +Inf without defects
	Strain             float64 // %
	HoleDensity        float64 // 1e12 cm-2
	Drift              float64 // by which bands lie higher in the run than stated here, cm-1
	Focus              float64 // fraction of the light that is left
	Spikes             []int32 // channels hit, in the run's order
}

var absent = BandTruth{Position: math.NaN(), Width: math.NaN()}

// A film is what one object shows at one place.
type film struct {
	d, g, dprime, twoD BandTruth
	ratio, distance    float64
	strain, holes      float64
	broaden            float64 // of 2D, cm-1
}
