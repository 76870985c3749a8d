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

// A clearBand is a band that shows clearly; its position is NaN where it does not.
type clearBand struct {
	position, positionSE, width, widthSE float64
	misfit                               misfit
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
