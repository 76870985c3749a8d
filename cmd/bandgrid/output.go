package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"bandgrid/fit"
	"bandgrid/mapio/survey"
	"bandgrid/render"
	"bandgrid/render/page"
)

// A bundle says what is written of a survey besides its numbers.
type bundle struct {
	recipe  fit.Recipe
	table   bool // pixels.csv and spikes.csv too
	workers int
	traces  []survey.Trace // spectra to show
	kept    []byte         // or the figure of them from before
}

// write writes a survey's files into a folder: numbers, figures, report.
func (b bundle) write(dir string, s *survey.Survey) error {
	if err := survey.Save(dir, s); err != nil {
		return err
	}
	if b.table {
		for name, write := range map[string]func(io.Writer, *survey.Survey) error{"pixels.csv": survey.WritePixels, "spikes.csv": survey.WriteSpikes} {
			if err := survey.WriteFile(filepath.Join(dir, name), func(w io.Writer) error { return write(w, s) }); err != nil {
				return err
			}
		}
	}
	workers := b.workers
	if workers == 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	pictures, err := render.Standard(s, render.Options{Workers: workers})
	if err != nil {
		return err
	}
	if len(b.traces) > 0 {
		picture, err := spectra(b.traces)
		if err != nil {
			return err
		}
		pictures = append(pictures, picture)
	}
	if b.kept != nil {
		pictures = append(pictures, render.Picture{Name: "spectra", Title: spectraTitle, PNG: b.kept, Alt: spectraTitle + "."})
	}
	if err := os.MkdirAll(filepath.Join(dir, "figures"), 0o777); err != nil {
		return err
	}
	report := page.Report{Survey: s, Figures: groups(pictures)}
	if status := s.Map("status"); status != nil {
		for _, c := range fit.CountStatus(status.Values, b.recipe.BandNames()) {
			report.Status = append(report.Status, page.Count(c))
		}
	}
	for _, p := range pictures {
		if err := writeBytes(filepath.Join(dir, "figures", p.Name+".png"), p.PNG); err != nil {
			return err
		}
	}
	for name, write := range map[string]func(io.Writer, page.Report) error{"report.html": page.HTML, "report.md": page.Markdown} {
		var text bytes.Buffer
		if err := write(&text, report); err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
		if err := writeBytes(filepath.Join(dir, name), text.Bytes()); err != nil {
			return err
		}
	}
	return nil
}

func writeBytes(name string, data []byte) error {
	return survey.WriteFile(name, func(w io.Writer) error {
		_, err := w.Write(data)
		return err
	})
}

const spectraTitle = "Spectra of usual pixels with their fits"

// spectra draws the spectra of single pixels.
func spectra(traces []survey.Trace) (p render.Picture, err error) {
	f, err := render.Spectra(traces, render.Options{WidthMM: 160})
	if err != nil {
		return p, err
	}
	var png bytes.Buffer
	if err := f.PNG(&png); err != nil {
		return p, err
	}
	var kinds []string
	for _, t := range traces {
		kinds = append(kinds, strings.ToLower(t.Title))
	}
	return render.Picture{Name: "spectra", Title: spectraTitle, PNG: png.Bytes(),
		Alt: "Spectra with fit and background of usual pixels: " + strings.Join(kinds, ", ") + "."}, nil
}

// groups puts each map beside its histogram, and the overview first.
func groups(pictures []render.Picture) (list []page.Group) {
	for _, p := range pictures {
		f := page.Figure{Name: p.Name, Title: p.Title, Alt: p.Alt, PNG: p.PNG}
		switch n := len(list); {
		case p.Name == "overview":
			list = append([]page.Group{{f}}, list...)
		case n > 0 && strings.HasPrefix(p.Name, list[n-1][0].Name+"_"):
			list[n-1] = append(list[n-1], f)
		default:
			list = append(list, page.Group{f})
		}
	}
	return list
}

// summary prints what was found and the files to open first.
func summary(w io.Writer, s *survey.Survey, folder string, took time.Duration) {
	g := s.Grid
	fmt.Fprintf(w, "%s: %d x %d pixels, step %g x %g um, laser %g nm; %d of %d fitted in %.1f s\n",
		s.Runs[0].Name, g.Cols, g.Rows, g.DX, g.DY, s.Laser, s.Pixels.Fitted, s.Pixels.Expected, took.Seconds())
	for _, sentence := range page.Summary(s) {
		fmt.Fprintln(w, "  "+sentence)
	}
	for i, warning := range s.Warnings {
		if i == 5 {
			fmt.Fprintf(w, "  and %d more warnings in the report\n", len(s.Warnings)-i)
			break
		}
		fmt.Fprintln(w, "  warning:", warning)
	}
	fmt.Fprintln(w, "open first:", filepath.Join(folder, "report.html"))
	fmt.Fprintln(w, "           ", filepath.Join(folder, "figures", "overview.png"))
}
