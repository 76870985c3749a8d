// Package synth is a forward model of a Raman map: from a scene (flakes and films with their layer numbers, defects, strain and
// doping; the laser spot; the spectrometer and its noise; the stage) it makes the run that a microscope would leave, and the
// truth behind each pixel.
//
//	scene, err := synth.Load("scene.json")
//	...
//	g := scene.NewGenerator() // one per worker
//	counts := make([]float32, len(scene.Axis()))
//	x, y, truth := g.Pixel(17, counts)
//
// Pixels depend on the scene, its seed and their own number only, so they can be made in any order and by any number of
// workers. [Scene.Scan] gives the same pixels as a scan that has been opened; [Uniform] makes a plain scene for tests.
//
// Line shapes, least squares and noise are this package's own, so that it can bear witness against the fit's.
package synth

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"

	"bandgrid/mapio/scan"
)

// A Scene says what is measured and how. The zero value of each field means its default. Lengths on the stage are in um, Raman
// shifts and widths (always FWHM) in cm-1, intensities in counts.
type Scene struct {
	Seed       uint64            `json:"seed"`
	Laser      float64           `json:"laser_nm"` // laser line, nm in air; default 532
	Notes      map[string]string `json:"notes"`    // what the run's header says of itself
	Stage      Stage             `json:"stage"`
	Instrument Instrument        `json:"instrument"`
	Spikes     Spikes            `json:"spikes"`
	Signal     Signal            `json:"signal"`
	// Objects lie on bare substrate. They are painted in order: where two overlap the later one is there and the earlier is not.
	Objects []Object `json:"objects"`

	shifts  []float64 // ascending
	cells   []int32   // of each pixel, in order of acquisition; those that a cut leaves out too
	length  int       // pixels that are measured in full
	energy  float64   // of the laser's photons, eV
	objects []object
	optics  optics
	spot    []point // sub-samples of the laser spot, um from its centre, of equal weight
	reach   float64 // distance of the furthest of them
	back    []float64
	respond []float64
}

// An Instrument is the spectrometer with its detector.
type Instrument struct {
	From     float64 `json:"from_cm-1"` // lowest shift; default 1200
	To       float64 `json:"to_cm-1"`   // highest shift; default 2900
	Channels int     `json:"channels"`  // default 700
	// Curvature makes the axis uneven: the step at the upper end is larger than the one at the lower end by this fraction of the
	// mean step. From -1.9 to 1.9; a grating has about -0.1. Default 0: even.
	Curvature  float64 `json:"curvature"`
	Descending bool    `json:"descending"` // the run lists the highest shift first
	Wavelength bool    `json:"wavelength"` // the run gives its axis as wavelength in air, nm
	Width      float64 `json:"width_cm-1"` // FWHM of the Gaussian that the instrument folds into each band; default 0
	Spot       float64 `json:"spot_um"`    // FWHM of the Gaussian laser spot; default 0: a point

	Gain        float64 `json:"gain_e_per_count"`        // default 1
	ReadNoise   float64 `json:"read_noise_e"`            // standard deviation per channel, electrons; default 0
	Correlation float64 `json:"correlation"`             // of the noise of neighbouring channels, 0 to 0.5; default 0
	Offset      float64 `json:"offset_counts"`           // without noise of its own, on every channel: the detector's bias
	Saturation  float64 `json:"saturation_counts"`       // counts do not go above; default 0: no limit
	Fractional  bool    `json:"fractional"`              // counts are not rounded to integers
	Noiseless   bool    `json:"noiseless"`               // no noise at all, and no rounding
	Background  float64 `json:"background_counts"`       // at 1200 cm-1; default 0
	Slope       float64 `json:"background_slope"`        // counts per cm-1
	Bend        float64 `json:"background_bend"`         // counts per cm-2: background + slope (x-1200) + bend (x-1200)²
	Response    float64 `json:"response_2670_over_1580"` // sensitivity at 2670 over that at 1580 cm-1, linear between and beyond; default 1
	Drift       float64 `json:"drift_cm-1_per_1000"`     // by which bands move up in 1000 pixels
	Focus       float64 `json:"focus_wander"`            // fraction of the light that is lost at worst, 0 to 1
	FocusPeriod float64 `json:"focus_wander_period"`     // pixels from one loss to the next; default 1000
}

