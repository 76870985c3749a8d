package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/pflag"

	"bandgrid/fit"
	"bandgrid/fit/carbon"
	"bandgrid/fit/region"
	"bandgrid/mapio/survey"
)

// A meaning is how stored bands are interpreted.
type meaning struct {
	film    string
	oxide   float64
	spot    float64
	minArea float64
	limits  string
}

func (m *meaning) add(fs *pflag.FlagSet) {
	fs.StringVar(&m.film, "film", "unknown", "where the film comes from: `unknown`, exfoliated or grown; unknown is the cautious one")
	fs.Float64Var(&m.oxide, "oxide", 0, "thickness of the substrate's oxide in `nm`, where known")
	fs.Float64Var(&m.spot, "spot", 0, "laser spot's full width at half maximum in `um` (default: one step)")
	fs.Float64Var(&m.minArea, "min-area", 0, "smallest region in `um2`; smaller specks and holes are absorbed (default: four pixels)")
	fs.StringVar(&m.limits, "limits", "", "JSON `file` of limits to keep; says go or no go, and ends with status 1 at no go")
}

func (m *meaning) check() error {
	if m.spot < 0 || m.minArea < 0 || m.oxide < 0 {
		return errors.New("spot, oxide and area cannot be negative")
	}
	return carbon.Settings{Film: m.film, Oxide: m.oxide}.Check()
}

// apply adds what follows from the bands: ratios, layer number, defects, strain, regions. What an earlier interpretation said is
// replaced.
func (m *meaning) apply(s *survey.Survey, recipe fit.Recipe) error {
	s.Warnings = s.Warnings[:min(s.FitWarnings, len(s.Warnings))]
	s.Settings["film"] = m.film
	for name, v := range map[string]float64{"oxide_nm": m.oxide, "spot_um": m.spot, "min_area_um2": m.minArea} {
		if delete(s.Settings, name); v > 0 {
			s.Settings[name] = v
		}
	}
	steps := carbon.All(carbon.Settings{Film: m.film, Oxide: m.oxide})
	for _, step := range steps {
		s.Drop(step.Gives...)
	}
	if err := fit.Apply(s, append(fit.RatioSteps(recipe), steps...)); err != nil {
		return err
	}
	if err := region.Find(s, region.Options{MinArea: m.minArea, Ring: m.spot}); err != nil {
		return err
	}
	s.Verdicts = nil
	limits, err := m.readLimits()
	if err != nil || limits == nil {
		return err
	}
	if s.Verdicts, err = region.Judge(s, limits); err != nil {
		return fmt.Errorf("%s: %w", m.limits, err)
	}
	return nil
}

// readLimits returns the limits to keep, nil where none are asked for.
func (m *meaning) readLimits() ([]region.Limit, error) {
	if m.limits == "" {
		return nil, nil
	}
	f, err := os.Open(m.limits)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	limits, err := region.ReadLimits(f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", m.limits, err)
	}
	return limits, nil
}

// verdict returns an error where a limit is not kept.
func verdict(s *survey.Survey) error {
	for _, v := range s.Verdicts {
		if !v.Go {
			return fmt.Errorf("%w: %s is %.4g ± %.2g, %s is wanted", errNoGo, v.What, v.Value, v.SE, v.Limit)
		}
	}
	return nil
}

var interpretVerb = verb{
	name:  "interpret",
	usage: "SURVEY",
	short: "interpret a survey again with other settings, without fitting",
	long: `Layer number, defects, strain, regions, figures and report again, from the stored bands, in seconds. What is
not set stays as it was in the survey. The result is a new survey, or with --force takes the place of the old.

Example:
  bandgrid survey examples/flake/overnight.txt.zst -o flake.survey
  bandgrid interpret flake.survey --film exfoliated -o flake-exfoliated.survey`,
	setup: func(flags *pflag.FlagSet) func(context.Context, []string, streams) error {
		var o interpretOptions
		o.add(flags)
		return o.run
	},
}

type interpretOptions struct {
	flags   *pflag.FlagSet
	out     string
	meaning meaning
	notes   map[string]string
	table   bool
	workers int
	force   bool
	quiet   bool
}

