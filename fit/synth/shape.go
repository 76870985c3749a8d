package synth

import (
	"errors"
	"math"
)

// A Shape is an area of the sample, um. Exactly one of its kinds is given.
type Shape struct {
	Everywhere bool         `json:"everywhere"`
	Polygon    [][2]float64 `json:"polygon"` // corners; it closes itself
	Disc       *Disc        `json:"disc"`
	Path       [][2]float64 `json:"path"`     // a line of some width, such as a scratch
	PathWidth  float64      `json:"width_um"` // of the path
}

// A Disc is a round area.
type Disc struct {
	X      float64 `json:"x"`
	Y      float64 `json:"y"`
	Radius float64 `json:"radius"`
}

type point struct{ x, y float64 }

func (s *Shape) check() error {
	kinds := 0
	for _, given := range []bool{s.Everywhere, s.Polygon != nil, s.Disc != nil, s.Path != nil} {
		if given {
			kinds++
		}
	}
	switch {
	case kinds != 1:
		return errors.New("give one of everywhere, polygon, disc and path")
	case s.Polygon != nil && len(s.Polygon) < 3:
		return errors.New("a polygon has at least 3 corners")
	case s.Disc != nil && !(s.Disc.Radius > 0):
		return errors.New("a disc's radius must be positive")
	case s.Path != nil && (len(s.Path) < 2 || !(s.PathWidth > 0)):
		return errors.New("a path has at least 2 points and a positive width_um")
	}
	return nil
}

// inside tells whether a point lies in the shape.
func (s *Shape) inside(x, y float64) bool {
	switch {
	case s.Everywhere:
		return true
	case s.Disc != nil:
		dx, dy := x-s.Disc.X, y-s.Disc.Y
		return dx*dx+dy*dy < s.Disc.Radius*s.Disc.Radius
	case s.Path != nil:
		return s.distance(s.Path, false, x, y) < s.PathWidth/2
	}
	in := false
	a := s.Polygon[len(s.Polygon)-1]
	for _, b := range s.Polygon {
		if (a[1] > y) != (b[1] > y) && x < a[0]+(y-a[1])/(b[1]-a[1])*(b[0]-a[0]) {
			in = !in
		}
		a = b
	}
	return in
}

// margin is the distance to the edge, negative outside.
func (s *Shape) margin(x, y float64) float64 {
	switch {
	case s.Everywhere:
		return math.Inf(1)
	case s.Disc != nil:
		return s.Disc.Radius - math.Hypot(x-s.Disc.X, y-s.Disc.Y)
	case s.Path != nil:
		return s.PathWidth/2 - s.distance(s.Path, false, x, y)
	}
	d := s.distance(s.Polygon, true, x, y)
	if !s.inside(x, y) {
		return -d
	}
	return d
}

// distance returns how far a point is from a chain of segments.
func (s *Shape) distance(chain [][2]float64, closed bool, x, y float64) float64 {
	best := math.Inf(1)
	a := chain[len(chain)-1]
	for i, b := range chain {
		if i > 0 || closed {
			ex, ey := b[0]-a[0], b[1]-a[1]
			px, py := x-a[0], y-a[1]
			t := 0.0
			if l := ex*ex + ey*ey; l > 0 {
				t = min(1, max(0, (px*ex+py*ey)/l))
			}
			px -= t * ex
			py -= t * ey
			best = min(best, px*px+py*py)
		}
		a = b
	}
	return math.Sqrt(best)
}

// box returns the shape's extent.
func (s *Shape) box() (x0, y0, x1, y1 float64) {
	x0, y0, x1, y1 = math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	grow := 0.0
	chain := s.Polygon
	switch {
	case s.Everywhere:
		return x1, y1, x0, y0
	case s.Disc != nil:
		chain, grow = [][2]float64{{s.Disc.X, s.Disc.Y}}, s.Disc.Radius
	case s.Path != nil:
		chain, grow = s.Path, s.PathWidth/2
	}
	for _, p := range chain {
		x0, x1 = min(x0, p[0]-grow), max(x1, p[0]+grow)
		y0, y1 = min(y0, p[1]-grow), max(y1, p[1]+grow)
	}
	return x0, y0, x1, y1
}

// spotSamples returns points of equal weight that stand for a Gaussian spot of that FWHM, and the distance of the furthest.
// They lie on a sunflower spiral, whose radii are the quantiles of the spot's radial distribution: edges in any direction are
// then met without the steps that a square grid has. Against the error function of a straight edge shares are off by 0.0024 (root mean
// square), at most by 0.012.
func spotSamples(fwhm float64) ([]point, float64) {
	if fwhm == 0 {
		return []point{{}}, 0
	}
	const n = 512
	sigma := fwhm / 2.354820045
	golden := math.Pi * (3 - math.Sqrt(5))
	points := make([]point, n)
	var reach float64
	for i := range points {
		reach = sigma * math.Sqrt(-2*math.Log(1-(float64(i)+0.5)/n))
		sin, cos := math.Sincos(golden * float64(i))
		points[i] = point{reach * cos, reach * sin}
	}
	return points, reach
}
