package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/pflag"

	"bandgrid/fit/calib"
	"bandgrid/mapio"
	"bandgrid/mapio/survey"
)

var calibrateVerb = verb{
	name:  "calibrate",
	usage: "SPECTRUM... --reference NAME[,NAME...] -o FILE",
	short: "correct the shift axis, and the response, from reference measurements",
	long: `Finds the lines of a reference in its spectrum, compares them with the published ones, and writes a calibration
that survey --calibration applies. SPECTRUM is text of two columns, shift and counts, or a run, of which the
mean is taken; one for each reference named. With --glass the spectrum of a certified luminescent glass, dark
counts taken off, gives the relative response of the spectrometer as well.

References: ` + wrapped(strings.Join(calib.References(), ", ")) + `
Glasses: ` + strings.Join(calib.Glasses(), ", ") + `

Example:
  bandgrid calibrate examples/calibration/polystyrene.txt --reference polystyrene --order 2 -o calibration.json

A reference corrects the axis between its lines only. Lamps do not see the laser line: measure silicon or
another substance beside them.`,
	setup: func(flags *pflag.FlagSet) func(context.Context, []string, streams) error {
		var o calibrateOptions
		o.add(flags)
		return o.run
	},
}

type calibrateOptions struct {
	out        string
	references []string
	order      int
	laser      float64
	glass      string
	glassName  string
	response   string
	doubt      float64
	dark       float64
	force      bool
}

func (o *calibrateOptions) add(fs *pflag.FlagSet) {
	fs.StringVarP(&o.out, "output", "o", "", "calibration `file` to write; - for standard output")
	fs.StringSliceVar(&o.references, "reference", nil, "what the spectra are of, one `name` for each")
	fs.IntVar(&o.order, "order", 1, "`order` of the correction: 0 an offset, 1 offset and stretch, 2 and 3 curvature too")
	fs.Float64Var(&o.laser, "laser", 0, "laser line in `nm`, where the spectra do not say")
	fs.StringVar(&o.glass, "glass", "", "`spectrum` of a certified glass")
	fs.StringVar(&o.glassName, "glass-name", "", "which glass it is (default: the one for the laser line)")
	fs.StringVar(&o.response, "response", "", "`table` of a response of your own: text of two columns, shift and relative sensitivity")
	fs.Float64Var(&o.doubt, "response-error", 0.03, "relative standard `error` of that table")
	fs.Float64Var(&o.dark, "dark", 0, "`counts` that the detector gives without light, for the glass")
	fs.BoolVarP(&o.force, "force", "f", false, "replace a file that is already there")
}

func (o *calibrateOptions) check(spectra []string) error {
	switch {
	case len(spectra) == 0 && o.glass == "" && o.response == "":
		return errors.New("no spectrum given; bandgrid calibrate --help shows an example")
	case len(spectra) != len(o.references):
		return fmt.Errorf("%d spectra and %d references: name one with --reference for each spectrum", len(spectra), len(o.references))
	case o.out == "":
		return errors.New("say with -o where the calibration goes")
	case o.order < 0 || o.order > 3:
		return fmt.Errorf("--order %d: 0 to 3 are possible", o.order)
	case o.laser != 0 && !(o.laser >= 200 && o.laser <= 2000):
		return fmt.Errorf("--laser %g: a wavelength in nm between 200 and 2000 is needed", o.laser)
	case o.glass != "" && o.response != "":
		return errors.New("--glass and --response both give the response; one is enough")
	case !(o.doubt >= 0 && o.doubt < 1):
		return fmt.Errorf("--response-error %g: a fraction from 0 to 1 is needed", o.doubt)
	case o.glass == "" && o.glassName != "":
		return errors.New("--glass-name goes with --glass")
	}
	return nil
}

func (o *calibrateOptions) run(ctx context.Context, spectra []string, std streams) error {
	if err := o.check(spectra); err != nil {
		return usageError{err}
	}
	if _, err := os.Stat(o.out); err == nil && !o.force && o.out != "-" {
		return fmt.Errorf("%s is there already; give another name or --force", o.out)
	}
	words := std.out
	if o.out == "-" {
		words = std.err
	}
	var file calib.File
	options := mapio.Options{Laser: o.laser, Stdin: std.in}
	if len(spectra) > 0 {
		var measured []calib.Measured
		laser := o.laser
		for i, path := range spectra {
			ref, err := calib.Named(o.references[i])
			if err != nil {
				return usageError{err}
			}
			s, err := mapio.OpenSpectrum(ctx, path, options)
			if err != nil {
				return err
			}
			if laser == 0 {
				laser = s.Laser
			}
			lines, err := calib.Find(s.Axis, s.Counts)
			if err != nil {
				return fmt.Errorf("%s: %w", path, err)
			}
			measured = append(measured, calib.Measured{Reference: ref, Lines: lines})
		}
		var err error
		if file.Axis, err = calib.Solve(measured, calib.Options{Order: o.order, Laser: laser}); err != nil {
			return err
		}
		describeAxis(words, file.Axis)
	}
	if o.glass != "" || o.response != "" {
		measure := o.fromGlass
		if o.response != "" {
			measure = o.fromTable
		}
		r, err := measure(ctx, options, file.Axis)
		if err != nil {
			return err
		}
		file.Response = r
		describeResponse(words, r)
	}
	if o.out == "-" {
		return file.Write(std.out)
	}
	if err := survey.WriteFile(o.out, file.Write); err != nil {
		return err
	}
	_, err := fmt.Fprintf(words, "written: %s; use it with bandgrid survey --calibration %s\n", o.out, o.out)
	return err
}

