package fit

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"regexp"
	"slices"
	"strings"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
)

// A Recipe says how spectra are prepared and fitted. [Graphene] is the built-in one; others are JSON files of the same form.
// All positions hold for the reference laser line; with another line, bands and windows move by their dispersion.
type Recipe struct {
	Name           string   `json:"name"`
	ReferenceLaser float64  `json:"reference_laser_nm"`
	Windows        []Window `json:"windows"`
	Ratios         []Ratio  `json:"ratios"`
	// SpikeThreshold is the residual, in standard deviations of its channel, above which a sharp excess is taken for a cosmic ray.
	SpikeThreshold float64 `json:"spike_threshold"`
	// Discrepancy is how far bands may differ from their shapes, as a fraction of the height: it adds to the noise in weights and
	// errors, and limits what a misfit may prove in the choice of a make-up.
	Discrepancy float64 `json:"discrepancy"`
	// InstrumentWidth is the FWHM of the spectrometer's line, taken as Gaussian. Where it is known, Lorentzian bands are fitted
	// as seen through it, so that their widths are the natural ones. 0: not known, widths are as measured.
	InstrumentWidth float64 `json:"instrument_width_cm-1"`
	// Baseline is taken off the whole spectrum before the windows are fitted, for strong luminescence; none by default, as its
	// uncertainty is not in the errors of the fit.
	Baseline clean.Baseline `json:"baseline"`
	// Substrate asks for what the bare pixels of the map show beside the background, such as lines of silicon or of the air, as a
	// further term of the background.
	Substrate bool `json:"substrate"`
	// PoorFit is the reduced chi-square of a window above which further starts are tried and the pixel is marked.
	PoorFit float64 `json:"poor_fit"`
}

// A Window is a stretch of the spectrum that is fitted at once.
type Window struct {
	Name       string  `json:"name"`
	From       float64 `json:"from_cm-1"`
	To         float64 `json:"to_cm-1"`
	Dispersion float64 `json:"dispersion_cm-1_per_eV"` // the window moves with the laser line
	Background int     `json:"background_order"`       // of the polynomial under the bands: 0 constant, 1 linear ... 4
	Optional   bool    `json:"optional"`               // nothing is missing where the run does not cover it
	Bands      []Band  `json:"bands"`
}

// A Band is one line of the model.
type Band struct {
	Name       string  `json:"name"`
	Shape      string  `json:"shape"` // "lorentzian", "gaussian", "voigt" (Gaussian part free), "pseudo-voigt" or "fano"
	Position   float64 `json:"position_cm-1"`
	Dispersion float64 `json:"dispersion_cm-1_per_eV"`
	Width      float64 `json:"width_cm-1"` // expected FWHM
	// Spread is by how much position and width differ from what is expected, from sample to sample: one standard deviation of
	// each. It counts where the band is too weak to be located.
	Spread [2]float64 `json:"spread_cm-1"`
	// Shift is how far below (negative) and above its expected position the band may be found.
	Shift [2]float64 `json:"shift_range_cm-1"`
	// Widths are the narrowest and the widest FWHM allowed.
	Widths [2]float64 `json:"width_range_cm-1"`
	// Search tells to look for the band over its whole range rather than at its expected position: for the strong bands.
	Search bool `json:"search"`
	// Detect is the detection limit: height over its standard error. Below it position and width stay at what is expected, and
	// only the height is estimated.
	Detect float64 `json:"detection_limit"`
	// Narrow allows the band to be narrower than two channels, where it could be taken for a cosmic ray: for a line that every
	// pixel shows.
	Narrow bool `json:"narrow"`
	// Makeup asks whether the band, found and alone in its window, is one line, two, or four with a common width.
	Makeup bool `json:"makeup"`
}

// A Ratio is a quantity made of two bands.
type Ratio struct {
	Name        string `json:"name"`
	Of          string `json:"of"` // "height" or "area"
	Numerator   string `json:"numerator"`
	Denominator string `json:"denominator"` // the ratio is undefined where this band is not found
}

