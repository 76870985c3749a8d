// Package area reads areas that people draw on the stage: polygons to leave out of a survey, or to have statistics of.
//
// The file is comma-separated text with a header line: name, x, y. Each row is a vertex, in um of the stage; rows with the same
// name, one after the other, make a polygon. Lines that begin with # are comments.
//
//	name,x,y
//	tape,412,-268
//	tape,418,-268
//	tape,418,-262
package area

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"bandgrid/mapio/scan"
)

// An Area is a polygon. Its last vertex is joined to the first.
type Area struct {
	Name string
	X, Y []float64 // vertices, um
}

// Contains tells whether a point lies inside, by counting the sides that a ray from it crosses. Where sides cross each other,
// what is enclosed twice is outside.
func (a *Area) Contains(x, y float64) bool {
	inside := false
	j := len(a.X) - 1
	for i := range a.X {
		if (a.Y[i] > y) != (a.Y[j] > y) && x < a.X[i]+(a.X[j]-a.X[i])*(y-a.Y[i])/(a.Y[j]-a.Y[i]) {
			inside = !inside
		}
		j = i
	}
	return inside
}

// limits keep a hostile file from taking all memory.
const (
	maxBytes    = 16 << 20
	maxVertices = 200000
)

// Read reads areas; file names the source in errors, which are of type *scan.InputError.
func Read(r io.Reader, file string) ([]Area, error) {
	data, err := io.ReadAll(io.LimitReader(r, maxBytes+1))
	fail := func(line int, what, remedy string, cause error) error {
		return &scan.InputError{File: file, Line: line, Pixel: -1, What: what, Remedy: remedy, Err: cause}
	}
	if err != nil {
		return nil, fail(0, "it cannot be read", "", err)
	}
	if len(data) > maxBytes {
		return nil, fail(0, "it is larger than 16 MiB", "areas are polygons of some vertices; is this the right file?", nil)
	}
	const form = "the form is: a header line name,x,y, then a vertex per line, um"
	data = bytes.TrimPrefix(data, []byte("\ufeff"))
	rows := csv.NewReader(bufio.NewReader(bytes.NewReader(data)))
	rows.Comment, rows.TrimLeadingSpace, rows.FieldsPerRecord, rows.ReuseRecord = '#', true, -1, true
	var areas []Area
	header := true
	vertices := 0
	for {
		row, err := rows.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		line, _ := rows.FieldPos(0)
		if err != nil {
			return nil, fail(0, "it is not comma-separated text", form, err)
		}
		if len(row) != 3 {
			return nil, fail(line, fmt.Sprintf("%d values, there should be 3", len(row)), form, nil)
		}
		if header {
			header = false
			if !strings.EqualFold(row[0], "name") || !strings.EqualFold(row[1], "x") || !strings.EqualFold(row[2], "y") {
				return nil, fail(line, "the header line is missing", form, nil)
			}
			continue
		}
		x, errX := strconv.ParseFloat(strings.TrimSpace(row[1]), 64)
		y, errY := strconv.ParseFloat(strings.TrimSpace(row[2]), 64)
		if err := errors.Join(errX, errY); err != nil || math.IsNaN(x+y) || math.IsInf(x, 0) || math.IsInf(y, 0) {
			return nil, fail(line, fmt.Sprintf("%q, %q are not a position", row[1], row[2]), form, nil)
		}
		if vertices++; vertices > maxVertices {
			return nil, fail(line, fmt.Sprintf("more than %d vertices", maxVertices), "draw the areas with fewer", nil)
		}
		name := strings.Clone(strings.TrimSpace(row[0]))
		if n := len(areas); n == 0 || areas[n-1].Name != name {
			if slices.ContainsFunc(areas, func(a Area) bool { return a.Name == name }) {
				return nil, fail(line, fmt.Sprintf("area %q comes back after another", name), "put its vertices together, or use two names", nil)
			}
			areas = append(areas, Area{Name: name})
		}
		a := &areas[len(areas)-1]
		a.X, a.Y = append(a.X, x), append(a.Y, y)
	}
	if len(areas) == 0 {
		return nil, fail(0, "there is no area in it", form, nil)
	}
	for _, a := range areas {
		if len(a.X) < 3 {
			return nil, fail(0, fmt.Sprintf("area %q has %d vertices", a.Name, len(a.X)), "a polygon has at least 3", nil)
		}
	}
	return areas, nil
}
