package fit

import (
	"math"

	"bandgrid/fit/clean"
	"bandgrid/fit/line"
	"bandgrid/fit/lsq"
)

// A window fits one stretch of the spectrum, in memory of its own.
//
// The order of work: channels without counts and obvious spikes are set aside; strong bands are located; heights and
// background are solved for with everything else at its expected place; bands above their detection limit are set free and
// all is refined by Levenberg-Marquardt, with weights from the fitted curve and spikes looked for in the residuals, until
// nothing changes any more.
type window struct {
	*windowPlan
	noise    noise
	recipe   *Recipe
	problem  *lsq.Bands
	solver   *lsq.Solver
	locators []*locator // per band, nil unless searched for
	strong   []bool     // channels where a band that is searched for may have its maximum
	makeups  *makeups   // nil where none is asked for

	p, lo, hi, before []float64
	free              []bool
	found, barred     []bool
	holes             []bool    // channels without a usable count
	scale, removed    []float64 // how the counts were prepared, see preparer
	skip, sharp       []bool    // channels left out: holes and spikes; spikes that were marked before the fit
	bridged           []float64
	curve, sigma, r   []float64
	scratch           []float64
	cov               []float64 // of the parameters; during the fit in units of phi

	phi    float64   // variance of unit weight; 1 when the covariance is that of the estimates
	pure   float64   // the part of it that noise makes, without correlation
	raw    []float64 // covariance at the optimum, in units of phi as it was in the fit
	chi2   float64   // reduced
	points int       // channels that count
	status Status
	best   saved

	values []float64 // the parameters less their bias: what is reported
	half   []float64 // square root of a covariance
	sums   []float64 // one number per parameter

	misfits      []misfit           // of each band
	along, shift [][][modes]float64 // memory for them
}

// saved is a finished fit that another start may beat.
type saved struct {
	p, cov, sigma []float64
	found         []bool
	skip          []bool
	phi, pure     float64
	chi2          float64
	points        int
	status        Status
}

const (
	maxRounds = 12
	// settled is the change of every parameter, in standard errors, below which reweighting ends.
	settled = 3e-3
)

func newWindow(w *windowPlan, recipe *Recipe, noise noise) *window {
	n, bands := len(w.x), len(w.Bands)
	problem := lsq.NewBandsOver(w.x, w.basis, w.shapes...)
	params := problem.Len()
	f := func(n int) []float64 { return make([]float64, n) }
	b := func(n int) []bool { return make([]bool, n) }
	win := &window{
		windowPlan: w, noise: noise, recipe: recipe, problem: problem, solver: lsq.NewSolver(params), strong: b(n),
		p: f(params), lo: f(params), hi: f(params), before: f(params), free: b(params), cov: f(params * params), raw: f(params * params),
		found: b(bands), barred: b(bands), holes: b(n), skip: b(n), sharp: b(n),
		bridged: f(n), curve: f(n), sigma: f(n), r: f(n), scratch: f(n),
		values: f(params), half: f(params * params), sums: f(params),
		best: saved{p: f(params), cov: f(params * params), sigma: f(n), found: b(bands), skip: b(n)},
	}
	spacing := (w.x[n-1] - w.x[0]) / float64(n-1)
	for i := range win.lo {
		win.lo[i], win.hi[i] = math.Inf(-1), math.Inf(1)
	}
	win.scale, win.removed = f(n), f(n)
	win.misfits = make([]misfit, bands)
	for range bands {
		win.along = append(win.along, make([][modes]float64, params))
		win.shift = append(win.shift, make([][modes]float64, params))
	}
	for k, band := range w.Bands {
		i := problem.Band(k)
		win.lo[i+line.Position], win.hi[i+line.Position] = max(band.Position+band.Shift[0], w.From), min(band.Position+band.Shift[1], w.To)
		win.lo[i+line.Width], win.hi[i+line.Width] = band.narrowest(spacing), band.Widths[1]
		var l *locator
		if band.Search {
			l = newLocator(w.x, w.basis, band, w.shapes[k])
			for c, x := range w.x {
				win.strong[c] = win.strong[c] || x >= win.lo[i+line.Position] && x <= win.hi[i+line.Position]
			}
		}
		win.locators = append(win.locators, l)
		for j, f := range band.furthers() {
			win.lo[i+line.Len+j], win.hi[i+line.Len+j] = f.low, f.high
		}
	}
	if w.makeup >= 0 {
		win.makeups = newMakeups(w)
	}
	return win
}