// Spikes are the traces of cosmic rays.
type Spikes struct {
	Rate  float64 `json:"per_pixel"`    // mean number in a spectrum; a cooled detector sees about 0.002 per second
	Mean  float64 `json:"mean_counts"`  // mean height above the least one (exponential distribution); default 500
	Least float64 `json:"least_counts"` // smallest height; default 50
}

// Signal says how strong the bands are.
type Signal struct {
	G     float64 `json:"g_height_counts"` // of one layer without doping and defects (G area 1.57 times this times 15.6 cm-1); default 400
	Oxide float64 `json:"oxide_nm"`        // silicon dioxide under the flake, for the growth of G with the layer number; default 300
	// TwoDG is the 2D height over the G height of 1, 2, 3, 4, 5 and 10 or more undoped layers, as a spectrometer of even response
	// sees it; between 5 and 10 interpolated. Default 3, 1.05, 0.75, 0.62, 0.55, 0.4 on 300 nm oxide (common practice: 2 to 4, 0.8
	// to 1.3, 0.6 to 0.9, then down to 0.3 to 0.5 in graphite), changed with the oxide as interference does.
	TwoDG []float64 `json:"2d_g_ratio"`
	// GAreaSpread is the relative spread of the G area from object to object; default 0. An object's own g_area_factor overrides it.
	GAreaSpread float64 `json:"g_area_spread"`
	// Lines are bands of the substrate or the air, seen everywhere. Those of the substrate weaken under layers as stated there.
	Lines []Line `json:"lines"`
}

// A Line is a band that does not come from the film.
type Line struct {
	Band
	PerLayer float64 `json:"per_layer"` // factor by which one layer on top weakens it; default 1. 0.933 for silicon (on 300 nm oxide)
}

// A Band is a Lorentzian.
type Band struct {
	Name     string  `json:"name"`     // "d", "g", "dprime", "2d" enter the truth; others are only drawn
	Position float64 `json:"position"` // cm-1
	Width    float64 `json:"width"`    // FWHM, cm-1
	Height   float64 `json:"height"`   // counts
}

// An Object is a flake, a film, or a part of one.
type Object struct {
	Name   string `json:"name"`
	Layers int    `json:"layers"` // 0 is bare substrate: a hole. 10 and more have the 2D band of graphite
	Shape

	// Defects of the point kind, as D/G (height ratio) or as mean distance (nm), not both. Default none.
	DGRatio        *Field  `json:"d_g_ratio"`
	DefectDistance *Field  `json:"defect_distance_nm"`
	DOverDPrime    float64 `json:"d_over_dprime"` // height ratio; default 7 (vacancies)

	Strain      *Field `json:"strain"`       // biaxial, %; default 0
	HoleDensity *Field `json:"hole_density"` // 1e12 cm-2, electrons negative; default 0

	Turbostratic bool    `json:"turbostratic"`  // rotated layers: the 2D band has one component, up-shifted, with the 2D/G of one layer
	GAreaFactor  float64 `json:"g_area_factor"` // of this object against the nominal G area; default drawn with signal's g_area_spread
	TwoDWidth    float64 `json:"2d_width"`      // as one Lorentzian sees it; default drawn from the published distribution of the layer number
	TwoDSkew     float64 `json:"2d_skew"`       // single layer, 0 to 0.5: fraction of the band in a second component 12 cm-1 above

	// Bands, where given, are the object's spectrum: layers, defects, strain and doping then only label the truth.
	Bands []Band `json:"bands"`
}

