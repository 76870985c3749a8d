package fit

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// A Detector says how the counts scatter. The zero value is a detector of which nothing is known: variance is then taken to
// grow with the counts as photon noise does, and its scale comes from each pixel's own residuals.
type Detector struct {
	Gain       float64 // electrons per count; 0 unknown
	ReadNoise  float64 // standard deviation of a channel without light, counts; used with Gain
	Saturation float64 // counts at which a channel is full; 0 unknown
}

// unknownReadNoise stands in where the gain is unknown, counts: it only keeps dark channels from weighing without bound.
// Common practice: cooled detectors read with 3 to 10 electrons.
const unknownReadNoise = 5

// noise is the variance of a channel against its expected value m: slope max(m, 0) + level, counts².
type noise struct {
	slope, level float64
	known        bool // else the scale is a guess, and comes from each pixel's own residuals
	// correlation of the noise of channels 1, 2 ... apart
	correlation [lags]float64
}

// noise returns what is known beforehand: shot noise and read noise, and 1/12 for rounding to whole counts.
func (d Detector) noise() noise {
	if d.Gain > 0 {
		return noise{slope: 1 / d.Gain, level: d.ReadNoise*d.ReadNoise + 1./12, known: true}
	}
	return noise{slope: 1, level: unknownReadNoise * unknownReadNoise}
}

func (n noise) variance(m float64) float64 { return max(m, 0)*n.slope + n.level }

// inflation is by how much correlation between channels widens the variance of what is fitted to many of them: bands are wide
// against the reach of the correlation, so all its lags count in full.
func (n noise) inflation() float64 {
	sum := 1.0
	for _, r := range n.correlation {
		sum += 2 * r
	}
	return max(1, sum)
}

// second is the variance of second differences over 6 times that of a channel: 1 without correlation.
func (n noise) second() float64 { return (6 - 8*n.correlation[0] + 2*n.correlation[1]) / 6 }

// Status says how a pixel's fit ended. Its bits are written to maps/status.npy and never renumbered. From AbsentShift on there
// is a bit for each band of the recipe, in its order: the band was not found.
type Status uint32

const (
	Converged Status = 1 << iota // every window's fit reached a local optimum
	AtLimit                      // out of iterations in a window: values are the best so far
	AtBound                      // a band ran into the end of its range: it counts as not found
	Spiked                       // channels hit by cosmic rays were left out
	Holes                        // channels without a count, or saturated, were left out
	Retried                      // the first fit was poor; the best of several starts stands
	Poor                         // reduced chi-square above the recipe's limit
	Unfit                        // a window could not be fitted: too few channels, or no noise
)

// AbsentShift is the number of the first band's bit.
const AbsentShift = 8

// Absent is the bit that says that band k of the recipe was not found.
func Absent(k int) Status { return 1 << (AbsentShift + k) }

// A Column is a quantity that the fit gives for each pixel.
type Column struct {
	Name, Unit, Description string
	HasSE                   bool
	Of                      []string // for a ratio: the columns above and below the line
}

// A Plan is a recipe made ready for one axis, laser line and detector. It is read only, and shared by the workers.
type Plan struct {
	Recipe   Recipe // as given
	Axis     scan.Axis
	Laser    float64 // nm
	Detector Detector
	Columns  []Column // what the fit gives, in order; the last three are chi2, spikes and status
	Lacks    []string // names of the recipe's windows that the axis does not cover
	Warnings []string // bands that are missing in windows that it does cover
	// Preparation is done to every spectrum first; set it before [Plan.Learn].
	Preparation Preparation
	Learned     *survey.Learned // what the run told of itself; nil before [Plan.Learn]

	windows []windowPlan
	noise   noise
}

type windowPlan struct {
	Window             // moved to the laser line, cut to the axis
	channels []int     // of the run, by rising shift
	x        []float64 // their shifts
	columns  []int     // first column of each band
	bits     []int     // number of each band in the recipe
	ratios   []ratioPlan
	shapes   []line.Shape
	basis    [][]float64 // functions of the background: powers, and what the bare substrate shows beside them
	// discrepancy of each band's shape, a fraction of its height: the recipe's, or what the run shows
	discrepancy []float64
	usual       []place // where narrow bands lie in this run, and how wide they are; width 0 where that is not known
	weak        []weak  // what stands in for each band where it is too weak to be located
	makeup      int     // first column of the make-up, -1 without
}

type ratioPlan struct {
	column   int
	num, den int // bands of the window
	area     bool
}

// ErrNoWindow says that the axis covers none of the recipe's windows.
var ErrNoWindow = errors.New("the run covers none of the recipe's windows")

// NewPlan makes a recipe ready. Windows and bands that the axis does not cover are left out, and named; ErrNoWindow is
// returned where none is left.
func NewPlan(recipe Recipe, axis scan.Axis, laser float64, detector Detector) (*Plan, error) {
	return newPlan(recipe, axis, laser, detector, nil)
}

// Rest makes a plan for the windows that p lacks, for a second run with another axis.
func (p *Plan) Rest(axis scan.Axis, detector Detector) (*Plan, error) {
	return newPlan(p.Recipe, axis, p.Laser, detector, p.windows)
}