// fit fits the window to a prepared spectrum and reports whether there is a result: in w.p, w.cov, w.phi, w.chi2, w.found.
func (w *window) fit(q *preparer) bool {
	if !w.load(q) {
		w.status = Unfit
		return false
	}
	loaded := w.status
	w.start(0, 1)
	w.refine()
	poor := w.poor()
	if poor && w.anyFound() {
		// The search for a start can be misled by a spike, by a neighbour, or by a width far from the profiles tried.
		for _, try := range []struct {
			rank  int
			scale float64
		}{{0, 0.45}, {0, 2.2}, {1, 1}} {
			w.save()
			w.status = loaded
			w.suspect(true)
			w.start(try.rank, try.scale)
			w.refine()
			if !(w.chi2 < w.best.chi2*0.999) {
				w.restore()
			}
			w.status |= Retried
		}
		poor = w.poor()
	}
	if poor {
		w.status |= Poor
	}
	if w.spikeChannels() > 0 {
		w.status |= Spiked
	}
	w.errors()
	return true
}

// poor tells whether chi-square is above the recipe's limit, for one line and, where the band may be of several, for those that
// describe it best. It chooses them on the way.
func (w *window) poor() bool {
	chi2 := w.chi2
	if w.makeups != nil && w.found[0] {
		w.makeups.choose(w)
		chi2 = w.makeups.chi2
	}
	return chi2 > w.recipe.PoorFit
}

// start puts every band at its expected place, or where it is located (rank 0 the best place, 1 the second), and solves for
// heights and background twice: with equal weights, then with weights from the curve.
func (w *window) start(rank int, scale float64) {
	clear(w.found)
	clear(w.barred)
	clear(w.p)
	for k := range w.Bands {
		w.expect(k)
		w.locate(k, rank, scale)
	}
	for i := range w.sigma {
		w.sigma[i] = 1
	}
	w.weigh()
	w.minimize(linear)
	w.reweigh()
	w.minimize(linear)
	w.judge(true)
}

// locate puts a band that is searched for at the best place (rank 0) or the second best.
func (w *window) locate(k, rank int, scale float64) {
	if w.locators[k] == nil {
		return
	}
	at, second := w.locators[k].best(w.bridged)
	if rank == 1 {
		at = second
	}
	at.width *= scale
	w.put(k, at)
}

// put sets band k on a place, as a band of its own.
func (w *window) put(k int, at place) {
	i := w.problem.Band(k)
	w.p[i+line.Position], w.p[i+line.Width] = at.position, at.width
	for j, f := range w.Bands[k].furthers() {
		w.p[i+line.Len+j] = f.start
	}
	w.problem.SetTemplate(k, nil)
}

// expect makes band k what stands in for it where it cannot be located.
func (w *window) expect(k int) {
	w.put(k, place{w.weak[k].position, w.weak[k].width})
	w.problem.SetTemplate(k, w.weak[k].profile)
}

// weakly tells whether what stands in for band k is in its place.
func (w *window) weakly(k int) bool { return w.problem.Template(k) }

// refine repeats fit, judgement of bands, search for spikes and reweighting until nothing changes.
func (w *window) refine() {
	for round := 0; ; round++ {
		copy(w.before, w.p)
		w.reweigh()
		end := w.minimize(precision(round))
		changed := w.judge(false)
		if round > 0 && w.spikes() { // not before the strong bands are fitted
			changed = true
			w.unbar()
		}
		if last := round == maxRounds; last || round > 0 && !changed && w.still() {
			if end == lsq.Converged && !last {
				w.status |= Converged
			} else {
				w.status |= AtLimit
			}
			break
		}
	}
	w.pure = 1
	if !w.noise.known {
		// Chi-square is measured against the scatter between neighbouring channels.
		if noise := clean.Noise(w.problem.Y, w.sigma, w.skip, w.scratch); noise > 0 {
			w.pure = noise * noise / w.noise.second()
			w.chi2 /= w.pure
		}
	}
}

