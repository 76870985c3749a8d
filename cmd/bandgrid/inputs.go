package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"strings"
	"time"

	"bandgrid/fit"
	"bandgrid/mapio"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

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
