package scan

import (
	"cmp"
	"errors"
	"math"
	"slices"
	"strconv"
)

// ErrNoPlace says that no pixel has readable coordinates.
var ErrNoPlace = errors.New("no pixel has readable coordinates")

const (
	// sparse is how many cells per pixel make a raster absurd: the pixels then are scattered points. Fewer do where there are
	// few pixels, which fall on a fine raster by chance.
	sparse = 50
	// blur is the smallest distance from the lattice, in steps, that counts when lattices are compared. It decides between a
	// lattice and one of half the step on which the first seems to alternate: forward and backward lines that are offset by
	// up to half a step against each other still share their columns.
	blur = 0.13
	// sharp is the same when a raster is compared with scattered points.
	sharp = 1e-4
	// evidence in favour of a raster over scattered points, natural logarithm of the odds. Chosen so that fewer than one in a
	// hundred sets of 20 or more random points passes (TestRandomPointsAreNoRaster).
	evidence = 12
)

// FindGrid finds the raster that stage coordinates lie on, in um, in order of acquisition, NaN where unreadable. cell[i] is
// row*Cols+col of pixel i, -1 where it has no coordinates or lies far outside the rest.
//
// The order of acquisition does not matter, bit for bit. Jitter may reach a quarter of a step, and forward and backward lines
// may be offset by a third of a step against each other; pixels, rows and columns may be missing or repeated. A handful of
// scattered points may pass for a coarse raster; from 20 on fewer than one set in a hundred does. Steps and corner are rounded to as few decimals as their own
// uncertainty allows. Among rasters, a line in any direction and scattered points, the one with the shortest description of the
// coordinates is taken: the place of each pixel's cell, and its distance from the cell's centre.
//
// The only error is ErrNoPlace.
func FindGrid(x, y []float64) (Grid, []int32, error) {
	if len(x) != len(y) {
		panic("scan: x and y differ in length")
	}
	cell := make([]int32, len(x))
	var px, py []float64 // of usable pixels
	keepX, keepY := bulk(x, y), bulk(y, x)
	for i := range x {
		cell[i] = -1
		if keepX.holds(x[i]) && keepY.holds(y[i]) {
			cell[i] = int32(len(px))
			px, py = append(px, x[i]), append(py, y[i])
		}
	}
	if len(px) == 0 {
		return Grid{}, cell, ErrNoPlace
	}
	grid, place := find(px, py)
	for i, k := range cell {
		if k >= 0 {
			cell[i] = place(int(k))
		}
	}
	return grid, cell, nil
}

// An interval holds the coordinates that are not far off.
type interval struct{ low, high float64 }

func (v interval) holds(x float64) bool { return x >= v.low && x <= v.high }

// bulk returns the range of coordinates without a few, at most one in a hundred, that lie further from the rest than the rest
// is long: a stage that reports nonsense for a moment would stretch the raster without end.
func bulk(v, other []float64) interval {
	var s []float64
	for i, x := range v {
		if finite(x) && finite(other[i]) {
			s = append(s, x)
		}
	}
	if len(s) == 0 {
		return interval{1, 0}
	}
	slices.Sort(s)
	few := len(s) / 100
	low, high := 0, len(s)-1
	if few == 0 && len(s) >= 12 {
		few = 1
	}
	core := s[high-few] - s[few]
	for i := few; i > 0 && core > 0; i-- {
		if low == 0 && s[i]-s[i-1] > core {
			low = i
		}
		if high == len(s)-1 && s[len(s)-i]-s[len(s)-1-i] > core {
			high = len(s) - 1 - i
		}
	}
	return interval{s[low], s[high]}
}

func finite(v float64) bool { return math.Abs(v) <= math.MaxFloat64 }

// A raster is a guess at how the pixels lie: along x and y, or along a line (then v is across it).
type raster struct {
	u, v    lattice
	repeats int // pixels on a cell that has one already
	score   float64
}

func (r raster) cells() int { return r.u.n * r.v.n }

