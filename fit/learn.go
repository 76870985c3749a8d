package fit

import (
	"cmp"
	"context"
	"math"
	"runtime"
	"slices"
	"sync"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// lags is how far apart, in channels, correlation of the noise is looked for: exports that were resampled have it over two or
// three.
const lags = 4

const (
	// A band shows clearly where its height is that many standard errors.
	clearly = 8
	// leastClear is from how many clear pixels on the run's own place of a band counts.
	leastClear = 10
	// leastFits and leastChannels are what an estimate of the noise needs: then its own error is a few per cent.
	leastFits, leastChannels = 20, 5000
)

// Learn returns a plan that knows what a sample of the run's pixels tells, see [Sample]: p itself is unchanged. The result
// does not depend on the order of the pixels or on the number of workers.
//
// Noise: squared residuals of good fits against the fitted value, by a straight line, the variance of a detector with shot and
// read noise; a gain that was given stands. Correlation between channels: from products of residuals, less what the fit itself
// makes. Bands: median and robust spread of position and width.
func (p *Plan) Learn(ctx context.Context, sample []scan.Pixel, workers int) (*Plan, error) {
	sample = slices.Clone(sample)
	slices.SortStableFunc(sample, func(a, b scan.Pixel) int { return cmp.Or(cmp.Compare(a.X, b.X), cmp.Compare(a.Y, b.Y)) })
	q := *p
	q.Learned = &survey.Learned{Pixels: len(sample)}
	q.windows = slices.Clone(p.windows)
	if p.Preparation.Substrate != nil {
		q.givenSubstrate()
	}
	var looks []look
	for range 2 { // the second time with the noise known: what is misfit shows only then
		var err error
		if looks, err = q.look(ctx, sample, workers); err != nil {
			return nil, err
		}
		q.learnNoise(looks)
	}
	if p.Recipe.Substrate && p.Preparation.Substrate == nil {
		q.learnSubstrate(sample, looks)
		if len(q.Learned.Substrate) > 0 { // what was the substrate's looked like noise before
			var err error
			if looks, err = q.look(ctx, sample, workers); err != nil {
				return nil, err
			}
			q.learnNoise(looks)
		}
	}
	for i := range q.windows {
		q.windows[i].Bands = slices.Clone(q.windows[i].Bands)
		q.windows[i].discrepancy = slices.Clone(q.windows[i].discrepancy)
		q.windows[i].usual = slices.Clone(q.windows[i].usual)
		q.learnBands(&q.windows[i], looks)
	}
	return &q, nil
}

// look fits the sample.
func (p *Plan) look(ctx context.Context, sample []scan.Pixel, workers int) ([]look, error) {
	looks := make([]look, len(sample))
	next := make(chan int)
	var wait sync.WaitGroup
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	for range workers {
		wait.Go(func() {
			f := NewFitter(p)
			for i := range next {
				looks[i].take(f, sample[i].Counts)
			}
		})
	}
	for i := range sample {
		if ctx.Err() != nil {
			break
		}
		next <- i
	}
	close(next)
	wait.Wait()
	return looks, ctx.Err()
}

// A look is what one pixel tells.
type look struct {
	fits     int
	channels int
	bare     bool // no band that is searched for is found
	levels   [levels]levelSum
	products [lags]float64 // of standardised residuals, per lag
	made     [lags]float64 // what the fit makes of white noise, times -1
	squares  float64
	bands    []clearBand // in the order of windows and bands
}

type levelSum struct{ n, value, square, leverage float64 }

// A clearBand is a band that shows clearly; its position is NaN where it does not.
type clearBand struct {
	position, positionSE, width, widthSE float64
	misfit                               misfit
}

// levels is the number of bins of fitted values: quarters of octaves, over the range of 32-bit numbers that matters.
const levels = 240

func levelOf(m float64) int {
	if !(m > 0) {
		return 0
	}
	return min(max(int(math.Floor(4*math.Log2(m)))+120, 1), levels-1)
}

// take looks at one pixel.
func (l *look) take(f *Fitter, counts []float32) {
	f.preparer.take(counts)
	l.bare = true
	for _, w := range f.windows {
		ok := w.fit(f.preparer)
		l.bare = l.bare && ok
		for k := range w.Bands {
			l.bare = l.bare && !(w.Bands[k].Search && !w.Bands[k].Narrow && w.found[k])
			b := clearBand{position: nan}
			if i := w.problem.Band(k); ok && w.found[k] && w.values[i] > clearly*w.se(i) {
				misfit := w.misfits[k]
				if w.makeups != nil && w.makeups.components > 1 {
					misfit.white = 0 // of several lines: says nothing of the shape of one
				}
				b = clearBand{w.values[i+line.Position], w.se(i + line.Position), w.values[i+line.Width], w.se(i + line.Width), misfit}
			}
			l.bands = append(l.bands, b)
		}
		if !ok || w.status&(AtLimit|AtBound|Poor) != 0 || slices.ContainsFunc(w.misfits, func(m misfit) bool { return m.square > 7*m.se }) {
			continue
		}
		l.fits++
		l.residuals(w)
	}
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

// learnBands finds where the weak bands of a window lie. w is a copy that may be changed.
func (p *Plan) learnBands(w *windowPlan, looks []look) {
	first := 0
	for _, other := range p.windows {
		if other.Name == w.Name {
			break
		}
		first += len(other.Bands)
	}
	changed := false
	for k := range w.Bands {
		b := &w.Bands[k]
		var position, positionSE, width, widthSE []float64
		var misfits []misfit
		for i := range looks {
			if c := looks[i].bands[first+k]; !math.IsNaN(c.position) {
				position, positionSE = append(position, c.position), append(positionSE, c.positionSE)
				width, widthSE = append(width, c.width), append(widthSE, c.widthSE)
				misfits = append(misfits, c.misfit)
			}
		}
		if len(position) < leastClear {
			continue
		}
		l := survey.LearnedBand{Name: b.Name, Pixels: len(position)}
		l.Position, l.PositionSpread = spread(position, positionSE)
		l.Width, l.WidthSpread = spread(width, widthSE)
		if l.Discrepancy = usual(misfits); l.Discrepancy > 0 {
			w.discrepancy[k] = max(w.discrepancy[k], l.Discrepancy)
		}
		p.Learned.Bands = append(p.Learned.Bands, l)
		if b.Narrow && 2*l.Pixels > len(looks) { // nearly every pixel shows it
			w.usual[k] = place{l.Position, l.Width}
		}
		if b.Search {
			continue // found wherever it is; where it is not found there is no film, and nothing to be learnt of its place
		}
		low, high := b.Position+b.Shift[0], b.Position+b.Shift[1]
		b.Position = min(max(l.Position, low), high)
		b.Shift = [2]float64{low - b.Position, high - b.Position}
		b.Width = min(max(l.Width, b.Widths[0]), b.Widths[1])
		b.Spread = [2]float64{l.PositionSpread, min(l.WidthSpread, 0.9*b.Width)}
		changed = true
	}
	if changed {
		w.weaken()
	}
}

// spread returns the median, and the robust standard deviation that is left when the errors are taken out.
func spread(v, se []float64) (median, sd float64) {
	median = clean.Median(slices.Clone(v))
	d := make([]float64, len(v))
	for i, x := range v {
		d[i] = math.Abs(x - median)
	}
	total := 1.4826 * clean.Median(d)
	noise := clean.Median(slices.Clone(se))
	return median, math.Sqrt(max(0, total*total-noise*noise))
}

// usual returns the discrepancy of the usual pixel, 0 where chance explains what is seen; that of some, where another material
// has another shape, shows in their own residuals.
//
// Each pixel's square is noise plus discrepancy times a chi-square of ν degrees of freedom over ν, of which the median is
// (1 - 2/(9ν))³ (Proc. Natl. Acad. Sci. 17, 684 (1931), from memory).
func usual(misfits []misfit) float64 {
	var ratio, white []float64
	variance := 0.0
	for _, m := range misfits {
		if m.white > 0 {
			ratio = append(ratio, (m.square+m.white)/m.white/math.Pow(1-2/(9*m.freedom), 3))
			white = append(white, m.white)
			variance += 2 / m.freedom
		}
	}
	n := float64(len(ratio))
	excess := clean.Median(ratio) - 1
	if !(excess > 4*1.25*math.Sqrt(variance)/n) { // the error of a median is 1.25 times that of a mean
		return 0
	}
	return math.Sqrt(excess * clean.Median(white))
}
