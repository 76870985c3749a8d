package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"runtime/debug"
	"slices"
	"strings"
	"time"

	"github.com/spf13/pflag"

	"bandgrid/fit"
	"bandgrid/fit/calib"
	"bandgrid/mapio"
	"bandgrid/mapio/area"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

var surveyVerb = verb{
	name:  "survey",
	usage: "RUN...",
	short: "fit every pixel of a run, interpret, and write maps, regions, figures and a report",
	long: `The main job. RUN is the text file that the microscope left, as it is, gzip or zstd compressed, or - for standard
input. The result is a folder beside it, named after it, with .survey at the end: report.html is the page to
open first, figures/ holds the maps as pictures, maps/ the numbers for numpy.load, regions.csv the statistics.

Example:
  bandgrid survey examples/flake/overnight.txt.zst

Exit status: 0 done; 1 could not do it; 2 wrong usage; 3 done, but part of the input was unusable, and the
report says which; 130 interrupted.`,
	setup: func(flags *pflag.FlagSet) func(context.Context, []string, streams) error {
		var o surveyOptions
		o.add(flags)
		return o.run
	},
}

type surveyOptions struct {
	out         string
	laser       float64
	recipe      string
	printRecipe bool
	columns     []string
	with        string
	meaning     meaning
	gain        float64
	readNoise   float64
	instrument  float64
	dark        float64
	calibration string
	trackLine   string
	substrate   string
	flip        []string
	exclude     string
	saturation  float64
	notes       map[string]string
	table       bool
	workers     int
	force       bool
	quiet       bool

	places fit.RunOptions // from workers, flip and exclude
	calib  *calib.File    // from calibration
	bare   *mapio.Spectrum
}

func (o *surveyOptions) add(fs *pflag.FlagSet) {
	fs.StringVarP(&o.out, "output", "o", "", "survey `folder` (default: beside the run, named after it)")
	fs.Float64Var(&o.laser, "laser", 0, "laser line in `nm`, where the run does not say")
	fs.StringSliceVar(&o.columns, "columns", nil, "names of the run's columns, where guessing fails: `x,y,shift,counts`; - for one to ignore, x:mm for a unit")
	fs.StringVar(&o.with, "with", "", "second `run` over the same grid that holds the other window")
	fs.StringVar(&o.recipe, "recipe", "", "JSON `file` with windows and bands (default: the built-in recipe for graphene)")
	fs.BoolVar(&o.printRecipe, "print-recipe", false, "print the recipe, built-in or given, and do nothing else")
	o.meaning.add(fs)
	fs.Float64Var(&o.gain, "gain", 0, "detector gain in `electrons` per count (default: from the scatter of the run)")
	fs.Float64Var(&o.readNoise, "read-noise", 0, "scatter of a channel without light, in `counts`; with --gain")
	fs.Float64Var(&o.instrument, "instrument-width", 0, "FWHM of the spectrometer's line in `cm-1`, where known: widths are then the natural ones")
	fs.StringVar(&o.calibration, "calibration", "", "`file` from bandgrid calibrate: corrects the shift axis and the response")
	fs.StringVar(&o.trackLine, "track-line", "", "`band` that every spectrum shows (si), whose drift over the run is taken out of all positions")
	fs.StringVar(&o.substrate, "substrate", "", "`spectrum` of the bare substrate, whose lines become part of the background (default: the map's own bare pixels)")
	fs.Float64Var(&o.dark, "dark", 0, "`counts` that the detector gives without light, taken off every channel")
	fs.StringSliceVar(&o.flip, "flip", nil, "stage axis that runs the other way: `x`, y, or x,y")
	fs.StringVar(&o.exclude, "exclude", "", "`file` with polygons to leave out (metal, tape): lines name,x,y, a vertex each, um")
	fs.Float64Var(&o.saturation, "saturation", 0, "`counts` from which on a channel is full and left out")
	fs.StringToStringVar(&o.notes, "note", nil, "`KEY=VALUE` for survey and report: sample, power, exposure ...")
	fs.BoolVar(&o.table, "table", false, "write pixels.csv, all quantities, a row per pixel, and spikes.csv, the channels that cosmic rays hit")
	fs.IntVar(&o.workers, "workers", 0, "`number` of workers (default: one per processor)")
	fs.BoolVarP(&o.force, "force", "f", false, "replace a survey that is already there")
	fs.BoolVarP(&o.quiet, "quiet", "q", false, "no progress, no summary")
}