// fromTable reads a response of the user's own, whose shifts are taken as right.
func (o *calibrateOptions) fromTable(ctx context.Context, options mapio.Options, _ *calib.Calibration) (*calib.Response, error) {
	s, err := mapio.OpenSpectrum(ctx, o.response, options)
	if err != nil {
		return nil, err
	}
	r := &calib.Response{From: filepath.Base(o.response)}
	for i, c := range s.Counts {
		r.Shifts, r.Values, r.SEs = append(r.Shifts, s.Axis[i]), append(r.Values, float64(c)), append(r.SEs, o.doubt)
	}
	if s.Axis.Descending() {
		slices.Reverse(r.Shifts)
		slices.Reverse(r.Values)
	}
	if err := r.Check(); err != nil {
		return nil, fmt.Errorf("%s: %w", o.response, err)
	}
	return r, nil
}

// fromGlass makes the response from the glass, on the axis as corrected.
func (o *calibrateOptions) fromGlass(ctx context.Context, options mapio.Options, axis *calib.Calibration) (*calib.Response, error) {
	s, err := mapio.OpenSpectrum(ctx, o.glass, options)
	if err != nil {
		return nil, err
	}
	laser := s.Laser
	if laser == 0 {
		return nil, fmt.Errorf("%s: it does not say with which laser line it was measured; give it with --laser", o.glass)
	}
	name := o.glassName
	if name == "" {
		for _, n := range calib.Glasses() {
			if g, err := calib.GlassNamed(n); err == nil && math.Abs(g.Laser-laser) <= 3 {
				name = n
			}
		}
		if name == "" {
			return nil, fmt.Errorf("no certified glass is known for %g nm; give a response of your own with --response", laser)
		}
	}
	g, err := calib.GlassNamed(name)
	if err != nil {
		return nil, usageError{err}
	}
	if axis != nil {
		if s.Axis, err = axis.Apply(s.Axis); err != nil {
			return nil, fmt.Errorf("%s: %w", o.glass, err)
		}
	}
	for i := range s.Counts {
		s.Counts[i] -= float32(o.dark)
	}
	r, err := calib.FromGlass(g, s.Axis, s.Counts, laser)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", o.glass, err)
	}
	return r, nil
}

// describeAxis prints what the calibration found.
func describeAxis(w io.Writer, c *calib.Calibration) {
	fmt.Fprintf(w, "%-22s %10s %10s %9s %9s\n", "reference", "true cm-1", "measured", "error", "residual")
	for _, l := range c.Lines {
		fmt.Fprintf(w, "%-22s %10.2f %10.2f %9.2f %+9.2f\n", l.Reference, l.True, l.Measured, l.SE, l.Residual)
	}
	fmt.Fprintf(w, "%s; %d lines found belong to none\n", c.Summary(), c.Missed)
	for _, at := range []struct {
		name  string
		shift float64
	}{{"D", 1345}, {"G", 1582}, {"2D", 2670}} {
		fmt.Fprintf(w, "at %s, %.0f cm-1: %+.2f ± %.2f cm-1", at.name, at.shift, c.Shift(at.shift)-at.shift, c.SE(at.shift))
		if !c.Bracketed(at.shift) {
			fmt.Fprint(w, "; no lines lie on both sides: what the axis does there is not known")
		}
		fmt.Fprintln(w)
	}
	if c.LaserOffsetSE > 0 {
		fmt.Fprintf(w, "the laser line's wavenumber is off by %+.2f ± %.2f cm-1 against %g nm\n", -c.LaserOffset, c.LaserOffsetSE, c.Laser)
	}
	if c.Common > 0 {
		fmt.Fprintf(w, "±%.1f cm-1 of that is the laser line, which a lamp does not see: measure silicon or another substance beside it\n", c.Common)
	}
}

func describeResponse(w io.Writer, r *calib.Response) {
	fmt.Fprintf(w, "response from %s, %.0f to %.0f cm-1\n", r.From, r.Shifts[0], r.Shifts[len(r.Shifts)-1])
	g, _, err1 := r.At(1582)
	td, _, err2 := r.At(2670)
	if se, err3 := r.RatioSE(1582, 2670); errors.Join(err1, err2, err3) == nil {
		fmt.Fprintf(w, "2D is seen %.3f times as well as G, ± %.1f %%\n", td/g, 100*se)
	}
}

// wrapped breaks a list after some 90 characters.
func wrapped(list string) string {
	var b strings.Builder
	n := 12
	for word := range strings.FieldsSeq(list) {
		if n+len(word) > 95 {
			b.WriteString("\n  ")
			n = 2
		} else if n > 12 {
			b.WriteByte(' ')
		}
		b.WriteString(word)
		n += len(word) + 1
	}
	return b.String()
}