// Graphene is the built-in recipe: D, G and D' over a linear background, 2D over another, and the silicon line, all Lorentzian.
//
// Positions and dispersions: D 1341 and +50 cm-1/eV, D' 1619 and +10, 2D 2669.9 and +88 (from memory; Phys. Rev. B 61, 14095
// (2000) and 76, 233407 (2007)); G 1581.6, not dispersive (Nat. Commun. 3, 1024 (2012)). Expected widths of weak bands: the
// middle of the customary ranges; their spread, and that of positions: common practice. The run itself tells better, see
// [Plan.Learn]. The first-order line of silicon, where the run covers it: 520.5 ± 0.2 (J. Raman Spectrosc. (2020),
// https://doi.org/10.1002/jrs.6003). Detection limits: a false D or D' in one pristine pixel of 30,000, as the one-sided tail of
// the normal distribution; G and 2D are searched for over some tens of places, hence a higher limit.
func Graphene() Recipe {
	return Recipe{
		Name:           "graphene",
		ReferenceLaser: 532,
		Windows: []Window{
			{Name: "d_g", From: 1200, To: 1750, Background: 1, Bands: []Band{
				{Name: "d", Shape: "lorentzian", Position: 1341, Dispersion: 50, Width: 24, Spread: [2]float64{6, 5},
					Shift: [2]float64{-35, 35}, Widths: [2]float64{6, 200}, Detect: 4},
				{Name: "g", Shape: "lorentzian", Position: 1581.6, Width: 15, Spread: [2]float64{4, 3},
					Shift: [2]float64{-45, 30}, Widths: [2]float64{3, 120}, Search: true, Detect: 5},
				{Name: "dprime", Shape: "lorentzian", Position: 1619, Dispersion: 10, Width: 13, Spread: [2]float64{3, 3},
					Shift: [2]float64{-10, 15}, Widths: [2]float64{4, 40}, Detect: 4},
			}},
			{Name: "2d", From: 2550, To: 2850, Dispersion: 88, Background: 1, Bands: []Band{
				{Name: "2d", Shape: "lorentzian", Position: 2669.9, Dispersion: 88, Width: 30, Spread: [2]float64{8, 6},
					Shift: [2]float64{-50, 70}, Widths: [2]float64{8, 160}, Search: true, Detect: 5, Makeup: true},
			}},
			{Name: "si", From: 480, To: 560, Background: 1, Optional: true, Bands: []Band{
				{Name: "si", Shape: "lorentzian", Position: 520.5, Width: 4, Spread: [2]float64{1, 1},
					Shift: [2]float64{-12, 12}, Widths: [2]float64{1, 15}, Search: true, Narrow: true, Detect: 5},
			}},
		},
		Ratios: []Ratio{
			{Name: "d_g_ratio", Of: "height", Numerator: "d", Denominator: "g"},
			{Name: "d_g_area_ratio", Of: "area", Numerator: "d", Denominator: "g"},
			{Name: "2d_g_ratio", Of: "height", Numerator: "2d", Denominator: "g"},
			{Name: "2d_g_area_ratio", Of: "area", Numerator: "2d", Denominator: "g"},
		},
		SpikeThreshold: 6,
		Discrepancy:    0.002,
		Baseline:       clean.Baseline{Method: "none"},
		Substrate:      true,
		PoorFit:        2,
	}
}

// ReadRecipe reads a recipe from JSON. It refuses unknown fields, so that a misspelt one is not taken for the default, and
// whatever [Recipe.Check] refuses.
func ReadRecipe(r io.Reader) (Recipe, error) {
	var recipe Recipe
	data, err := io.ReadAll(io.LimitReader(r, 1<<20+1))
	if err != nil {
		return recipe, err
	}
	if len(data) > 1<<20 {
		return recipe, errors.New("a recipe is at most 1 MiB of JSON")
	}
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&recipe); err != nil {
		line := 1 + bytes.Count(data[:min(dec.InputOffset(), int64(len(data)))], []byte("\n"))
		return recipe, fmt.Errorf("near line %d: %w; bandgrid survey --print-recipe shows the form", line, err)
	}
	if dec.More() {
		return recipe, errors.New("something follows the recipe's closing brace")
	}
	return recipe, recipe.Check()
}

// BandNames lists the recipe's bands in the order of their status bits.
func (r Recipe) BandNames() (names []string) {
	for _, w := range r.Windows {
		for _, b := range w.Bands {
			names = append(names, b.Name)
		}
	}
	return names
}

// shapes makes the shape of a band by its name in a recipe. Where the spectrometer's line is known it is part of Lorentzian
// bands; the others have a width of their own to give.
var shapes = map[string]func(instrument float64) line.Shape{
	"lorentzian": func(instrument float64) line.Shape {
		if instrument > 0 {
			return line.Voigt{Instrument: instrument}
		}
		return line.Lorentzian{}
	},
	"gaussian":     func(float64) line.Shape { return line.Gaussian{} },
	"voigt":        func(float64) line.Shape { return line.FreeVoigt{} },
	"pseudo-voigt": func(float64) line.Shape { return line.PseudoVoigt{} },
	"fano":         func(float64) line.Shape { return line.BreitWignerFano{} },
}

// A further parameter is what a shape has beside height, position and width: where the fit starts and how far it may go.
type further struct{ start, low, high float64 }

// furthers returns the further parameters of a band's shape.
func (b Band) furthers() []further {
	switch b.Shape {
	case "voigt": // FWHM of the Gaussian part, cm-1
		return []further{{b.Width / 4, 0, b.Widths[1]}}
	case "pseudo-voigt": // Lorentzian fraction
		return []further{{0.8, 0, 1}}
	case "fano": // 1/Q
		return []further{{0, -0.9, 0.9}}
	}
	return nil
}