func (o *surveyOptions) check(runs []string) error {
	switch {
	case len(runs) == 0:
		return errors.New("no run given; bandgrid survey --help shows an example")
	case o.out != "" && len(runs) > 1:
		return errors.New("-o names one survey, but there are several runs; leave it out or give one run")
	case o.with != "" && len(runs) > 1:
		return errors.New("--with goes with one run, but there are several")
	case o.out == "" && runs[0] == "-":
		return errors.New("standard input has no name; say with -o where the survey goes")
	case o.laser != 0 && !(o.laser >= 200 && o.laser <= 2000):
		return fmt.Errorf("--laser %g: a wavelength in nm between 200 and 2000 is needed", o.laser)
	case o.gain < 0 || o.readNoise < 0 || o.instrument < 0 || o.saturation < 0 || o.workers < 0:
		return errors.New("gain, read noise, instrument width, saturation and workers cannot be negative")
	case o.readNoise > 0 && o.gain == 0:
		return errors.New("--read-noise is in counts beside shot noise, so it needs --gain")
	}
	return o.meaning.check()
}

func (o *surveyOptions) run(ctx context.Context, runs []string, std streams) error {
	recipe, err := o.readRecipe()
	if err != nil {
		return err
	}
	if o.printRecipe {
		text, err := json.MarshalIndent(recipe, "", "  ")
		if err != nil {
			return err
		}
		_, err = fmt.Fprintf(std.out, "%s\n", text)
		return err
	}
	if err := o.check(runs); err != nil {
		return usageError{err}
	}
	if err := o.place(); err != nil {
		return err
	}
	if o.substrate != "" {
		if o.bare, err = mapio.OpenSpectrum(ctx, o.substrate, mapio.Options{Laser: o.laser}); err != nil {
			return err
		}
		if o.calib != nil && o.calib.Axis != nil {
			if o.bare.Axis, err = o.calib.Axis.Apply(o.bare.Axis); err != nil {
				return fmt.Errorf("%s: %w", o.substrate, err)
			}
		}
	}
	// Results stay in memory until the end, and little else does: a smaller heap costs hardly any time here.
	defer debug.SetGCPercent(debug.SetGCPercent(40))
	var failed error
	for _, run := range runs {
		err := o.one(ctx, run, recipe, std)
		if err != nil && len(runs) > 1 {
			err = fmt.Errorf("%s: %w", run, err)
		}
		failed = errors.Join(failed, err)
		if ctx.Err() != nil {
			break
		}
	}
	return failed
}

// place reads what flags say of the places of pixels.
func (o *surveyOptions) place() error {
	o.places = fit.RunOptions{Workers: o.workers}
	for _, axis := range o.flip {
		switch axis {
		case "x":
			o.places.FlipX = true
		case "y":
			o.places.FlipY = true
		default:
			return usageError{fmt.Errorf("--flip %s: x, y or x,y is possible", axis)}
		}
	}
	if err := o.readCalibration(); err != nil {
		return err
	}
	if _, err := o.meaning.readLimits(); err != nil { // before hours of work
		return err
	}
	if o.exclude == "" {
		return nil
	}
	f, err := os.Open(o.exclude)
	if err != nil {
		return err
	}
	defer f.Close()
	areas, err := area.Read(f, o.exclude)
	if err != nil {
		return err
	}
	o.places.Leave = func(x, y float64) bool {
		return slices.ContainsFunc(areas, func(a area.Area) bool { return a.Contains(x, y) })
	}
	return nil
}

