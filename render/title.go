// Package render makes the figures of a survey: [Map], [Histogram], [Overview], and [Standard] for the set that a report shows. It
// draws with render/plot and render/palette and knows no solver.
package render

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"bandgrid/mapio/survey"
	"bandgrid/render/palette"
)

// titles are the quantities in plain words, those of single bands apart.
var titles = map[string]string{
	"layer_number":       "Layer number",
	"layer_probability":  "Probability of the layer number",
	"d_g_ratio":          "D/G height ratio",
	"2d_g_ratio":         "2D/G height ratio",
	"d_g_area_ratio":     "D/G area ratio",
	"2d_g_area_ratio":    "2D/G area ratio",
	"chi2":               "Reduced chi-square of the fit",
	"spikes":             "Channels hit by cosmic rays",
	"status":             "Status of the fit",
	"2d_components":      "Components of the 2D band",
	"2d_evidence":        "Evidence for the 2D make-up",
	"defect_distance":    "Mean distance of defects",
	"defect_density":     "Defect density",
	"crystallite_size":   "Crystallite size",
	"disorder_stage":     "Stage of disorder",
	"strain":             "Strain",
	"hole_density":       "Hole density",
	"coverage":           "Coverage by film",
	"stacking":           "Stacking",
	"g_area_per_silicon": "G area over silicon line",
}

var bandNames = map[string]string{"d": "D", "g": "G", "dprime": "D′", "2d": "2D", "si": "Si"}

var parameterNames = map[string]string{"position": "position", "width": "width (FWHM)", "height": "height", "area": "area"}

// Title says in plain words what a quantity is. A name that it does not know is described by the quantity's own description, or
// by the name.
func Title(q *survey.Quantity) string {
	if t := titles[q.Name]; t != "" {
		return t
	}
	if band, parameter, ok := strings.Cut(q.Name, "_"); ok && bandNames[band] != "" && parameterNames[parameter] != "" {
		return bandNames[band] + " " + parameterNames[parameter]
	}
	if d := strings.TrimSpace(q.Description); d != "" {
		first, _, _ := strings.Cut(d, ";")
		r, size := utf8.DecodeRuneInString(first)
		return string(unicode.ToUpper(r)) + first[size:]
	}
	return strings.ReplaceAll(q.Name, "_", " ")
}

// ramp returns the colours of a quantity: by kind, so that maps side by side are told apart before their titles are read.
func ramp(name string) *palette.Ramp {
	switch {
	case strings.HasSuffix(name, "_position") || strings.HasSuffix(name, "probability"):
		return palette.Water
	case strings.HasSuffix(name, "_ratio") || strings.HasPrefix(name, "defect_"):
		return palette.Copper
	}
	return palette.Moss
}

// discrete tells whether a quantity is drawn by classes.
func discrete(name string) bool { return name == "layer_number" }

// LayerName is the name of a class of layer number, 0 to 5.
func LayerName(class int) string {
	return [...]string{"bare substrate", "1 layer", "2 layers", "3 layers", "4 layers", "5 or more"}[class]
}

// noValue names cells that were measured but have no value.
func noValue(name string) string {
	band, parameter, _ := strings.Cut(name, "_")
	switch {
	case discrete(name):
		return "undetermined"
	case bandNames[band] != "" && (parameter == "position" || parameter == "width"):
		return "band not found"
	}
	return "no value"
}