// Load reads a scene from a JSON file.
func Load(path string) (*Scene, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	s, err := Parse(data)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return s, nil
}

// Parse reads a scene from JSON. Unknown fields are errors: a misspelt one would silently mean its default.
func Parse(data []byte) (*Scene, error) {
	s := new(Scene)
	if err := decodeStrictly(data, s); err != nil {
		return nil, err
	}
	if err := s.Prepare(); err != nil {
		return nil, err
	}
	return s, nil
}

func decodeStrictly(data []byte, v any) error {
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	if err := d.Decode(v); err != nil {
		if syntax, ok := errors.AsType[*json.SyntaxError](err); ok {
			return fmt.Errorf("line %d: %w", 1+bytes.Count(data[:min(int(syntax.Offset), len(data))], []byte("\n")), err)
		}
		return err
	}
	if _, err := d.Token(); err != io.EOF {
		return errors.New("there is more after the end of the scene")
	}
	return nil
}

// Prepare fills in defaults, checks the scene and makes it ready. [Load], [Parse] and [Uniform] do it; a scene put together or
// changed in Go needs it before it is used.
func (s *Scene) Prepare() error {
	setDefault(&s.Laser, 532)
	s.energy = 1239.842 / s.Laser
	if !(s.Laser >= 400 && s.Laser <= 800) {
		return fmt.Errorf("laser_nm is %g; the model holds from 400 to 800", s.Laser)
	}
	if err := s.Stage.prepare(); err != nil {
		return fmt.Errorf("stage: %w", err)
	}
	if err := s.Instrument.prepare(); err != nil {
		return fmt.Errorf("instrument: %w", err)
	}
	setDefault(&s.Spikes.Mean, 500)
	setDefault(&s.Spikes.Least, 50)
	if !(s.Spikes.Rate >= 0 && s.Spikes.Rate <= 100 && s.Spikes.Mean > 0 && s.Spikes.Least > 0) {
		return errors.New("spikes: per_pixel must lie between 0 and 100, the counts be positive")
	}
	s.shifts = s.Instrument.axis()
	if s.Instrument.Wavelength {
		if top := s.shifts[len(s.shifts)-1]; !(top < 1e7/s.Laser) {
			return fmt.Errorf("instrument: to_cm-1 is %g: light has no such wavelength with this laser", top)
		}
	}
	s.cells = s.Stage.order(s.Seed)
	s.length = len(s.cells)
	if s.Stage.Cut > 0 {
		s.length = int(s.Stage.Cut * float64(len(s.cells)))
	}
	s.spot, s.reach = spotSamples(s.Instrument.Spot)
	s.back = make([]float64, len(s.shifts))
	s.respond = make([]float64, len(s.shifts))
	for i, x := range s.shifts {
		s.back[i] = s.Instrument.Background + (x-1200)*(s.Instrument.Slope+(x-1200)*s.Instrument.Bend)
		s.respond[i] = max(0, 1+(s.Instrument.Response-1)*(x-1580)/(2670-1580))
	}
	if err := s.Signal.prepare(); err != nil {
		return fmt.Errorf("signal: %w", err)
	}
	s.optics = newOptics(s.Laser, s.Signal.Oxide)
	s.objects = make([]object, len(s.Objects))
	for i := range s.Objects {
		if err := s.prepareObject(i); err != nil {
			name := s.Objects[i].Name
			return fmt.Errorf("object %d (%s): %w", i, name, err)
		}
	}
	return nil
}

func setDefault(v *float64, value float64) {
	if *v == 0 {
		*v = value
	}
}