func (o *surveyOptions) readCalibration() error {
	if o.calibration == "" {
		return nil
	}
	f, err := os.Open(o.calibration)
	if err != nil {
		return err
	}
	defer f.Close()
	if o.calib, err = calib.Read(f); err != nil {
		return fmt.Errorf("%s: %w", o.calibration, err)
	}
	return nil
}

// calibrated returns the axis of a run as corrected.
func (o *surveyOptions) calibrated(sc *scan.Scan) (scan.Axis, error) {
	if o.calib == nil || o.calib.Axis == nil {
		return sc.Axis, nil
	}
	axis, err := o.calib.Axis.Apply(sc.Axis)
	if err != nil {
		return nil, &scan.InputError{File: sc.File, Pixel: -1, What: "its axis cannot be corrected", Err: err, Remedy: "calibrate with the same grating position"}
	}
	return axis, nil
}

// prepare sets what is done to the counts of a run with that axis, as corrected.
func (o *surveyOptions) prepare(plan *fit.Plan) {
	if o.dark != 0 {
		plan.Preparation.Dark = []float64{o.dark}
	}
	if o.bare != nil {
		plan.Preparation.Substrate = o.bare.On(plan.Axis)
	}
	if o.calib != nil && o.calib.Response != nil {
		plan.Preparation.Response = o.calib.Response.On(plan.Axis)
	}
}

// readRecipe returns the recipe to use, flags that change it included.
func (o *surveyOptions) readRecipe() (fit.Recipe, error) {
	recipe, err := fit.Graphene(), error(nil)
	if o.recipe != "" {
		recipe, err = readRecipe(o.recipe)
	}
	if o.instrument > 0 {
		recipe.InstrumentWidth = o.instrument
	}
	return recipe, err
}

func readRecipe(path string) (fit.Recipe, error) {
	f, err := os.Open(path)
	if err != nil {
		return fit.Recipe{}, err
	}
	defer f.Close()
	recipe, err := fit.ReadRecipe(f)
	if err != nil {
		return recipe, fmt.Errorf("%s: %w", path, err)
	}
	return recipe, nil
}

// folder names the survey of a run: beside it, without the extensions of text and compression.
func (o *surveyOptions) folder(run string) string {
	if o.out != "" {
		return o.out
	}
	dir, name := filepath.Split(run)
	for _, extension := range []string{".gz", ".zst", ".zstd"} {
		name = strings.TrimSuffix(name, extension)
	}
	if ext := filepath.Ext(name); ext != "" && ext != name {
		name = strings.TrimSuffix(name, ext)
	}
	return filepath.Join(dir, name+".survey")
}

// one makes the survey of one run.
func (o *surveyOptions) one(ctx context.Context, run string, recipe fit.Recipe, std streams) error {
	start := time.Now()
	inputs, err := o.openAll(run, recipe, std)
	defer inputs.close()
	if err != nil {
		return err
	}
	folder, err := survey.Create(o.folder(run), o.force)
	if err != nil {
		return err
	}
	if err := o.learn(ctx, run, &inputs); err != nil {
		return errors.Join(err, folder.Abandon())
	}
	s, broken, stopped := o.fitAll(ctx, inputs, std)
	if s == nil {
		return errors.Join(stopped, folder.Abandon())
	}
	o.describe(s, inputs, broken == nil && stopped == nil)
	if err := o.meaning.apply(s, recipe); err != nil {
		return errors.Join(err, folder.Abandon())
	}
	traces := fit.Examples(s, inputs.plan, inputs.sample, o.places)
	if err := (bundle{recipe: recipe, table: o.table, workers: o.workers, traces: traces}).write(folder.Path(), s); err != nil {
		return errors.Join(err, folder.Abandon())
	}
	if stopped != nil {
		return fmt.Errorf("%w; what was fitted until then is in %s", stopped, folder.Path())
	}
	if err := folder.Commit(); err != nil {
		return err
	}
	if !o.quiet {
		summary(std.out, s, o.folder(run), time.Since(start))
	}
	if broken != nil {
		broken = fmt.Errorf("%w: %w; the survey in %s says what is missing", errPartly, broken, o.folder(run))
	}
	return errors.Join(verdict(s), broken)
}

