package calib

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
	"bandgrid/mapio/scan"
)

// A Found is a line found in a spectrum.
type Found struct {
	Position, SE float64 // cm-1, on the spectrum's axis
	Height       float64 // counts over its surroundings
	Width        float64 // FWHM, cm-1
}

const (
	// prominent is how far, in standard deviations of a channel, a maximum must stand out of its surroundings.
	prominent = 6
	// widest is the largest FWHM of a line, cm-1: broader ones are no use for calibration.
	widest = 40
	// most is the number of lines that are fitted, the strongest first.
	most = 80
)

// Find finds the lines of a spectrum, in order of position, and fits each as a pseudo-Voigt band over a straight line, together
// with its neighbours. Channels with NaN are left out. The axis may descend.
func Find(axis scan.Axis, counts []float32) ([]Found, error) {
	x, y := usable(axis, counts)
	n := len(x)
	if n < 20 {
		return nil, fmt.Errorf("%d channels with counts; at least 20 are needed", n)
	}
	sigma, skip := make([]float64, n), make([]bool, n)
	for i := range sigma {
		sigma[i] = 1
	}
	noise := clean.Noise(y, sigma, skip, make([]float64, n))
	if !(noise > 0) {
		return nil, errors.New("the spectrum does not scatter at all, so that nothing can be said of its lines")
	}
	maxima := maxima(x, y, noise)
	if len(maxima) == 0 {
		return nil, fmt.Errorf("no line stands %d times the noise out of its surroundings", prominent)
	}
	var found []Found
	for _, group := range groups(x, maxima) {
		found = append(found, fitGroup(x, y, noise, group)...)
	}
	slices.SortFunc(found, func(a, b Found) int {
		if a.Position < b.Position {
			return -1
		}
		return 1
	})
	if len(found) == 0 {
		return nil, errors.New("none of the lines could be fitted")
	}
	return found, nil
}

// usable returns the channels with counts, by rising shift.
func usable(axis scan.Axis, counts []float32) (x, y []float64) {
	for i, c := range counts {
		if v := float64(c); math.Abs(v) < math.MaxFloat32 {
			x, y = append(x, axis[i]), append(y, v)
		}
	}
	if axis.Descending() {
		slices.Reverse(x)
		slices.Reverse(y)
	}
	return x, y
}

// A maximum is a place where a line may be.
type maximum struct {
	i      int // channel
	height float64
	width  float64 // at half the height over the higher foot, cm-1
}

// maxima returns what stands out, the strongest first but no more than most, then in order of place.
func maxima(x, y []float64, noise float64) []maximum {
	var list []maximum
	n := len(y)
	for i := 1; i+1 < n; i++ {
		if y[i] < y[i-1] || y[i] <= y[i+1] {
			continue
		}
		// Down on both sides to the lowest point before something higher, but not farther than a wide line.
		low := func(step int) float64 {
			least := y[i]
			for k := i; k >= 0 && k < n && math.Abs(x[k]-x[i]) <= 2*widest && y[k] <= y[i]; k += step {
				least = min(least, y[k])
			}
			return least
		}
		foot := max(low(-1), low(1))
		height := y[i] - foot
		if !(height > prominent*noise*math.Sqrt(max(1, y[i]/max(median(y), 1)))) {
			continue
		}
		half := foot + height/2
		a, b := i, i
		for a > 0 && y[a] > half {
			a--
		}
		for b < n-1 && y[b] > half {
			b++
		}
		width := x[b] - x[a]
		if width > widest {
			continue
		}
		list = append(list, maximum{i, height, width})
	}
	slices.SortFunc(list, func(a, b maximum) int {
		if a.height > b.height {
			return -1
		}
		return 1
	})
	list = list[:min(len(list), most)]
	slices.SortFunc(list, func(a, b maximum) int { return a.i - b.i })
	return list
}

func median(v []float64) float64 { return clean.Median(slices.Clone(v)) }

// groups puts maxima together that lie within three widths of each other, four at most.
func groups(x []float64, list []maximum) (out [][]maximum) {
	for _, m := range list {
		if n := len(out); n > 0 && len(out[n-1]) < 4 {
			last := out[n-1][len(out[n-1])-1]
			if x[m.i]-x[last.i] < 3*max(m.width, last.width) {
				out[n-1] = append(out[n-1], m)
				continue
			}
		}
		out = append(out, []maximum{m})
	}
	return out
}

// fitGroup fits the lines of a group; those whose fit ends at a bound or has no error are left out.
func fitGroup(x, y []float64, noise float64, group []maximum) (found []Found) {
	spacing := (x[len(x)-1] - x[0]) / float64(len(x)-1)
	first, last := group[0], group[len(group)-1]
	low, high := x[first.i]-3*max(first.width, 3*spacing), x[last.i]+3*max(last.width, 3*spacing)
	from, to := 0, len(x)
	for from < len(x) && x[from] < low {
		from++
	}
	for to > from && x[to-1] > high {
		to--
	}
	shapes := make([]line.Shape, len(group))
	for k := range shapes {
		shapes[k] = line.PseudoVoigt{}
	}
	wx := x[from:to]
	if len(wx) < 2+4*len(group)+3 {
		return nil
	}
	b := lsq.NewBands(wx, 1, shapes...)
	copy(b.Y, y[from:to])
	n := b.Len()
	p, lo, hi, free := make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
	for i := range p {
		lo[i], hi[i], free[i] = math.Inf(-1), math.Inf(1), true
	}
	p[0] = min(y[from], y[to-1])
	for k, m := range group {
		i := b.Band(k)
		width := max(m.width, 1.5*spacing)
		p[i+line.Height], p[i+line.Position], p[i+line.Width], p[i+line.Mixing] = m.height, x[m.i], width, 0.7
		lo[i+line.Position], hi[i+line.Position] = x[m.i]-width, x[m.i]+width
		lo[i+line.Width], hi[i+line.Width] = spacing/2, 2*widest
		lo[i+line.Mixing], hi[i+line.Mixing] = 0, 1
	}
	solver := lsq.NewSolver(n)
	cov := make([]float64, n*n)
	curve := make([]float64, len(wx))
	var res lsq.Result
	for round := range 3 { // weights from the curve: shot noise, its scale from the white noise of the spectrum
		for i := range wx {
			v := noise
			if round > 0 {
				v *= math.Sqrt(max(1, curve[i]/max(p[0], 1)))
			}
			b.RootW[i] = 1 / v
		}
		b.SetWeights()
		res = solver.Minimize(b, p, lo, hi, free, len(wx), lsq.Settings{})
		b.Curve(curve, p)
	}
	if !solver.Covariance(cov, n) {
		return nil
	}
	scale := max(1, res.Sum/float64(len(wx)-res.Free))
	for k := range group {
		i := b.Band(k)
		at := i + line.Position
		f := Found{Position: p[at], SE: math.Sqrt(cov[at*n+at] * scale), Height: p[i+line.Height], Width: p[i+line.Width]}
		if p[at] <= lo[at] || p[at] >= hi[at] || !(f.SE > 0) || !(f.SE < f.Width) || !(f.Height > 0) {
			continue
		}
		found = append(found, f)
	}
	return found
}