// find returns the grid of pixels that all have coordinates, and the cell of each.
func find(x, y []float64) (Grid, func(i int) int32) {
	sx, sy := slices.Clone(x), slices.Clone(y)
	slices.Sort(sx)
	slices.Sort(sy)
	n := len(x)
	lengthX, lengthY := sx[n-1]-sx[0], sy[n-1]-sy[0]
	if n == 1 || lengthX == 0 && lengthY == 0 {
		return Grid{Layout: Raster, Cols: 1, Rows: 1, X0: sx[0], Y0: sy[0], DX: 1, DY: 1}, func(int) int32 { return 0 }
	}
	limit := 11
	if n > 1<<16 {
		limit = 4 // the first is right but for heavy jitter, and each costs a pass over the pixels
	}
	best, ok := compare(x, y, candidates(sx, limit), candidates(sy, limit))

	// A line in any direction, along its principal axis.
	along, across, turn := turned(sx, sy, x, y)
	su, sv := slices.Clone(along), slices.Clone(across)
	slices.Sort(su)
	slices.Sort(sv)
	straight := false
	if length := sv[n-1] - sv[0]; n == 2 || length < (su[n-1]-su[0])/2 {
		line, okLine := compare(along, across, candidates(su, limit), []lattice{single(sv)})
		if n == 2 {
			line, okLine = compareTwo(along, across, su, sv), true
		}
		if okLine && (!ok || line.score > best.score+math.Log(float64(n))) && line.u.step > 0 && line.v.rms < line.u.step/3 {
			best, ok, straight = line, true, true
		}
	}
	if !ok {
		return points(x, y)
	}
	if straight && lengthX > 0 && lengthY > 0 {
		return oblique(x, y, along, best.u, turn)
	}
	if straight { // two pixels above or beside each other
		best = raster{u: two(sx), v: two(sy)}
	}
	return aligned(sx, sy, x, y, best)
}

// compare returns the best of the rasters made of a lattice along each axis. ok is false where none describes the pixels much
// better than scattered points do.
func compare(x, y []float64, us, vs []lattice) (best raster, ok bool) {
	n := float64(len(x))
	best.score = math.Inf(-1)
	var full []uint64
	lengthU, lengthV := extent(x), extent(y)
	null, _ := math.Lgamma(n + 1)
	chance := math.Inf(-1)
	for _, u := range us {
		for _, v := range vs {
			if u.n == 1 && v.n == 1 || float64(u.n)*float64(v.n) > min(sparse, 1+n/4)*n {
				continue
			}
			// A single row or column is one only if its pixels do not stray from it by a good part of the step along it.
			if near := nearness(len(x)); v.n == 1 && v.rms > near*u.step || u.n == 1 && u.rms > near*v.step {
				continue
			}
			// What looks like rows closer together than half a step of the columns is jitter of a single row.
			if v.n > 1 && u.n > 1 && (lengthV <= 0.6*u.step && alone(x, u) || lengthU <= 0.6*v.step && alone(y, v)) {
				continue
			}
			r := raster{u: u, v: v}
			full = r.occupy(full, x, y)
			cells, distinct := float64(r.cells()), n-float64(r.repeats)
			// Pixels that are measured again and again come back to the same place; scattered ones share cells that are too large.
			if 2*distinct < n && max(r.width(u, sharp), r.width(v, sharp)) > 0.05*max(u.step, v.step) {
				continue
			}
			places := logChoose(cells, distinct) + float64(r.repeats)*math.Log(cells)
			r.score = -n*(math.Log(r.width(u, blur))+math.Log(r.width(v, blur))) - places
			if r.score > best.score {
				best = r
				gain := func(length float64, l lattice) float64 {
					w := r.width(l, sharp)
					return math.Log(max(length/math.Sqrt(12), w) / w)
				}
				chance = (n-2)*(gain(lengthU, u)+gain(lengthV, v)) - null - places
			}
		}
	}
	return best, chance > evidence
}

// width is the rms distance from a lattice, at least the given number of steps.
func (r raster) width(l lattice, steps float64) float64 {
	step := l.step
	if l.n == 1 {
		return max(l.rms, 1e-3*steps*max(r.u.step, r.v.step))
	}
	return max(l.rms, steps*step)
}

