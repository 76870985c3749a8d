package lsq

import "math"

// Derivatives takes Jacobians numerically, in memory of its own.
type Derivatives struct {
	row, above []float64 // two rows of the extrapolation table, each entry a vector of residuals
	best       []float64 // a column of the Jacobian
	base, side []float64 // residuals at p and beside it
	q          []float64
	size       int
}

const (
	levels  = 8   // rows of the extrapolation table
	bending = 0.1 // of the residuals over the first step: the second difference relative to the first
	decades = 8   // in which that step is looked for
)

// NewDerivatives returns memory for problems with up to that many residuals and parameters.
func NewDerivatives(rows, params int) *Derivatives {
	v := func(n int) []float64 { return make([]float64, n) }
	return &Derivatives{
		row: v(levels * rows), above: v(levels * rows), best: v(rows), base: v(rows), side: v(rows), q: v(params), size: rows,
	}
}

// Jacobian stores in jac, row-major, the derivatives of f's residuals at p. A column is NaN where no step gave finite
// residuals.
//
// Method: central differences at ever smaller steps, extrapolated to step zero, of which the place of the table is taken
// where neighbours agree best; Adv. Eng. Softw. 4, 75 (1982) [from memory]. The first step is the largest, up to the
// parameter itself, over which the residuals are still nearly straight, so the scale on which a parameter matters need not be
// its own size: a band at 1584 that is 14 wide is no trouble. Where a bound leaves no room the differences are one-sided.
//
// Accuracy: some 1e-12 of a column's length where the residuals are smooth and accurate to double precision. About 30
// evaluations per parameter.
func (d *Derivatives) Jacobian(jac []float64, f Squares, p []float64) {
	q := d.q[:f.Params]
	copy(q, p)
	f.Residuals(d.base[:f.Rows], q)
	for j := range p {
		d.column(f, q, j)
		for i, v := range d.best[:f.Rows] {
			jac[i*f.Params+j] = v
		}
	}
}

// column stores the derivatives by parameter j in d.best.
func (d *Derivatives) column(f Squares, q []float64, j int) {
	at := q[j]
	defer func() { q[j] = at }()
	for i := range d.best[:f.Rows] {
		d.best[i] = math.NaN()
	}
	h := math.Abs(at)
	if h == 0 {
		h = 1
	}
	h, side := d.room(f, at, h, j)
	if h == 0 { // both bounds here: the parameter cannot move
		clear(d.best[:f.Rows])
		return
	}
	h = d.straight(f, q, j, h, side)
	least := math.Inf(1)
	for k := range levels {
		d.row, d.above = d.above, d.row
		d.slope(d.row[:f.Rows], f, q, j, at, h, side)
		h /= 2
		power := 1.0
		for m := 1; m <= k; m++ {
			power *= 2
			if side == 0 {
				power *= 2 // only even powers of the step
			}
			coarse, fine, next := d.above[(m-1)*d.size:], d.row[(m-1)*d.size:], d.row[m*d.size:]
			toFine, toCoarse := 0.0, 0.0
			for i := range f.Rows {
				v := (fine[i]*power - coarse[i]) / (power - 1)
				next[i] = v
				toFine += (v - fine[i]) * (v - fine[i])
				toCoarse += (v - coarse[i]) * (v - coarse[i])
			}
			if e := max(toFine, toCoarse); e < least {
				least = e
				copy(d.best, next[:f.Rows])
			}
		}
	}
}

// room returns a step of at most h that stays inside the bounds, and the side to which it goes; 0 is both.
func (d *Derivatives) room(f Squares, at, h float64, j int) (step, side float64) {
	below, above := at-f.lower(j), f.upper(j)-at
	switch room := min(below, above); {
	case room >= 1e-3*h:
		return min(h, room), 0
	case above >= below:
		return min(h, above), 1
	default:
		return min(h, below), -1
	}
}

// slope stores in dst the difference quotient of the residuals at step h.
func (d *Derivatives) slope(dst []float64, f Squares, q []float64, j int, at, h, side float64) {
	from, to := at-h, at+h
	other := d.base[:f.Rows]
	if side != 0 {
		from, to = at, at+side*h
	} else {
		other = d.side[:f.Rows]
		q[j] = from
		f.Residuals(other, q)
	}
	q[j] = to
	f.Residuals(dst, q)
	for i := range dst {
		dst[i] = (dst[i] - other[i]) / (to - from) // what was asked, not 2h: rounding of at±h drops out
	}
}

// straight returns the largest step, from most down, over which the residuals bend by less than bending. Steps that are too
// small bend too, by rounding: the search goes up from the straightest one.
func (d *Derivatives) straight(f Squares, q []float64, j int, most, side float64) float64 {
	at := q[j]
	var bend [decades]float64
	least := 0
	for k := range decades {
		h := most * math.Pow(10, float64(-k))
		ends := [2]float64{at - h, at + h}
		if side != 0 {
			ends = [2]float64{at + side*h/2, at + side*h}
		}
		q[j] = ends[0]
		f.Residuals(d.side[:f.Rows], q)
		q[j] = ends[1]
		f.Residuals(d.best[:f.Rows], q)
		second, first := 0.0, 0.0
		for i, v := range d.base[:f.Rows] {
			s, t := d.side[i]-2*v+d.best[i], d.best[i]-d.side[i]
			if side != 0 {
				s, t = d.best[i]-2*d.side[i]+v, d.best[i]-v
			}
			second += s * s
			first += t * t
		}
		bend[k] = math.Inf(1)
		if b := math.Sqrt(second / first); b >= 0 { // NaN where nothing moves, or not finite
			bend[k] = b
		}
		if bend[k] < bend[least] {
			least = k
		}
	}
	for least > 0 && bend[least-1] <= bending {
		least--
	}
	for i := range d.best[:f.Rows] {
		d.best[i] = math.NaN()
	}
	return most * math.Pow(10, float64(-least))
}