var quantityName = regexp.MustCompile(`^[a-z0-9][a-z0-9_]{0,39}$`)

// Check returns an error that names the first field that makes no sense, or nil.
func (r Recipe) Check() error {
	if !(r.ReferenceLaser >= 200 && r.ReferenceLaser <= 2000) {
		return fmt.Errorf("reference_laser_nm is %g; a laser line between 200 and 2000 nm is needed", r.ReferenceLaser)
	}
	if !(r.SpikeThreshold >= 3) {
		return fmt.Errorf("spike_threshold is %g; below 3 noise would be masked", r.SpikeThreshold)
	}
	if err := r.Baseline.Check(); err != nil {
		return fmt.Errorf("baseline: %w", err)
	}
	if !(r.Discrepancy >= 0 && r.Discrepancy < 0.5) {
		return fmt.Errorf("discrepancy is %g; a fraction of the height from 0 to 0.5 is needed", r.Discrepancy)
	}
	if !(r.InstrumentWidth >= 0 && r.InstrumentWidth <= 50) {
		return fmt.Errorf("instrument_width_cm-1 is %g; 0 (not known) to 50 is possible", r.InstrumentWidth)
	}
	if !(r.PoorFit >= 1) {
		return fmt.Errorf("poor_fit is %g; it must be at least 1", r.PoorFit)
	}
	if len(r.Windows) == 0 {
		return errors.New("windows: at least one is needed")
	}
	seen := map[string]bool{}
	for _, w := range r.Windows {
		if !(w.To-w.From > 0) {
			return fmt.Errorf("window %q: from_cm-1 %g must lie below to_cm-1 %g", w.Name, w.From, w.To)
		}
		if w.Background < 0 || w.Background > 4 {
			return fmt.Errorf("window %q: background_order is %d; 0 to 4 are possible", w.Name, w.Background)
		}
		if len(w.Bands) == 0 || len(w.Bands) > 12 {
			return fmt.Errorf("window %q: %d bands; 1 to 12 are possible", w.Name, len(w.Bands))
		}
		for _, b := range w.Bands {
			if err := b.check(w); err != nil {
				return fmt.Errorf("window %q: band %q: %w", w.Name, b.Name, err)
			}
			if seen[b.Name] {
				return fmt.Errorf("window %q: band %q is there twice", w.Name, b.Name)
			}
			seen[b.Name] = true
		}
	}
	if len(seen) > 14 {
		return fmt.Errorf("%d bands; a recipe may have 14", len(seen)) // status has a bit for each
	}
	for _, q := range r.Ratios {
		switch {
		case !quantityName.MatchString(q.Name):
			return fmt.Errorf("ratio %q: a name is made of small letters, digits and underscores", q.Name)
		case q.Of != "height" && q.Of != "area":
			return fmt.Errorf("ratio %q: of is %q; it is \"height\" or \"area\"", q.Name, q.Of)
		case !seen[q.Numerator] || !seen[q.Denominator]:
			return fmt.Errorf("ratio %q: %q or %q is not a band of the recipe", q.Name, q.Numerator, q.Denominator)
		}
	}
	return nil
}

func (b Band) check(w Window) error {
	switch {
	case !quantityName.MatchString(b.Name):
		return errors.New("a name is made of small letters, digits and underscores")
	case shapes[b.Shape] == nil:
		return fmt.Errorf("shape is %q; known are %s", b.Shape, strings.Join(slices.Sorted(maps.Keys(shapes)), ", "))
	case b.Makeup && (b.Shape != "lorentzian" || len(w.Bands) > 1):
		return errors.New("makeup is for a lorentzian that is alone in its window")
	case !(b.Position > w.From && b.Position < w.To):
		return fmt.Errorf("position_cm-1 %g lies outside the window", b.Position)
	case !(b.Widths[0] > 0 && b.Widths[0] < b.Widths[1]):
		return fmt.Errorf("width_range_cm-1 is %v; two rising numbers above 0 are needed", b.Widths)
	case !(b.Width >= b.Widths[0] && b.Width <= b.Widths[1]):
		return fmt.Errorf("width_cm-1 %g lies outside width_range_cm-1 %v", b.Width, b.Widths)
	case !(b.Shift[0] <= 0 && b.Shift[1] >= 0):
		return fmt.Errorf("shift_range_cm-1 is %v; it must hold 0", b.Shift)
	case !(b.Spread[0] >= 0 && b.Spread[1] >= 0 && b.Spread[0] < w.To-w.From && b.Spread[1] < b.Width):
		return fmt.Errorf("spread_cm-1 is %v; two numbers from 0 on are needed, the second below width_cm-1", b.Spread)
	case !(b.Detect >= 1):
		return fmt.Errorf("detection_limit is %g; at least 1 is needed", b.Detect)
	}
	return nil
}
