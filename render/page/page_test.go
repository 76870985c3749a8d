package page

import (
	"bytes"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"image"
	"image/png"
	"io"
	"math"
	"regexp"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

const hostile = "<script>alert(1)</script> | *bold* [link](x) `code` \"quoted\" & more\nnext line"

// example is a report with everything in it, texts of files and users hostile.
func example(t *testing.T) Report {
	s := &survey.Survey{X: make([]float32, 6), Y: make([]float32, 6)}
	s.Program = "bandgrid test"
	s.Runs = []survey.RunFile{{Name: hostile, SHA256: "9f2c", Bytes: 77, Format: "long text"}}
	s.Laser = 532
	s.Axis = survey.AxisInfo{Channels: 512, From: 1150, To: 2900}
	s.Grid = scan.Grid{Layout: scan.Raster, Cols: 3, Rows: 2, DX: 2, DY: 2}
	s.Pixels = survey.Pixels{Expected: 6, Read: 5, Fitted: 5, Failed: 1, Repeated: 2, Missing: 1}
	s.Recipe = json.RawMessage(`{"name":"` + "```" + `"}`)
	s.Settings = map[string]any{"spot_um": 0.5, "film": hostile}
	s.Notes = map[string]string{"sample": hostile}
	s.Warnings = []string{hostile}
	nan := float32(math.NaN())
	put := func(name, unit string, v ...float32) { s.Put(survey.Quantity{Name: name, Unit: unit, Values: v}) }
	put("status", "", 1, 1, 1, 1, 1, nan)
	put("layer_number", "", 1, 1, 1, 0, nan, nan)
	put("d_g_ratio", "", 0.02, 0.03, 0.05, nan, 0.9, nan)
	put("g_position", "cm-1", 1582, 1583, 1585, nan, 1590, nan)
	put("chi2", "", 1, 1.1, 0.9, 1, 3, nan)
	put("spikes", "", 0, 2, 0, 1, 0, nan)
	stats := []survey.Stat{{Quantity: "d_g_ratio", N: 3, Median: 0.03, Spread: 0.015}, {Quantity: "g_position", N: 3, Median: 1583.21, Spread: 0.43}}
	s.Regions = []survey.Region{
		{ID: "all", Layer: math.NaN(), Pixels: 5, Area: 20, Stats: stats},
		{ID: "1", Layer: 1, Pixels: 3, Area: 12, AreaSE: 1.3, Stats: stats},
		{ID: "2", Layer: 0, Pixels: 1, Area: 4, AreaSE: 0.9},
	}
	var b bytes.Buffer
	if err := png.Encode(&b, image.NewGray(image.Rect(0, 0, 4, 3))); err != nil {
		t.Fatal(err)
	}
	figure := func(name string) Figure {
		return Figure{Name: name, Title: name, Alt: "shows " + hostile, PNG: b.Bytes()}
	}
	return Report{Survey: s, Figures: []Group{{figure("overview")}, {figure("layer_number"), figure("layer_number_histogram")}},
		Status: []Count{{"converged", "an optimum was reached", 5}, {"poor fit", "never shown", 0}}}
}

func written(t *testing.T, r Report, write func(io.Writer, Report) error) string {
	t.Helper()
	var b bytes.Buffer
	if err := write(&b, r); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

var tag = regexp.MustCompile(`<(/?)([a-zA-Z][a-zA-Z0-9]*)((?:[^<>"]|"[^"]*")*)>`)

func TestHTMLIsBalanced(t *testing.T) {
	text := written(t, example(t), HTML)
	if !strings.HasPrefix(text, "<!DOCTYPE html>\n") {
		t.Error("no document type")
	}
	body := regexp.MustCompile(`(?s)<style>.*?</style>`).ReplaceAllString(text, "")
	var open []string
	ids := map[string]bool{}
	for _, m := range tag.FindAllStringSubmatch(body, -1) {
		if id := regexp.MustCompile(` id="([^"]*)"`).FindStringSubmatch(m[3]); id != nil {
			if ids[id[1]] {
				t.Errorf("two elements have the id %q", id[1])
			}
			ids[id[1]] = true
		}
		switch name := m[2]; {
		case name == "meta" || name == "img" || name == "br":
		case m[1] == "":
			open = append(open, name)
		case len(open) == 0 || open[len(open)-1] != name:
			t.Fatalf("</%s> closes %v", name, open)
		default:
			open = open[:len(open)-1]
		}
	}
	if len(open) > 0 {
		t.Errorf("never closed: %v", open)
	}
	for _, ref := range regexp.MustCompile(`(?:aria-labelledby|href)="#?([^"]*)"`).FindAllStringSubmatch(body, -1) {
		if !ids[ref[1]] {
			t.Errorf("%s refers to nothing", ref[0])
		}
	}
}

func TestHTMLNeedsNoNetwork(t *testing.T) {
	text := written(t, example(t), HTML)
	for _, ref := range regexp.MustCompile(`(?:src|href)="([^"]*)"`).FindAllStringSubmatch(text, -1) {
		if !strings.HasPrefix(ref[1], "data:") && !strings.HasPrefix(ref[1], "#") {
			t.Errorf("%s leads out of the file", ref[0])
		}
	}
	for _, word := range []string{"url(", "@import", "<script", "<link", "<iframe"} {
		if strings.Contains(text, word) {
			t.Errorf("the page contains %q", word)
		}
	}
	images := regexp.MustCompile(`<img src="data:image/png;base64,([^"]*)" alt="([^"]+)"`).FindAllStringSubmatch(text, -1)
	if len(images) != 3 {
		t.Fatalf("%d pictures with an alternative text, want 3", len(images))
	}
	for _, m := range images {
		data, err := base64.StdEncoding.DecodeString(strings.ReplaceAll(m[1], "&#43;", "+"))
		if err != nil {
			t.Fatal(err)
		}
		if _, err := png.Decode(bytes.NewReader(data)); err != nil {
			t.Error(err)
		}
	}
}

func TestMarkdownIsPlain(t *testing.T) {
	text := written(t, example(t), Markdown)
	if strings.Contains(text, "<script") || strings.Contains(text, "*bold*") && !strings.Contains(text, `\*bold\*`) {
		t.Error("text of a file is read as markup")
	}
	bar := regexp.MustCompile(`(^|[^\\])\|`)
	columns := 0
	for i, line := range strings.Split(text, "\n") {
		if !strings.HasPrefix(line, "|") {
			columns = 0
			continue
		}
		n := len(bar.FindAllString(line, -1))
		if columns != 0 && n != columns {
			t.Errorf("line %d has %d bars, the row above %d: %s", i+1, n, columns, line)
		}
		columns = n
	}
	for _, name := range []string{"overview", "layer_number", "layer_number_histogram"} {
		if !strings.Contains(text, "](figures/"+name+".png)") {
			t.Errorf("figure %s is not linked", name)
		}
	}
	if !strings.Contains(text, "````json") {
		t.Error("the recipe's own fence ends the block")
	}
}

func TestSameContent(t *testing.T) {
	html, markdown := written(t, example(t), HTML), written(t, example(t), Markdown)
	last := map[string]int{}
	for _, part := range []string{"Single layer: 12.0 ± 1.3 µm² in 1 region.", "Regions", "1583.21", "Fit quality", "left out", "Settings and origin", "9f2c", "Cautions", "Local rules and qualified practice come first"} {
		for name, text := range map[string]string{"html": html, "markdown": markdown} {
			at := strings.LastIndex(text, part)
			if at < 0 || at < last[name] && part != "left out" {
				t.Errorf("%s: %q is missing or out of order", name, part)
			}
			last[name] = max(last[name], at)
		}
	}
	if again := written(t, example(t), HTML); again != html {
		t.Error("the same survey gives other bytes")
	}
}

func TestSummary(t *testing.T) {
	got := strings.Join(Summary(example(t).Survey), "\n")
	// Median of 0.02, 0.03, 0.05; deviations 0.01, 0, 0.02: spread 1.4826 x 0.01. One of five measured pixels of 4 um2 is undetermined.
	want := `Single layer: 12.0 ± 1.3 µm² in 1 region.
Bare substrate: 4.00 ± 0.90 µm² in 1 region.
Undetermined: 4.00 µm², 20.0 % of the measured pixels.
D/G height ratio of single layers: median 0.030, spread 0.015 (3 pixels).
G position of single layers: median 1583.0, spread 1.5 cm⁻¹ (3 pixels).`
	if got != want {
		t.Errorf("summary:\n%s\nwant:\n%s", got, want)
	}
}

func TestBareSurvey(t *testing.T) {
	// A survey of nothing must still give a page, without NaN in it.
	r := Report{Survey: &survey.Survey{}}
	for _, write := range []func(io.Writer, Report) error{HTML, Markdown} {
		if text := written(t, r, write); strings.Contains(text, "NaN") {
			t.Error("NaN in the report")
		}
	}
}

type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, errors.New("disk full") }

func TestWriteErrorIsReported(t *testing.T) {
	for i, write := range []func(io.Writer, Report) error{HTML, Markdown} {
		if err := write(broken{}, example(t)); err == nil || !strings.Contains(fmt.Sprint(err), "disk full") {
			t.Errorf("writer %d: error %v", i, err)
		}
	}
}