// inputs are the runs of one survey, opened, with the plans to fit them by. The second is there only with --with.
type inputs struct {
	first, second *scan.Scan
	plan, rest    *fit.Plan
	options       mapio.Options // to open them again
	sample        []scan.Pixel  // of the first
}

func (in inputs) close() {
	for _, sc := range []*scan.Scan{in.first, in.second} {
		if sc != nil {
			sc.Close()
		}
	}
}

// openAll opens the runs and plans their fits. What it returns must be closed, also after an error.
func (o *surveyOptions) openAll(run string, recipe fit.Recipe, std streams) (in inputs, err error) {
	in.options = mapio.Options{Laser: o.laser, Columns: o.columns, Stdin: std.in}
	if in.first, err = mapio.Open(run, in.options); err != nil {
		return in, err
	}
	if in.first.Laser == 0 {
		return in, &scan.InputError{File: in.first.File, Pixel: -1,
			What:   "the run does not say with which laser line it was measured, and the bands move with it",
			Remedy: "give it with --laser, for instance --laser 532"}
	}
	detector := fit.Detector{Gain: o.gain, ReadNoise: o.readNoise, Saturation: o.saturation}
	axis, err := o.calibrated(in.first)
	if err != nil {
		return in, err
	}
	in.plan, err = fit.NewPlan(recipe, axis, in.first.Laser, detector)
	if err != nil {
		return in, &scan.InputError{File: in.first.File, Pixel: -1, What: "its spectra cannot be fitted", Err: err,
			Remedy: "check the axis and its unit (--columns), the laser line (--laser) and the recipe's windows"}
	}
	if o.with == "" {
		return in, nil
	}
	if in.second, err = mapio.Open(o.with, in.options); err != nil {
		return in, err
	}
	if len(in.plan.Lacks) == 0 {
		return in, usageError{fmt.Errorf("%s already covers all windows of the recipe; %s has nothing to add", in.first.File, in.second.File)}
	}
	if l := in.second.Laser; l != 0 && l != in.first.Laser {
		return in, &scan.InputError{File: in.second.File, Pixel: -1,
			What:   fmt.Sprintf("its laser line is %g nm, that of %s %g nm", l, in.first.File, in.first.Laser),
			Remedy: "give the right one for both with --laser"}
	}
	if axis, err = o.calibrated(in.second); err != nil {
		return in, err
	}
	if in.rest, err = in.plan.Rest(axis, detector); err != nil {
		return in, &scan.InputError{File: in.second.File, Pixel: -1, What: "its spectra cannot be fitted", Err: err,
			Remedy: "it should hold the windows that the first run lacks: " + strings.Join(in.plan.Lacks, ", ")}
	}
	return in, nil
}

