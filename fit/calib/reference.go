// Package calib makes spectra of different days and instruments agree: it finds the lines of a reference in its spectrum and
// corrects the shift axis from them, follows the drift of a line through a run, and corrects the spectrometer's response.
//
//	lines, err := calib.Find(axis, counts)                            // what the reference shows
//	axisOf, err := calib.Solve([]calib.Measured{{Reference: polystyrene, Lines: lines}}, calib.Options{Order: 1, Laser: 532})
//	corrected, err := axisOf.Apply(axis)
package calib

import (
	_ "embed"
	"encoding/csv"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"bandgrid/mapio/scan"
)

// A Reference is a substance or lamp whose lines are known.
type Reference struct {
	Name  string
	Lamp  bool // its lines are wavelengths: their place on the shift axis depends on the laser line, which it does not see
	Lines []Line
}

// A Line is one of a reference's.
type Line struct {
	Value     float64 // Raman shift, cm-1; of a lamp wavelength in air, nm
	Deviation float64 // one standard deviation of the value, cm-1
	Standing  string  // "seen" or "from memory"
	Source    string
}

//go:embed lines.csv
var linesText string

var references = parse(linesText)

// parse reads the table that is part of the program; a mistake in it is a bug.
func parse(text string) (list []Reference) {
	r := csv.NewReader(strings.NewReader(text))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		panic("calib: lines.csv: " + err.Error())
	}
	for _, row := range rows[1:] {
		i := slices.IndexFunc(list, func(r Reference) bool { return r.Name == row[0] })
		if i < 0 {
			i = len(list)
			list = append(list, Reference{Name: row[0], Lamp: row[2] == "nm"})
		}
		value, err1 := strconv.ParseFloat(row[1], 64)
		deviation, err2 := strconv.ParseFloat(row[3], 64)
		if err1 != nil || err2 != nil {
			panic(fmt.Sprintf("calib: lines.csv: %q", row))
		}
		list[i].Lines = append(list[i].Lines, Line{value, deviation, row[4], row[5]})
	}
	return list
}

// References lists the names of all that is known, in order.
func References() (names []string) {
	for _, r := range references {
		names = append(names, r.Name)
	}
	return names
}

// Named returns the reference of that name. The error lists those there are.
func Named(name string) (Reference, error) {
	for _, r := range references {
		if r.Name == name {
			return r, nil
		}
	}
	return Reference{}, fmt.Errorf("reference %q is not known; these are: %s", name, strings.Join(References(), ", "))
}

// Shifts returns where the lines lie on the shift axis, cm-1, ascending, with their standard deviations, for a laser line in
// air, nm. The shift of a lamp's line is the difference of vacuum wavenumbers to the laser line.
func (r Reference) Shifts(laser float64) (shifts, deviations []float64) {
	type place struct{ at, sd float64 }
	var list []place
	for _, l := range r.Lines {
		at := l.Value
		if r.Lamp {
			at = scan.VacuumWavenumber(laser) - scan.VacuumWavenumber(l.Value)
		}
		list = append(list, place{at, l.Deviation})
	}
	slices.SortFunc(list, func(a, b place) int {
		if a.at < b.at {
			return -1
		}
		return 1
	})
	for _, p := range list {
		shifts, deviations = append(shifts, p.at), append(deviations, p.sd)
	}
	return shifts, deviations
}
