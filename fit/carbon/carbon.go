// Package carbon says what the bands of graphene mean at each pixel: how many layers there are, with a probability, how many
// defects, how much strain and how many holes.
//
// It works on a survey's stored quantities only, so a survey can be interpreted again with other settings without refitting:
//
//	set := carbon.Settings{Film: carbon.Exfoliated, Oxide: 90}
//	if err := set.Check(); err != nil { ... }
//	err := fit.Apply(survey, carbon.All(set))
package carbon

import (
	"fmt"
	"slices"

	"bandgrid/fit"
	"bandgrid/mapio/survey"
)

// Kinds of film. In exfoliated flakes the layers are stacked in order, so the 2D width counts them. In grown film layers may be
// twisted against each other, and several may look like one: width and ratio then prove less, and the G area more.
const (
	Unknown    = "unknown" // the conservative one: between the other two
	Exfoliated = "exfoliated"
	Grown      = "grown"
)

// Settings steer the interpretation; the zero value works.
type Settings struct {
	// MinProbability is what the most probable layer number must reach, else it is undetermined; default 0.8. That value is
	// our choice: among pixels just above it one in five may be wrong. Above 0.5 two answers cannot both pass.
	MinProbability float64
	Film           string  // Unknown, Exfoliated or Grown; default Unknown
	Laser          float64 // nm; default: the survey's
	// Oxide is the thickness of the SiO2 under the film, nm. It enters the expected G area and 2D/G ratio. Where it is unknown
	// (0), 300 nm is taken and the expectations are widened.
	Oxide float64
	// InstrumentWidth is the FWHM of the spectrometer's response, cm-1. It broadens the published widths, which were measured
	// with about 1 cm-1. Default: as published.
	InstrumentWidth float64
}

// Check returns an error that names the first setting that makes no sense, or nil.
func (set Settings) Check() error {
	if p := set.MinProbability; p != 0 && !(p >= 0.5 && p < 1) {
		return fmt.Errorf("minimum layer probability %g: at least 0.5 and below 1 is needed", p)
	}
	if !slices.Contains([]string{"", Unknown, Exfoliated, Grown}, set.Film) {
		return fmt.Errorf("film %q: %s, %s or %s is needed", set.Film, Unknown, Exfoliated, Grown)
	}
	if l := set.Laser; l != 0 && !(l >= 200 && l <= 2000) {
		return fmt.Errorf("laser line %g nm: a value between 200 and 2000 is needed", l)
	}
	if o := set.Oxide; o != 0 && !(o > 0 && o <= 5000) {
		return fmt.Errorf("oxide thickness %g nm: a value above 0 and up to 5000 is needed, or 0 where it is unknown", o)
	}
	if w := set.InstrumentWidth; w != 0 && !(w > 0 && w <= 50) {
		return fmt.Errorf("instrument width %g cm-1: a value above 0 and up to 50 is needed, or 0 where it is unknown", w)
	}
	return nil
}

// All returns the steps of the package in their order: layer number, defects, strain and doping.
func All(set Settings) []fit.Step {
	return slices.Concat(Steps(set), DefectSteps(set), StrainSteps(set))
}

// Steps returns the steps that give layer_number and layer_probability. They run whichever of the windows the run has, and
// warn of what is missing. Settings that [Settings.Check] refuses make the first step fail.
//
// layer_number is 0 for bare substrate, 1 to 4, 5 for five or more, and NaN where it is undetermined. layer_probability is that
// of the most probable of these, also where it is too low to decide, and NaN where a pixel has no data or where no layer
// number fits what is seen.
//
// At an edge the layer number is that of the film under more than half of the spot; with less than half, but more than a stray
// part, it is undetermined. That needs the G level of a single layer. A spot that is half on three layers and half on bare
// substrate can pass for two layers, since it has their G area and nearly their 2D width. Damaged film (high D/G, broad G) is
// undetermined unless the G area decides.
func Steps(set Settings) []fit.Step {
	return []fit.Step{
		{
			Name: "single-layer G level", Scope: fit.Global,
			Run: func(s *survey.Survey) error {
				if err := set.Check(); err != nil {
					return err
				}
				set.findLevel(s)
				return nil
			},
		},
		{
			// Local, given the level that the step before has put into the survey's settings.
			Name: "layer number", Scope: fit.Local, Gives: []string{"layer_number", "layer_probability"},
			Run: func(s *survey.Survey) error {
				if err := set.Check(); err != nil {
					return err
				}
				set.countLayers(s)
				return nil
			},
		},
	}
}

// laser is the laser line, nm; 0 where neither the settings nor the survey know it.
func (set Settings) laser(s *survey.Survey) float64 {
	if set.Laser > 0 {
		return set.Laser
	}
	return s.Laser
}

func (set Settings) minProbability() float64 {
	if set.MinProbability > 0 {
		return set.MinProbability
	}
	return 0.8
}

// warn adds a warning, once.
func warn(s *survey.Survey, format string, args ...any) {
	if w := fmt.Sprintf(format, args...); !slices.Contains(s.Warnings, w) {
		s.Warnings = append(s.Warnings, w)
	}
}