// occupy counts repeated pixels. full is used again from call to call.
func (r *raster) occupy(full []uint64, x, y []float64) []uint64 {
	full = append(full[:0], make([]uint64, r.cells()/64+1)...)
	r.repeats = 0
	for i := range x {
		c := clamp(r.v.index(y[i]), r.v.n)*r.u.n + clamp(r.u.index(x[i]), r.u.n)
		bit := uint64(1) << (c & 63)
		if full[c>>6]&bit != 0 {
			r.repeats++
		}
		full[c>>6] |= bit
	}
	return full
}

// alone tells whether few pixels share a place of the lattice.
func alone(v []float64, l lattice) bool {
	r := raster{u: l, v: lattice{n: 1}}
	r.occupy(nil, v, v)
	return 5*r.repeats < len(v)
}

func clamp(k, n int) int { return max(0, min(k, n-1)) }

func extent(v []float64) float64 { return slices.Max(v) - slices.Min(v) }

// logChoose is the logarithm of the number of ways to choose k of n.
func logChoose(n, k float64) float64 {
	a, _ := math.Lgamma(n + 1)
	b, _ := math.Lgamma(k + 1)
	c, _ := math.Lgamma(n - k + 1)
	return a - b - c
}

// turned returns coordinates along and across the principal axis, which points to rising x.
func turned(sx, sy, x, y []float64) (along, across []float64, turn [2]float64) {
	mx, my := single(sx), single(sy)
	xy := make([]float64, len(x)) // sorted, so that the sum does not depend on the order of acquisition
	for i := range x {
		xy[i] = (x[i] - mx.origin) * (y[i] - my.origin)
	}
	slices.Sort(xy)
	sum := 0.0
	for _, p := range xy {
		sum += p
	}
	n := float64(len(x))
	angle := 0.5 * math.Atan2(2*sum/n, mx.rms*mx.rms-my.rms*my.rms)
	sin, cos := math.Sincos(angle)
	along, across = make([]float64, len(x)), make([]float64, len(x))
	for i := range x {
		dx, dy := x[i]-mx.origin, y[i]-my.origin
		along[i], across[i] = float64(cos*dx)+float64(sin*dy), float64(cos*dy)-float64(sin*dx)
	}
	return along, across, [2]float64{cos, sin}
}

// two is the lattice of the ends of sorted coordinates.
func two(s []float64) lattice {
	if length := s[len(s)-1] - s[0]; length > 0 {
		return lattice{origin: s[0], step: length, n: 2}
	}
	return lattice{origin: s[0], n: 1}
}

func compareTwo(along, across, su, sv []float64) raster {
	return raster{u: two(su), v: single(sv), score: math.Inf(1)}
}

// aligned makes the grid from lattices along x and y, fitted again to all pixels.
func aligned(sx, sy, x, y []float64, r raster) (Grid, func(i int) int32) {
	u, v := settle(sx, r.u), settle(sy, r.v)
	g := Grid{Layout: Raster, Cols: u.n, Rows: v.n, X0: u.origin, Y0: v.origin, DX: u.step, DY: v.step}
	switch {
	case u.n == 1:
		g.Layout, g.DX = Line, g.DY
	case v.n == 1:
		g.Layout, g.DY = Line, g.DX
	}
	g.Jitter = math.Hypot(u.rms, v.rms)
	return g, func(i int) int32 {
		return int32(clamp(v.index(y[i]), v.n)*u.n + clamp(u.index(x[i]), u.n))
	}
}

