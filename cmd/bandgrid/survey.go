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
	"strings"
	"time"

	"github.com/spf13/pflag"

	"bandgrid/fit"
	"bandgrid/fit/calib"
	"bandgrid/mapio"
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

Exit status: 0 done; 1 could not do it, or no go; 2 wrong usage; 3 done, but part of the input was unusable,
and the report says which; 130 interrupted.`,
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
