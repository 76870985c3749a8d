package fit

import (
	"math"
	"slices"
)

// A levelSum collects channels of about the same fitted value: how many, their values, squared residuals, and leverages.
type levelSum struct{ n, value, square, leverage float64 }

// levels is the number of bins of fitted values: quarters of octaves, over the range of 32-bit numbers that matters.
const levels = 240

func levelOf(m float64) int {
	if !(m > 0) {
		return 0
	}
	return min(max(int(math.Floor(4*math.Log2(m)))+120, 1), levels-1)
}

// residuals adds the squares and products of the residuals of a window.
func (l *look) residuals(w *window) {
	w.problem.Project(w.sums, w.curve, w.p, w.free) // for the columns
	columns := w.problem.Columns()
	leverage := w.scratch
	made := w.hat(leverage, columns)
	w.problem.Curve(w.curve, w.p)
	var squares float64
	var products, pairs [lags]float64
	for i, m := range w.curve {
		w.r[i] = 0
		if w.skip[i] {
			continue
		}
		d := w.problem.Y[i] - m
		seen, s := w.measured(i, m), w.scale[i]
		b := &l.levels[levelOf(seen)]
		b.n++
		b.value += seen
		b.square += d * d / (s * s)
		b.leverage += leverage[i]
		l.channels++
		w.r[i] = d / w.sigma[i]
		squares += w.r[i] * w.r[i]
	}
	for k := range products {
		for i := range len(w.r) - k - 1 {
			products[k] += w.r[i] * w.r[i+k+1]
			if !w.skip[i] && !w.skip[i+k+1] {
				pairs[k]++
			}
		}
	}
	// White noise leaves residuals with covariance 1 - A C A', A the columns: products have the mean -Σ (A C A') k apart.
	unit := squares / float64(max(w.points-len(columns), 1))
	for k := range products {
		share := float64(w.points) / max(pairs[k], 1)
		l.products[k] += products[k] / unit * share
		l.made[k] += made[k] * share
	}
	l.squares += float64(w.points)
}

// hat looks at A C A', A the weighted columns and C the covariance of the fit in units of its variance of unit weight. It
// stores the diagonal in leverage and returns, for each lag, the sum of the elements of channels that far apart.
func (w *window) hat(leverage []float64, columns [][]float64) (sums [lags]float64) {
	n := len(w.p)
	var late [lags][]float64 // C a of the channels before
	for k := range late {
		late[k] = make([]float64, len(columns))
	}
	for i := range w.x {
		if !w.skip[i] {
			for k := range min(lags, i) {
				if w.skip[i-k-1] {
					continue
				}
				for j, column := range columns {
					sums[k] += late[(i-k-1)%lags][j] * column[i]
				}
			}
		}
		row := 0
		for r := range n {
			if !w.free[r] {
				continue
			}
			s, j := 0.0, 0
			for c := range n {
				if w.free[c] {
					s += w.raw[r*n+c] * columns[j][i]
					j++
				}
			}
			late[i%lags][row] = s
			row++
		}
		leverage[i] = 0
		for j, column := range columns {
			leverage[i] += late[i%lags][j] * column[i]
		}
	}
	return sums
}

// learnNoise estimates gain, read noise and correlation.
func (p *Plan) learnNoise(looks []look) {
	var sums [levels]levelSum
	var products, made [lags]float64
	var squares float64
	fits, channels := 0, 0
	for i := range looks {
		l := &looks[i]
		fits += l.fits
		channels += l.channels
		for k, b := range l.levels {
			sums[k].n += b.n
			sums[k].value += b.value
			sums[k].square += b.square
			sums[k].leverage += b.leverage
		}
		for k := range lags {
			products[k] += l.products[k]
			made[k] += l.made[k]
		}
		squares += l.squares
	}
	if fits < leastFits || channels < leastChannels {
		return
	}
	// The curve follows what is slow in the noise; of correlated noise that is more, by the factor sought. It converges since the
	// curve has far fewer parameters than channels.
	for range 20 {
		q := p.noise.inflation()
		for k := range products {
			p.noise.correlation[k] = (products[k] + q*made[k]) / squares
		}
	}
	for k, r := range p.noise.correlation {
		// A product of two standardised residuals has variance 1, so their mean has 1/√n; five of these are not chance, and less
		// than 0.01 does not matter.
		if math.Abs(r) < max(5/math.Sqrt(squares), 0.01) {
			p.noise.correlation[k] = 0
		}
	}
	p.Learned.Correlation = slices.Clone(p.noise.correlation[:])
	p.Learned.Inflation = p.noise.inflation()
	if p.Detector.Gain > 0 {
		return
	}
	slope, level, ok := varianceLine(sums[:], p.noise.inflation())
	if !ok {
		return
	}
	p.Learned.NoiseChannels = channels
	p.noise.slope, p.noise.level, p.noise.known = slope, level, true
	if slope > 0 {
		p.Learned.Gain = 1 / slope
	}
	p.Learned.ReadNoise = math.Sqrt(level)
}

// varianceLine fits variance = slope value + level, both not negative, to binned squares. The curve has taken away the leverage
// times the inflation of them. The variance of a bin's mean square is 2 variance²/n.
func varianceLine(sums []levelSum, inflation float64) (slope, level float64, ok bool) {
	var total levelSum
	for _, b := range sums {
		total.n += b.n
		total.value += b.value
		total.square += b.square
	}
	mean, square := total.value/total.n, total.square/total.n
	if !(square > 0) {
		return 0, 0, false
	}
	at := func(b levelSum) (x, y float64) { return max(b.value/b.n, 0), b.square / (b.n - inflation*b.leverage) }
	slope, level = 0, square
	for range 30 {
		var s, sx, sy, sxx, sxy float64
		for _, b := range sums {
			if b.n-inflation*b.leverage < 20 {
				continue
			}
			x, y := at(b)
			v := max(slope*x+level, 1e-3*square)
			w := b.n / (v * v)
			s, sx, sy, sxx, sxy = s+w, sx+w*x, sy+w*y, sxx+w*x*x, sxy+w*x*y
		}
		if s == 0 {
			return 0, 0, false
		}
		det := s*sxx - sx*sx
		if det > 1e-6*s*sxx { // the values differ enough to tell the two apart
			slope, level = (s*sxy-sx*sy)/det, (sxx*sy-sx*sxy)/det
		} else {
			slope, level = 0, sy/s
			if mean > 0 {
				slope, level = sy/sx, 0
			}
		}
		if slope < 0 {
			slope, level = 0, sy/s
		} else if level < 0 {
			slope, level = sxy/sxx, 0
		}
	}
	return slope, level, slope > 0 || level > 0
}