func newPlan(recipe Recipe, axis scan.Axis, laser float64, detector Detector, done []windowPlan) (*Plan, error) {
	if err := recipe.Check(); err != nil {
		return nil, fmt.Errorf("recipe: %w", err)
	}
	if err := axis.Check(); err != nil {
		return nil, err
	}
	if !(laser >= 200 && laser <= 2000) {
		return nil, fmt.Errorf("laser line %g nm: a value between 200 and 2000 is needed", laser)
	}
	p := &Plan{Recipe: recipe, Axis: axis, Laser: laser, Detector: detector, noise: detector.noise()}
	ev := photonEnergy(laser) - photonEnergy(recipe.ReferenceLaser)
	bands := 0 // of the recipe, so far
	for _, w := range recipe.Windows {
		first := bands
		bands += len(w.Bands)
		if slices.ContainsFunc(done, func(d windowPlan) bool { return d.Name == w.Name }) {
			continue
		}
		wp := windowPlan{Window: w}
		wp.From += w.Dispersion * ev
		wp.To += w.Dispersion * ev
		wp.cut(axis)
		wp.Bands = nil
		for k, b := range w.Bands {
			b.Position += b.Dispersion * ev
			if b.Position-b.Width < wp.From || b.Position+b.Width > wp.To {
				if len(wp.channels) > 0 && !w.Optional {
					p.Warnings = append(p.Warnings, fmt.Sprintf("band %s near %.0f cm-1 is not covered by the axis", b.Name, b.Position))
				}
				continue
			}
			wp.bits = append(wp.bits, first+k)
			wp.Bands = append(wp.Bands, b)
			wp.shapes = append(wp.shapes, shapes[b.Shape](recipe.InstrumentWidth))
			wp.discrepancy = append(wp.discrepancy, recipe.Discrepancy)
			wp.usual = append(wp.usual, place{})
		}
		if params := w.Background + 1 + wp.parameters(); len(wp.Bands) == 0 || len(wp.channels) < 3*params {
			if !w.Optional {
				p.Lacks = append(p.Lacks, w.Name)
			}
			continue
		}
		p.addWindow(wp)
	}
	if len(p.windows) == 0 {
		low, high := axis.Range()
		return nil, fmt.Errorf("%w: the axis runs from %.0f to %.0f cm-1 with %d channels", ErrNoWindow, low, high, len(axis))
	}
	p.Columns = append(p.Columns,
		Column{Name: "chi2", Description: "reduced chi-square of the fit over all windows; 1 where the model explains the spectrum to within its noise"},
		Column{Name: "spikes", Description: "channels left out because of cosmic rays"},
		Column{Name: "status", Description: "how the fit ended: bits, explained in the report"},
	)
	return p, nil
}

// photonEnergy returns the energy, eV, of light of that wavelength, nm. (h c = 1239.842 eV nm.)
func photonEnergy(nm float64) float64 { return 1239.842 / nm }

// parameters is the number of parameters of all bands.
func (w *windowPlan) parameters() (n int) {
	for _, s := range w.shapes {
		n += s.Len()
	}
	return n
}

// cut finds the channels inside the window and narrows it to them.
func (w *windowPlan) cut(axis scan.Axis) {
	for i, v := range axis {
		if v >= w.From && v <= w.To {
			w.channels = append(w.channels, i)
		}
	}
	if axis.Descending() {
		slices.Reverse(w.channels)
	}
	for _, i := range w.channels {
		w.x = append(w.x, axis[i])
	}
	if n := len(w.x); n > 0 {
		w.From, w.To = w.x[0], w.x[n-1]
	}
}

func (p *Plan) addWindow(w windowPlan) {
	w.basis = lsq.Polynomial(w.x, w.Background)
	w.weaken()
	w.makeup = -1
	for _, b := range w.Bands {
		w.columns = append(w.columns, len(p.Columns))
		p.Columns = append(p.Columns,
			Column{b.Name + "_position", "cm-1", "Raman shift of the " + b.Name + " band's maximum; undefined where the band is not found", true, nil},
			Column{b.Name + "_width", "cm-1", "full width at half maximum of the " + b.Name + " band; undefined where the band is not found", true, nil},
			Column{b.Name + "_height", "counts", "height of the " + b.Name + " band over the background; at the expected place where the band is not found", true, nil},
			Column{b.Name + "_area", "counts cm-1", "area of the " + b.Name + " band; at the expected place where the band is not found", true, nil},
		)
	}
	find := func(name string) int {
		return slices.IndexFunc(w.Bands, func(b Band) bool { return b.Name == name })
	}
	for _, r := range p.Recipe.Ratios {
		if num, den := find(r.Numerator), find(r.Denominator); num >= 0 && den >= 0 {
			w.ratios = append(w.ratios, ratioPlan{len(p.Columns), num, den, r.Of == "area"})
			p.Columns = append(p.Columns, ratioColumn(r))
		}
	}
	if b := w.Bands[0]; b.Makeup && len(w.Bands) == 1 {
		w.makeup = len(p.Columns)
		p.Columns = append(p.Columns,
			Column{b.Name + "_components", "", "lines that describe the shape of the " + b.Name + " band best: 1, 2, or 4; not a number of layers", false, nil},
			Column{b.Name + "_evidence", "", "AICc difference to the next best make-up of the " + b.Name + " band", false, nil},
		)
	}
	p.windows = append(p.windows, w)
}

func ratioColumn(r Ratio) Column {
	return Column{r.Name, "", fmt.Sprintf("%s of the %s band over that of the %s band, as measured", r.Of, r.Numerator, r.Denominator), true,
		[]string{r.Numerator + "_" + r.Of, r.Denominator + "_" + r.Of}}
}

// channelCount is the number of channels that the windows use.
func (p *Plan) channelCount() (n int) {
	for _, w := range p.windows {
		n += len(w.x)
	}
	return n
}

var nan = math.NaN()
