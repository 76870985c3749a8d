package render

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"bandgrid/mapio/survey"
	"bandgrid/render/plot"
)

// A Picture is a figure drawn.
type Picture struct {
	Name  string // of the file, without .png
	Title string
	Alt   string // what it shows, for those who do not see it
	PNG   []byte
}

// Standard draws the standard set: a map and a histogram of each quantity of StandardQuantities and, where they have values, of FurtherQuantities that the survey has, and the
// overview of them. Figures are drawn by opt.Workers at a time; order and bytes do not depend on it.
func Standard(s *survey.Survey, opt Options) ([]Picture, error) {
	type job struct {
		name, title, alt string
		figure           func() (*plot.Figure, error)
	}
	var jobs []job
	for _, name := range slices.Concat(StandardQuantities, FurtherQuantities) {
		q := s.Map(name)
		if q == nil || !slices.Contains(StandardQuantities, name) && !slices.ContainsFunc(q.Values, func(v float32) bool { return v == v }) {
			continue
		}
		title := Title(q)
		jobs = append(jobs,
			job{name, title, altMap(s, q), func() (*plot.Figure, error) { return Map(s, name, opt) }},
			job{name + "_histogram", title + ", histogram", altHistogram(q), func() (*plot.Figure, error) {
				small := opt
				small.WidthMM = opt.width() * 2 / 3 // the report shows them side by side at 3 to 2
				return Histogram(s, name, small)
			}})
	}
	if s.Drift != nil {
		jobs = append(jobs, job{"drift", "Drift of the shift axis", altDrift(s.Drift), func() (*plot.Figure, error) { return Drift(s, opt) }})
	}
	if slices.ContainsFunc(StandardQuantities, func(name string) bool { return s.Map(name) != nil }) {
		sheet := opt
		sheet.WidthMM = 0
		jobs = append(jobs, job{"overview", "Overview", "Sheet of the maps of layer number and main quantities, " + Measured(s) + ".",
			func() (*plot.Figure, error) { return Overview(s, StandardQuantities, sheet) }})
	}
	pictures, failed := make([]Picture, len(jobs)), make([]error, len(jobs))
	queue := make(chan int)
	var workers sync.WaitGroup
	for range max(1, min(opt.Workers, len(jobs))) {
		workers.Go(func() {
			for i := range queue {
				j := jobs[i]
				f, err := j.figure()
				if err != nil {
					failed[i] = fmt.Errorf("figure %s: %w", j.name, err)
					continue
				}
				var png bytes.Buffer
				if err := f.PNG(&png); err != nil {
					failed[i] = fmt.Errorf("figure %s: %w", j.name, err)
					continue
				}
				pictures[i] = Picture{Name: j.name, Title: j.title, Alt: j.alt, PNG: png.Bytes()}
			}
		})
	}
	for i := len(jobs) - 1; i >= 0; i-- { // the overview takes longest: first
		queue <- i
	}
	close(queue)
	workers.Wait()
	if err := errors.Join(failed...); err != nil {
		return nil, err
	}
	return pictures, nil
}

func altMap(s *survey.Survey, q *survey.Quantity) string {
	c, err := newCells(s, q.Name, Options{})
	if err != nil {
		return Title(q)
	}
	text := "Map of " + c.title
	if discrete(q.Name) {
		for i, k := range c.keys() {
			if i == 0 {
				text += ": "
			} else {
				text += ", "
			}
			text += k.name + " " + k.amount
		}
		return text + "."
	}
	if c.count[valued] == 0 {
		return text + ": no pixel has a value."
	}
	decimals := max(0, 2-int(math.Floor(math.Log10(c.high-c.low)))) // three digits of the range
	text += fmt.Sprintf(", colours from %s to %s", plot.Number(c.low, decimals), plot.Number(c.high, decimals))
	if u := plot.Unit(q.Unit); u != "" {
		text += " " + u
	}
	return text + fmt.Sprintf("; %d of %d pixels have a value.", c.count[valued], len(c.state))
}

func altHistogram(q *survey.Quantity) string {
	return "Histogram of " + Title(q) + " over pixels, bars coloured by layer number."
}
