package calib

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"

	"bandgrid/mapio/scan"
)

// A Measured is a reference and the lines found in its spectrum.
type Measured struct {
	Reference Reference
	Lines     []Found
}

// Options steer [Solve].
type Options struct {
	Order int     // of the correction: 0 an offset, 1 offset and stretch, 2 and 3 curvature too
	Laser float64 // laser line in air, nm, for lamps
	// LaserSE is the standard deviation of the laser line, nm; default 0.1: 532 modules lie between 531.9 and 532.3 (from
	// memory). It counts where only lamps were measured: they do not see the laser.
	LaserSE float64
	// Reach is how far the axis may be off, cm-1; default 40.
	Reach float64
}

// A Calibration is a correction of the shift axis: a polynomial in t = (shift - Center)/Half is added to the shift as it was.
type Calibration struct {
	References []string  `json:"references"`
	Laser      float64   `json:"laser_nm"`
	Order      int       `json:"order"`
	Center     float64   `json:"center_cm-1"`
	Half       float64   `json:"half_cm-1"`
	Coeffs     []float64 `json:"coefficients_cm-1"` // of t⁰, t¹ ...
	Covariance []float64 `json:"covariance_cm-2"`   // row-major
	From       float64   `json:"from_cm-1"`         // lowest and highest line used, on the corrected axis
	To         float64   `json:"to_cm-1"`
	// LaserOffset is by how much the laser line's wavenumber is off what was given, where lamps and substances were measured: the
	// published places of the lamp's lines are that much too high. 0 where it is not known.
	LaserOffset   float64 `json:"laser_offset_cm-1"`
	LaserOffsetSE float64 `json:"laser_offset_se_cm-1"`
	Common        float64 `json:"common_cm-1"` // standard deviation of what all lines have in common: the laser line of lamps
	Lines         []Used  `json:"lines"`
	Missed        int     `json:"missed"` // lines found that belong to no line of the reference
	RMS           float64 `json:"rms_cm-1"`
	Chi2          float64 `json:"chi2"`
}

// A Used is a line that the calibration rests on.
type Used struct {
	Reference string  `json:"reference"`
	True      float64 `json:"true_cm-1"`
	Measured  float64 `json:"measured_cm-1"`
	SE        float64 `json:"se_cm-1"`       // of the fit and of the true value together
	Residual  float64 `json:"residual_cm-1"` // true less corrected
}

// ErrTooFew says that too few lines of a reference were found for the order asked for.
var ErrTooFew = errors.New("too few lines")

// ErrMismatch says that the lines found do not lie where those of the reference do.
var ErrMismatch = errors.New("the lines do not match the reference")

// A pair is a line found and the one that it is taken for.
type pair struct {
	reference        string
	lamp             bool
	true, measured   float64
	weight, se, left float64
}

// Solve matches lines to references and solves for the correction of the axis by weighted least squares. An order above 0 needs
// two lines more than coefficients. References that hold too few lines, or none that bracket a stretch of the axis, give an
// offset only: ask for order 0, and see [Calibration.Bracketed].
func Solve(measured []Measured, opt Options) (*Calibration, error) {
	if opt.Order < 0 || opt.Order > 3 {
		return nil, fmt.Errorf("order %d: 0 to 3 are possible", opt.Order)
	}
	reach := opt.Reach
	if reach == 0 {
		reach = 40
	}
	var pairs []pair
	missed, lamps, substances := 0, false, false
	c := &Calibration{Laser: opt.Laser, Order: opt.Order}
	for _, m := range measured {
		if m.Reference.Lamp && !(opt.Laser > 0) {
			return nil, fmt.Errorf("%s: a lamp's lines are wavelengths, so the laser line is needed", m.Reference.Name)
		}
		lamps, substances = lamps || m.Reference.Lamp, substances || !m.Reference.Lamp
		matched, err := match(m, opt.Laser, reach)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", m.Reference.Name, err)
		}
		pairs = append(pairs, matched...)
		missed += len(m.Lines) - len(matched)
		c.References = append(c.References, m.Reference.Name)
	}
	need := opt.Order + 1
	if opt.Order > 0 {
		need += 2
	}
	if lamps && substances {
		need++
	}
	if len(pairs) < need {
		return nil, fmt.Errorf("%w: %d matched, order %d needs %d; take a lower order or a reference with more lines", ErrTooFew, len(pairs), opt.Order, need)
	}
	c.Missed = missed
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range pairs {
		low, high = min(low, p.measured), max(high, p.measured)
	}
	c.Center, c.Half = (low+high)/2, max((high-low)/2, 1)
	// A line that is far off the others is another line: leave out the worst until all fit.
	for {
		if err := c.solve(pairs, lamps && substances); err != nil {
			return nil, err
		}
		worst, at := 0.0, -1
		for i, p := range pairs {
			if z := math.Abs(p.left) / p.se; z > worst {
				worst, at = z, i
			}
		}
		if worst <= 4 || len(pairs) <= need {
			break
		}
		pairs = slices.Delete(pairs, at, at+1)
		c.Missed++
	}
	if c.Chi2 > 9 {
		return nil, fmt.Errorf("%w: %d lines leave residuals of %.2f cm-1, %.1f times their errors; is the reference the right one, and the laser line?",
			ErrMismatch, len(pairs), c.RMS, math.Sqrt(c.Chi2))
	}
	c.From, c.To = math.Inf(1), math.Inf(-1)
	for _, p := range pairs {
		c.Lines = append(c.Lines, Used{p.reference, p.true, p.measured, p.se, p.left})
		c.From, c.To = min(c.From, p.true), max(c.To, p.true)
	}
	slices.SortFunc(c.Lines, func(a, b Used) int {
		if a.True < b.True {
			return -1
		}
		return 1
	})
	if lamps && !substances {
		se := opt.LaserSE
		if se == 0 {
			se = 0.1
		}
		c.Common = math.Abs(scan.VacuumWavenumber(opt.Laser) - scan.VacuumWavenumber(opt.Laser+se))
	}
	return c, nil
}