// oblique makes the grid of a line that runs along neither axis.
func oblique(x, y, along []float64, u lattice, turn [2]float64) (Grid, func(i int) int32) {
	s := slices.Clone(along)
	slices.Sort(s)
	u = settleAs(s, u)
	// Coordinates as functions of the place along the line, each by least squares over pixels sorted by place.
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(i, j int) int {
		return cmp.Or(cmp.Compare(along[i], along[j]), cmp.Compare(x[i], x[j]), cmp.Compare(y[i], y[j]))
	})
	k := make([]float64, len(order))
	fit := func(v []float64) lattice {
		var sk, sv, skk, skv float64
		n := float64(len(order))
		for j, i := range order {
			k[j] = float64(clamp(u.index(along[i]), u.n))
			sk += k[j]
			sv += v[i]
			skk += k[j] * k[j]
			skv += k[j] * v[i]
		}
		l := lattice{n: u.n, step: (skv - sk*sv/n) / (skk - sk*sk/n)}
		l.origin = (sv - l.step*sk) / n
		square := 0.0
		for j, i := range order {
			d := v[i] - l.origin - l.step*k[j]
			square += d * d
		}
		l.rms = math.Sqrt(square / n)
		return l.rounded(len(order))
	}
	lx, ly := fit(x), fit(y)
	g := Grid{Layout: Line, Cols: u.n, Rows: 1, X0: lx.origin, Y0: ly.origin, DX: lx.step, Rise: ly.step,
		Jitter: math.Hypot(lx.rms, ly.rms)}
	g.DY = math.Hypot(g.DX, g.Rise)
	return g, func(i int) int32 { return int32(clamp(u.index(along[i]), u.n)) }
}

// settle fits a lattice to all coordinates, sorted, and rounds it.
func settle(s []float64, l lattice) lattice {
	return settleAs(s, l).rounded(len(s)).measured(s)
}

func settleAs(s []float64, l lattice) lattice {
	if l.n == 1 {
		return single(s)
	}
	if again, ok := fitLattice(s, l.origin, l.step); ok {
		return again
	}
	return l
}

// measured returns l with the rms distance of the coordinates from it.
func (l lattice) measured(s []float64) lattice {
	square := 0.0
	for _, x := range s {
		d := x - l.origin - float64(clamp(l.index(x), l.n))*l.step
		square += d * d
	}
	l.rms = math.Sqrt(square / float64(len(s)))
	return l
}

// rounded returns the lattice with origin and step rounded to as few decimals as two standard errors allow; where the
// coordinates are exact, rounding errors of 1e-7 steps.
func (l lattice) rounded(pixels int) lattice {
	scale := math.Abs(l.step)
	if l.n == 1 {
		scale = max(l.rms, math.Abs(l.origin)*1e-9)
		l.origin = shortest(l.origin, max(2*l.rms/math.Sqrt(float64(pixels)), 1e-9*scale))
		return l
	}
	// Standard deviation of a uniform spread over n places is n/sqrt(12) steps.
	se := l.rms / math.Sqrt(float64(pixels))
	perStep := se * math.Sqrt(12) / float64(l.n)
	tolerance := max(min(2*perStep, 0.01*scale/float64(l.n)), 1e-7*scale/float64(l.n))
	step := shortest(l.step, tolerance)
	middle := float64(l.n-1) / 2
	l.origin += middle * (l.step - step)
	l.step = step
	tolerance = max(min(2*math.Hypot(se, perStep*middle), 0.01*scale), 1e-7*scale)
	l.origin = shortest(l.origin, tolerance)
	return l
}

// shortest returns the number with the fewest decimals within tolerance of v.
func shortest(v, tolerance float64) float64 {
	for digits := range 16 {
		r, err := strconv.ParseFloat(strconv.FormatFloat(v, 'f', digits, 64), 64)
		if err == nil && math.Abs(r-v) <= tolerance {
			return r + 0 // no negative zero
		}
	}
	return v
}

// points numbers scattered pixels in order of y, then x. Pixels at the same place share a cell.
func points(x, y []float64) (Grid, func(i int) int32) {
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(i, j int) int { return cmp.Or(cmp.Compare(y[i], y[j]), cmp.Compare(x[i], x[j])) })
	rank := make([]int32, len(x))
	last := int32(-1)
	for k, i := range order {
		if k == 0 || x[i] != x[order[k-1]] || y[i] != y[order[k-1]] {
			last++
		}
		rank[i] = last
	}
	n := float64(last + 1)
	lengthX, lengthY := extent(x), extent(y)
	typical := math.Sqrt(lengthX * lengthY / n)
	if typical == 0 {
		typical = max(lengthX, lengthY) / n
	}
	g := Grid{Layout: Points, Cols: int(n), Rows: 1, X0: slices.Min(x), Y0: slices.Min(y), DX: typical, DY: typical}
	return g, func(i int) int32 { return rank[i] }
}