// learn looks at a sample of each run before it is fitted. A run that can be opened again is read once more for that, at a
// small part of the cost of its fit; of a stream the first pixels must do.
func (o *surveyOptions) learn(ctx context.Context, run string, in *inputs) error {
	for _, r := range []struct {
		path string
		sc   **scan.Scan
		plan **fit.Plan
	}{{run, &in.first, &in.plan}, {o.with, &in.second, &in.rest}} {
		if *r.sc == nil {
			continue
		}
		sample, err := o.sample(ctx, r.path, r.sc, in.options)
		if in.sample == nil {
			in.sample = sample
		}
		if err == nil {
			o.prepare(*r.plan)
			*r.plan, err = (*r.plan).Learn(ctx, sample, o.workers)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// sample returns pixels of the run. What is wrong with the run the fit will meet again, and report.
func (o *surveyOptions) sample(ctx context.Context, path string, sc **scan.Scan, options mapio.Options) ([]scan.Pixel, error) {
	if info, err := os.Stat(path); path == "-" || err != nil || !info.Mode().IsRegular() {
		sample, all := fit.Head(ctx, *sc, o.places)
		*sc = all
		return sample, ctx.Err()
	}
	again, err := mapio.Open(path, options)
	if err != nil {
		return nil, err
	}
	defer again.Close()
	sample, _ := fit.Sample(ctx, again, o.places)
	return sample, ctx.Err()
}

// fitAll fits the runs and joins them. broken says what part of the input was unusable though there is a survey. stopped says
// why the work ended early; then the survey is nil, or what was fitted before an interruption.
func (o *surveyOptions) fitAll(ctx context.Context, in inputs, std streams) (s *survey.Survey, broken, stopped error) {
	s, broken, stopped = o.fitRun(ctx, in.first, in.plan, std)
	lacks := in.plan
	if in.second != nil && stopped == nil {
		var other *survey.Survey
		var brokenToo error
		other, brokenToo, stopped = o.fitRun(ctx, in.second, in.rest, std)
		broken = errors.Join(broken, brokenToo)
		if other == nil {
			return nil, nil, stopped
		}
		s.Warnings = append(s.Warnings, other.Warnings...)
		if err := fit.Join(s, other, in.plan, in.rest); err != nil {
			return nil, nil, &scan.InputError{File: in.second.File, Pixel: -1, What: "it does not go with " + in.first.File, Err: err,
				Remedy: "both must be measured over the same grid"}
		}
		lacks = in.rest
	}
	if s != nil {
		low, high := lacks.Axis.Range()
		for _, name := range lacks.Lacks {
			s.Warnings = append(s.Warnings, fmt.Sprintf("the axis, %.0f to %.0f cm-1, does not cover the recipe's window %s; its quantities are missing", low, high, name))
		}
		s.Warnings = append(s.Warnings, in.plan.Warnings...)
	}
	return s, broken, stopped
}

// fitRun fits one run; see fitAll.
func (o *surveyOptions) fitRun(ctx context.Context, sc *scan.Scan, plan *fit.Plan, std streams) (s *survey.Survey, broken, stopped error) {
	run := o.places
	if std.terminal && !o.quiet {
		p := startProgress(time.Second/2, sc.Progress, terminalLine(std.err))
		run.Progress = p.Add
		defer fmt.Fprintln(std.err)
		defer p.Close()
	}
	fits, ended := fit.Run(ctx, sc, plan, run)
	if ended != nil && ctx.Err() == nil { // the run could not be read to its end; what came before counts
		broken, ended = ended, nil
	}
	unreadable := fits.Unreadable(sc.File, maxListed)
	if unreadable.Pixels > 0 {
		if 2*unreadable.Pixels > fits.Len() {
			return nil, nil, fmt.Errorf("%w (%d of %d pixels could not be read; if the columns were guessed wrong, name them with --columns)",
				unreadable.First[0], unreadable.Pixels, fits.Len())
		}
		broken = errors.Join(broken, fmt.Errorf("%d of %d pixels could not be read, the first: %w", unreadable.Pixels, fits.Len(), unreadable.First[0]))
	}
	var drift *survey.Drift
	var unfollowed string
	if o.trackLine != "" {
		var err error
		if drift, err = fits.Track(o.trackLine); err != nil {
			unfollowed = "drift was not taken out: " + err.Error()
		}
	}
	s, err := fits.Survey()
	switch {
	case err != nil && ended != nil:
		return nil, nil, ended
	case err != nil && broken != nil:
		return nil, nil, broken
	case err != nil:
		return nil, nil, &scan.InputError{File: sc.File, Pixel: -1, What: "there is no map in it", Err: err,
			Remedy: "check that data follow its header and that the columns are named right (--columns)"}
	}
	if len(s.Warnings) > 0 { // it ends in mid-line
		broken = errors.Join(broken, &scan.InputError{File: sc.File, Pixel: -1, What: s.Warnings[0]})
	}
	s.Drift = drift
	if unfollowed != "" {
		s.Warnings = append(s.Warnings, unfollowed)
	}
	if broken != nil {
		s.Warnings = append(s.Warnings, strings.Split(broken.Error(), "\n")...)
	}
	for _, p := range unreadable.First[min(1, len(unreadable.First)):] {
		s.Warnings = append(s.Warnings, p.Error())
	}
	if ended != nil {
		s.Warnings = append(s.Warnings, "the survey was interrupted before the end of the run")
	}
	return s, broken, ended
}

// maxListed is how many unreadable pixels the report lists one by one.
const maxListed = 20

// describe fills in where the survey comes from.
func (o *surveyOptions) describe(s *survey.Survey, in inputs, complete bool) {
	s.Program = "bandgrid " + version()
	for _, sc := range []*scan.Scan{in.first, in.second} {
		if sc != nil {
			read, _ := sc.Progress()
			s.Runs = append(s.Runs, survey.RunFile{Name: filepath.Base(sc.File), SHA256: sc.Digest(), Bytes: read, Format: sc.Format})
		}
	}
	low, high := in.plan.Axis.Range()
	s.Laser = in.first.Laser
	s.Axis = survey.AxisInfo{Channels: len(in.first.Axis), From: low, To: high}
	s.Recipe, _ = json.Marshal(in.plan.Recipe) // a recipe that was read or built in can be written
	for _, plan := range []*fit.Plan{in.plan, in.rest} {
		if plan != nil && plan.Learned != nil {
			s.Learned = append(s.Learned, *plan.Learned)
		}
	}
	s.Complete = complete
	s.FitWarnings = len(s.Warnings)
	s.Settings = map[string]any{}
	for name, v := range map[string]float64{
		"gain_e_per_count": o.gain, "read_noise_counts": o.readNoise, "saturation_counts": o.saturation,
		"instrument_width_cm-1": o.instrument, "dark_counts": o.dark,
	} {
		if v > 0 {
			s.Settings[name] = v
		}
	}
	if o.calib != nil {
		s.Settings["calibration"] = filepath.Base(o.calibration)
		s.Calibration = describeCalibration(o.calib)
	}
	if len(o.flip) > 0 {
		s.Settings["flip"] = strings.Join(o.flip, ",")
	}
	if o.substrate != "" {
		s.Settings["substrate"] = filepath.Base(o.substrate)
	}
	if o.exclude != "" {
		s.Settings["exclude"] = filepath.Base(o.exclude)
	}
	s.Notes = map[string]string{}
	maps.Copy(s.Notes, in.first.Notes)
	maps.Copy(s.Notes, o.notes)
}

// describeCalibration says in words what was corrected, and how well, for the report.
func describeCalibration(f *calib.File) (list []string) {
	if c := f.Axis; c != nil {
		list = append(list, "Shift axis corrected: "+c.Summary()+".")
		for _, at := range []struct {
			band  string
			shift float64
		}{{"G", 1582}, {"2D", 2670}} {
			text := fmt.Sprintf("All %s positions share an error of %.2f cm-1 from that.", at.band, c.SE(at.shift))
			if !c.Bracketed(at.shift) {
				text = fmt.Sprintf("No line of the reference lies beyond %s: its positions are corrected by extrapolation, and how well is not known.", at.band)
			}
			list = append(list, text)
		}
	}
	if r := f.Response; r != nil {
		text := "Counts corrected for the relative response of the spectrometer: " + r.From + "."
		if se, err := r.RatioSE(1582, 2670); err == nil {
			text += fmt.Sprintf(" All 2D/G ratios share an error of %.1f %% from that.", 100*se)
		}
		list = append(list, text)
	}
	return list
}