func (o *interpretOptions) add(fs *pflag.FlagSet) {
	o.flags = fs
	fs.StringVarP(&o.out, "output", "o", "", "survey `folder` to write (default, with --force: the survey itself)")
	o.meaning.add(fs)
	fs.StringToStringVar(&o.notes, "note", nil, "`KEY=VALUE` for survey and report, beside those there are")
	fs.BoolVar(&o.table, "table", false, "write pixels.csv, all quantities, a row per pixel")
	fs.IntVar(&o.workers, "workers", 0, "`number` of workers for the figures (default: one per processor)")
	fs.BoolVarP(&o.force, "force", "f", false, "replace the survey, or the one that -o names")
	fs.BoolVarP(&o.quiet, "quiet", "q", false, "no summary")
}

func (o *interpretOptions) run(_ context.Context, args []string, std streams) error {
	start := time.Now()
	switch {
	case len(args) != 1:
		return usageError{errors.New("one survey is needed; bandgrid interpret --help shows an example")}
	case o.out == "" && !o.force:
		return usageError{errors.New("say with -o where the new survey goes, or replace the old one with --force")}
	}
	if err := o.meaning.check(); err != nil {
		return usageError{err}
	}
	if _, err := o.meaning.readLimits(); err != nil {
		return err
	}
	from := filepath.Clean(args[0])
	s, err := survey.Load(from)
	if err != nil {
		return err
	}
	recipe, err := fit.ReadRecipe(bytes.NewReader(s.Recipe))
	if err != nil {
		return fmt.Errorf("%s: the recipe in survey.json: %w", from, err)
	}
	o.keep(s)
	for k, v := range o.notes {
		if s.Notes == nil {
			s.Notes = map[string]string{}
		}
		s.Notes[k] = v
	}
	if err := o.meaning.apply(s, recipe); err != nil {
		return err
	}
	out := o.out
	if out == "" {
		out = from
	}
	folder, err := survey.Create(out, o.force)
	if err != nil {
		return err
	}
	err = (bundle{recipe: recipe, table: o.table, workers: o.workers, kept: spectraOf(from)}).write(folder.Path(), s)
	if err == nil {
		err = copyOthers(folder.Path(), from)
	}
	if err != nil {
		return errors.Join(err, folder.Abandon())
	}
	if err := folder.Commit(); err != nil {
		return err
	}
	if !o.quiet {
		summary(std.out, s, out, time.Since(start))
	}
	return verdict(s)
}

// keep takes over what the survey was interpreted with where no flag says otherwise.
func (o *interpretOptions) keep(s *survey.Survey) {
	if s.Settings == nil {
		s.Settings = map[string]any{}
	}
	if film, ok := s.Settings["film"].(string); ok && !o.flags.Changed("film") {
		o.meaning.film = film
	}
	for flag, setting := range map[string]struct {
		name string
		to   *float64
	}{"oxide": {"oxide_nm", &o.meaning.oxide}, "spot": {"spot_um", &o.meaning.spot}, "min-area": {"min_area_um2", &o.meaning.minArea}} {
		if v, ok := s.Settings[setting.name].(float64); ok && !o.flags.Changed(flag) {
			*setting.to = v
		}
	}
}

// spectraOf returns the figure of spectra of a survey, which cannot be made again without the run; nil without.
func spectraOf(folder string) []byte {
	png, err := os.ReadFile(filepath.Join(folder, "figures", "spectra.png"))
	if err != nil {
		return nil
	}
	return png
}

// copyOthers copies files that people or other verbs have put beside the survey's own.
func copyOthers(to, from string) error {
	return filepath.WalkDir(from, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		name, err := filepath.Rel(from, path)
		if err != nil {
			return err
		}
		if strings.HasPrefix(name, "maps"+string(filepath.Separator)) || strings.HasPrefix(name, "figures"+string(filepath.Separator)) {
			return nil // quantities that are no more
		}
		target := filepath.Join(to, name)
		if _, err := os.Lstat(target); err == nil || name == "pixels.csv" {
			return nil
		}
		if err := os.MkdirAll(filepath.Dir(target), 0o777); err != nil {
			return err
		}
		in, err := os.Open(path)
		if err != nil {
			return err
		}
		defer in.Close()
		return survey.WriteFile(target, func(w io.Writer) error { _, err := io.Copy(w, in); return err })
	})
}