// solve fits the polynomial to the pairs and fills in what follows from it, and the pairs' residuals. Where lamps and substances
// are mixed, the laser line is an unknown too: it shifts the lamps' lines against the others.
func (c *Calibration) solve(pairs []pair, mixed bool) error {
	n, m := len(pairs), c.Order+1
	unknowns := m
	if mixed {
		unknowns++
	}
	a, y := mat.NewDense(n, unknowns, nil), mat.NewVecDense(n, nil)
	for i, p := range pairs {
		t := (p.measured - c.Center) / c.Half
		v := 1 / p.se
		for k := range m {
			a.Set(i, k, v)
			v *= t
		}
		if mixed && p.lamp {
			a.Set(i, m, 1/p.se)
		}
		y.SetVec(i, (p.true-p.measured)/p.se)
	}
	var qr mat.QR
	qr.Factorize(a)
	var x mat.VecDense
	if err := qr.SolveVecTo(&x, false, y); err != nil {
		return fmt.Errorf("%w for order %d: they lie too close together", ErrTooFew, c.Order)
	}
	var normal, inverse mat.Dense
	normal.Mul(a.T(), a)
	if err := inverse.Inverse(&normal); err != nil {
		return fmt.Errorf("%w for order %d: they lie too close together", ErrTooFew, c.Order)
	}
	c.Coeffs = slices.Clone(x.RawVector().Data[:m])
	c.LaserOffset, c.LaserOffsetSE = 0, 0
	if mixed {
		c.LaserOffset = x.AtVec(m)
	}
	c.Covariance = make([]float64, m*m)
	sum, square := 0.0, 0.0
	for i := range pairs {
		p := &pairs[i]
		p.left = p.true - p.measured - c.correction(p.measured)
		if p.lamp {
			p.left -= c.LaserOffset
		}
		sum += p.left * p.left / (p.se * p.se)
		square += p.left * p.left
	}
	c.RMS = math.Sqrt(square / float64(n))
	c.Chi2 = 1
	if n > unknowns {
		c.Chi2 = sum / float64(n-unknowns)
	}
	for i := range m {
		for k := range m {
			c.Covariance[i*m+k] = inverse.At(i, k) * max(1, c.Chi2)
		}
	}
	if mixed {
		c.LaserOffsetSE = math.Sqrt(inverse.At(m, m) * max(1, c.Chi2))
	}
	return nil
}

func (c *Calibration) correction(shift float64) float64 {
	t := (shift - c.Center) / c.Half
	sum := 0.0
	for k := len(c.Coeffs) - 1; k >= 0; k-- {
		sum = sum*t + c.Coeffs[k]
	}
	return sum
}

// Shift returns the corrected shift, cm-1, of one read off the axis as it was.
func (c *Calibration) Shift(shift float64) float64 { return shift + c.correction(shift) }

// Bracketed tells whether lines lie on both sides of a shift, cm-1, so that nothing is extrapolated there.
func (c *Calibration) Bracketed(shift float64) bool { return c.From <= shift && shift <= c.To }

// SE returns the standard error of the corrected axis at a shift, cm-1, with what all lines have in common. Where no lines
// bracket the shift it is that of the extrapolated polynomial, which knows nothing of what the axis does there.
func (c *Calibration) SE(shift float64) float64 {
	t := (shift - c.Center) / c.Half
	m := len(c.Coeffs)
	variance := c.Common * c.Common
	for i := range m {
		for k := range m {
			variance += math.Pow(t, float64(i+k)) * c.Covariance[i*m+k]
		}
	}
	return math.Sqrt(variance)
}

// Apply returns the corrected axis. The error says where it would not run one way any more.
func (c *Calibration) Apply(axis scan.Axis) (scan.Axis, error) {
	out := make(scan.Axis, len(axis))
	for i, v := range axis {
		out[i] = c.Shift(v)
	}
	if err := out.Check(); err != nil {
		return nil, fmt.Errorf("the calibration does not go with this axis: corrected, %w", err)
	}
	if out.Descending() != axis.Descending() {
		return nil, errors.New("the calibration does not go with this axis: it would turn it round")
	}
	return out, nil
}

// Check returns an error where a calibration that was read makes no sense.
func (c *Calibration) Check() error {
	m := len(c.Coeffs)
	switch {
	case m < 1 || m > 4 || c.Order != m-1:
		return fmt.Errorf("order %d with %d coefficients", c.Order, m)
	case len(c.Covariance) != m*m:
		return fmt.Errorf("%d numbers of covariance, %d are needed", len(c.Covariance), m*m)
	case !(c.Half > 0) || math.IsInf(c.Half, 0) || math.IsNaN(c.Center) || math.IsInf(c.Center, 0):
		return fmt.Errorf("center_cm-1 %g and half_cm-1 %g", c.Center, c.Half)
	}
	for _, v := range append(slices.Clone(c.Coeffs), c.Covariance...) {
		if math.IsNaN(v) || math.Abs(v) > 1e4 {
			return fmt.Errorf("a coefficient is %g", v)
		}
	}
	return nil
}

// Summary says in words what the calibration rests on.
func (c *Calibration) Summary() string {
	what := [...]string{"an offset", "offset and stretch", "a parabola", "a cubic"}[min(c.Order, 3)]
	return fmt.Sprintf("%s from %d lines of %s, %.1f to %.1f cm-1, residual %.2f cm-1", what, len(c.Lines), strings.Join(c.References, " and "), c.From, c.To, c.RMS)
}