func (n *Instrument) prepare() error {
	setDefault(&n.From, 1200)
	setDefault(&n.To, 2900)
	setDefault(&n.Gain, 1)
	setDefault(&n.Response, 1)
	setDefault(&n.FocusPeriod, 1000)
	if n.Channels == 0 {
		n.Channels = 700
	}
	switch {
	case !(n.To > n.From):
		return fmt.Errorf("to_cm-1 is %g, from_cm-1 %g", n.To, n.From)
	case n.Channels < 2 || n.Channels > 1<<16:
		return fmt.Errorf("%d channels; 2 to 65536 are possible", n.Channels)
	case !(n.Curvature >= -1.9 && n.Curvature <= 1.9):
		return fmt.Errorf("curvature is %g; it must lie between -1.9 and 1.9", n.Curvature)
	case !(n.Width >= 0 && n.Spot >= 0 && n.ReadNoise >= 0 && n.Saturation >= 0 && n.Gain > 0 && n.Response >= 0):
		return errors.New("width, spot, read noise, saturation, gain and response must not be negative")
	case !(n.Correlation >= 0 && n.Correlation <= 0.5):
		return fmt.Errorf("correlation is %g; it must lie between 0 and 0.5", n.Correlation)
	case !(n.Focus >= 0 && n.Focus <= 1):
		return fmt.Errorf("focus_wander is %g; it must lie between 0 and 1", n.Focus)
	}
	return nil
}

// axis returns the ascending shifts.
func (n *Instrument) axis() []float64 {
	shifts := make([]float64, n.Channels)
	for i := range shifts {
		t := float64(i) / float64(n.Channels-1)
		shifts[i] = n.From + (n.To-n.From)*(t-n.Curvature/2*t*(1-t))
	}
	return shifts
}

func (g *Signal) prepare() error {
	setDefault(&g.G, 400)
	setDefault(&g.Oxide, 300)
	if !(g.G > 0 && g.Oxide >= 0 && g.Oxide <= 2000 && g.GAreaSpread >= 0 && g.GAreaSpread < 0.5) {
		return errors.New("g_height_counts must be positive, oxide_nm at most 2000, g_area_spread below 0.5")
	}
	if n := len(g.TwoDG); n > 6 {
		return fmt.Errorf("2d_g_ratio has %d values, at most 6 mean something", n)
	}
	for i := range g.Lines {
		setDefault(&g.Lines[i].PerLayer, 1)
		if err := g.Lines[i].check(); err != nil {
			return err
		}
	}
	return nil
}

func (b Band) check() error {
	if !(b.Position > 0 && b.Width > 0) {
		return fmt.Errorf("band %q: position is %g and width %g; both must be positive", b.Name, b.Position, b.Width)
	}
	return nil
}

// Len is the number of pixels in the run, repeated ones included.
func (s *Scene) Len() int { return s.length }

// Torn tells whether the run ends in the middle of a pixel: the one after the last, which [Generator.Pixel] makes too.
func (s *Scene) Torn() bool { return s.length < len(s.cells) }

// Axis returns the shift of each channel in the run's order, cm-1.
func (s *Scene) Axis() scan.Axis {
	axis := make(scan.Axis, len(s.shifts))
	for i, x := range s.shifts {
		if s.Instrument.Descending {
			i = len(axis) - 1 - i
		}
		axis[i] = x
	}
	return axis
}

// Wavelengths returns the axis as wavelength in air, nm, in the run's order.
func (s *Scene) Wavelengths() []float64 {
	nm := s.Axis()
	k0 := scan.VacuumWavenumber(s.Laser)
	for i, shift := range nm {
		// The inverse of VacuumWavenumber by fixed point: the index of air hardly depends on the wavelength.
		k := k0 - shift
		v := 1e7 / k
		for range 4 {
			v *= scan.VacuumWavenumber(v) / k
		}
		nm[i] = v
	}
	return nm
}

// Cell returns where on the grid a pixel lies: row 0 has the lowest y, column 0 the lowest x.
func (s *Scene) Cell(pixel int) (row, col int) {
	c := int(s.cells[pixel])
	return c / s.Stage.Cols, c % s.Stage.Cols
}