// unbar gives bands a second chance once a spike is out of the way: one that sits on a band makes it too narrow to be a band.
func (w *window) unbar() {
	w.bridge()
	w.status &^= AtBound
	for k, barred := range w.barred {
		if barred {
			w.barred[k] = false
			w.locate(k, 0, 1)
		}
	}
}

// release says which parameters are free: heights and background always, the others of bands that are found.
func (w *window) release() {
	for i := range w.problem.Background() {
		w.free[i] = true
	}
	for k, found := range w.found {
		i := w.problem.Band(k)
		w.free[i+line.Height] = true
		for j := 1; j < w.shapes[k].Len(); j++ {
			w.free[i+j] = found
		}
	}
}

// precision is how far a round is taken: the first only as far as the weights are worth it, which come from its start.
func precision(round int) (set lsq.Settings) {
	if round == 0 {
		set.Tolerance = 0.03
	}
	return set
}

// linear is for problems of heights and background alone, which one step solves.
var linear = lsq.Settings{Limit: 1}

// minimize refines the free parameters at the present weights.
func (w *window) minimize(set lsq.Settings) lsq.End {
	w.release()
	res := w.solver.Minimize(w.problem, w.p, w.lo, w.hi, w.free, w.points, set)
	if !w.solver.Covariance(w.cov, len(w.p)) {
		for i := range w.cov {
			w.cov[i] = math.Inf(1)
		}
	}
	w.chi2 = res.Sum / float64(max(w.points-res.Free, 1))
	w.phi = w.chi2
	// Where the noise is known chi-square is 1 but for chance; an excess beyond chance widens the errors.
	if w.noise.known && !(w.chi2 > 1+2*math.Sqrt(2/float64(max(w.points-res.Free, 1)))) {
		w.phi = 1
	}
	w.phi *= w.noise.inflation()
	return res.End
}

// still reports whether the last round left every parameter where it was, measured in standard errors.
func (w *window) still() bool {
	for i, v := range w.p {
		if w.free[i] && !(math.Abs(v-w.before[i]) <= settled*w.se(i)) {
			return false
		}
	}
	return true
}

// reweigh sets the weights from the fitted curve. Weights from the counts themselves would pull heights down, since channels
// that happen to be low would count more (Nucl. Instrum. Methods 221, 437 (1984)).
func (w *window) reweigh() {
	w.problem.Curve(w.curve, w.p)
	w.problem.Base(w.scratch, w.p)
	for i, m := range w.curve {
		misfit := w.recipe.Discrepancy * (m - w.scratch[i])
		w.sigma[i] = math.Sqrt(w.variance(i, m) + misfit*misfit)
	}
	w.weigh()
}

func (w *window) weigh() {
	w.points = 0
	for i, s := range w.sigma {
		w.problem.RootW[i] = 0
		if !w.skip[i] {
			w.problem.RootW[i] = 1 / s
			w.points++
		}
	}
	w.problem.SetWeights()
}

func (w *window) save() {
	b := &w.best
	copy(b.p, w.p)
	copy(b.cov, w.cov)
	copy(b.sigma, w.sigma)
	copy(b.found, w.found)
	copy(b.skip, w.skip)
	b.phi, b.pure, b.chi2, b.points, b.status = w.phi, w.pure, w.chi2, w.points, w.status
}

func (w *window) restore() {
	b := &w.best
	copy(w.p, b.p)
	copy(w.cov, b.cov)
	copy(w.sigma, b.sigma)
	copy(w.found, b.found)
	copy(w.skip, b.skip)
	w.phi, w.pure, w.chi2, w.points, w.status = b.phi, b.pure, b.chi2, b.points, b.status
	for k, found := range w.found {
		w.problem.SetTemplate(k, nil)
		if !found {
			w.problem.SetTemplate(k, w.weak[k].profile)
		}
	}
	w.release()
	w.weigh()
}
