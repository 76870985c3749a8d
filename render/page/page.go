// Package page writes the report of a survey: as one HTML file for the browser, and as Markdown for the notebook. Both carry
// the same content in the same order: what was found, figures, regions, fit quality, what was left out, settings, cautions.
//
// The bytes depend on the survey alone, not on the time of day.
package page

import (
	"bytes"
	_ "embed"
	"encoding/base64"
	"encoding/json"
	"fmt"
	htmltemplate "html/template"
	"io"
	"maps"
	"slices"
	"strings"
	texttemplate "text/template"

	"bandgrid/mapio/survey"
	"bandgrid/render"
)

// A Figure is a picture in the report.
type Figure struct {
	Name  string // of its file, without folder and extension
	Title string
	Alt   string // what it shows, for those who cannot see it
	PNG   []byte // for the HTML report, which holds its pictures itself
}

// A Group is a figure and what stands beside it: a map and its histogram.
type Group []Figure

// A Count is a number of pixels with some property.
type Count struct {
	Name, Description string
	Pixels            int
}

// A Report is what the pages are made from.
type Report struct {
	Survey  *survey.Survey
	Figures []Group // the overview first
	Status  []Count // how fits ended
}

//go:embed report.html.tmpl
var htmlText string

//go:embed report.md.tmpl
var markdownText string

var functions = map[string]any{
	"layer": LayerName, "sig": significant, "pm": plusMinus,
	"percent": func(part, whole int) string {
		if whole == 0 {
			return "–"
		}
		return fmt.Sprintf("%.1f %%", 100*float64(part)/float64(whole))
	},
	"plain": plain, "to": decimals, "measured": render.Measured, "fence": fence, "known": func(v float64) bool { return v == v },
	"data": func(png []byte) htmltemplate.URL {
		return htmltemplate.URL("data:image/png;base64," + base64.StdEncoding.EncodeToString(png))
	},
	"value": func(v any) string {
		if f, ok := v.(float64); ok {
			return significant(f)
		}
		return fmt.Sprint(v)
	},
}

var (
	htmlTemplate     = htmltemplate.Must(htmltemplate.New("report").Funcs(functions).Parse(htmlText))
	markdownTemplate = texttemplate.Must(texttemplate.New("report").Funcs(functions).Parse(markdownText))
)

// HTML writes the report as one self-contained file that needs no network.
func HTML(w io.Writer, r Report) error { return write(w, htmlTemplate, r) }

// Markdown writes the report for a notebook; its figures are those of the survey's folder.
func Markdown(w io.Writer, r Report) error { return write(w, markdownTemplate, r) }

// view is what the templates see.
type view struct {
	Report
	Title    string
	Findings []string
	Whole    *survey.Region
	Regions  []regionRow
	Columns  []column
	Omitted  int // regions beyond those in the table
	Quality  []string
	Settings []pair
	Recipe   string
	Cautions []string
}

type pair struct {
	Name  string
	Value any
}

// maxRegions bounds the table in the report; regions.csv has all of them.
const maxRegions = 60

func write(w io.Writer, t interface{ Execute(io.Writer, any) error }, r Report) error {
	s := r.Survey
	v := view{Report: r, Title: title(s), Findings: Summary(s), Quality: quality(s), Cautions: cautions(s)}
	v.Columns, v.Regions, v.Omitted = regionTable(s)
	for _, name := range slices.Sorted(maps.Keys(s.Settings)) {
		v.Settings = append(v.Settings, pair{strings.ReplaceAll(name, "_", " "), s.Settings[name]})
	}
	var recipe bytes.Buffer
	if json.Indent(&recipe, s.Recipe, "", "  ") == nil {
		v.Recipe = recipe.String()
	}
	var b bytes.Buffer // whole or not at all
	if err := t.Execute(&b, v); err != nil {
		return err
	}
	_, err := b.WriteTo(w)
	return err
}

func title(s *survey.Survey) string {
	if len(s.Runs) == 0 {
		return "Survey"
	}
	var names []string
	for _, run := range s.Runs {
		names = append(names, run.Name)
	}
	return "Survey of " + strings.Join(names, " with ")
}

// markup are the characters that Markdown reads as more than themselves; a line break would end a table's row.
var markup = strings.NewReplacer(`\`, `\\`, "|", `\|`, "*", `\*`, "_", `\_`, "`", "\\`", "[", `\[`, "]", `\]`, "#", `\#`,
	"<", "&lt;", "&", "&amp;", "\r\n", " ", "\n", " ", "\r", " ")

// plain keeps text that comes from files and users from being read as Markdown.
func plain(text any) string { return markup.Replace(fmt.Sprint(text)) }

// fence returns a code fence that text does not contain.
func fence(text string) string {
	f := "```"
	for strings.Contains(text, f) {
		f += "`"
	}
	return f
}

// cautions are what a reader must keep in mind before acting on the numbers.
func cautions(s *survey.Survey) []string {
	list := []string{
		"Patterning decisions want an independent check of the layer number: atomic force microscopy, optical contrast, or transport.",
		"Laser power on the sample: structural change of graphene has been reported at 1 mW in a diffraction-limited spot (Phys. Rev. B 79, 165428 (2009)). If maps at full and at half power differ in G position, the laser heats the film.",
		"The laser of a Raman microscope can injure the eye: interlocks stay on, and wafers reflect like mirrors. Local rules and qualified practice come first.",
		"Layer number rests on published distributions for flakes on oxidised silicon and on simulation; the method has not yet been checked on a measured map of known layers.",
	}
	if s.Map("2d_g_ratio") != nil && !slices.ContainsFunc(s.Calibration, func(c string) bool { return strings.Contains(c, "response") }) {
		list = append(list, "The 2D/G ratio is as measured: the spectrometer's response between the two bands, which commonly differs by 5 to 30 % between instruments (common practice), is not corrected.")
	}
	return list
}
