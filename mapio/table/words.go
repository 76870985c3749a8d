package table

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// A role is what a column holds.
type role uint8

const (
	ignored role = iota
	xRole
	yRole
	shiftRole // Raman shift, or wavelength: see column.unit
	countsRole
)

// A column is a role with the unit of its numbers: um, nm or mm for a position, cm-1 or nm for the axis.
type column struct {
	role role
	unit string // empty if not stated
}

// scale returns um per unit of a position.
func (c column) scale() (mul, div float64) {
	switch c.unit {
	case "mm":
		return 1000, 1
	case "nm":
		return 1, 1000
	}
	return 1, 1
}

// text makes a string of bytes from a header. What is not UTF-8 is taken for Latin-1, where a lone byte is the micro sign.
func text(b []byte) string {
	if utf8.Valid(b) {
		return string(b)
	}
	runes := make([]rune, len(b))
	for i, c := range b {
		runes[i] = rune(c)
	}
	return string(runes)
}

// tidy spells a header cell in small letters, one spelling for each unit, without quotes.
var tidy = strings.NewReplacer("µ", "u", "μ", "u", "⁻¹", "-1", "−", "-", "–", "-", "^", "", "{", "", "}", "", "\"", "", "'", "",
	"1/cm", "cm-1", "/cm", "cm-1", "cm -1", "cm-1", "λ", "lambda")

// unit returns the unit that a word spells, or "".
func unit(word string) string {
	switch word {
	case "um", "micron", "microns", "micrometer", "micrometre", "micrometers", "micrometres":
		return "um"
	case "mm", "nm", "cm-1":
		return word
	case "nanometer", "nanometre", "nanometers", "nanometres":
		return "nm"
	case "millimeter", "millimetre", "millimeters", "millimetres":
		return "mm"
	case "wavenumbers", "cm1", "rel.cm-1":
		return "cm-1"
	}
	return ""
}

// parseCell reads a header cell such as "X (um)", "stage_y_mm", "Raman shift / cm-1", "Counts".
func parseCell(cell []byte) (column, bool) {
	if len(cell) > 200 {
		return column{}, false
	}
	var c column
	s := tidy.Replace(strings.ToLower(text(cell)))
	words := strings.FieldsFunc(s, func(r rune) bool {
		return r == '_' || unicode.IsSpace(r) || strings.ContainsRune("()[]/:,;#%|<>=", r)
	})
	var rest []string
	for _, w := range words {
		if u := unit(w); u != "" && len(words) > 1 {
			c.unit = u
			continue
		}
		rest = append(rest, w)
	}
	name := strings.Join(rest, " ")
	for _, w := range rest {
		switch w {
		case "shift", "wavenumber", "wavenumbers", "ramanshift":
			c.role = shiftRole
		case "wavelength", "lambda", "wavelengths":
			c.role = shiftRole
			if c.unit == "" {
				c.unit = "nm"
			}
		case "counts", "count", "intensity", "intensities", "signal", "cts":
			c.role = countsRole
		}
		if c.role != ignored {
			return c, c.role == countsRole || c.unit != "um" && c.unit != "mm"
		}
	}
	for _, w := range []string{"position", "pos", "stage", "coordinate", "coord", "motor", "axis", "sample", "-", "."} {
		name = strings.ReplaceAll(name, w, "")
	}
	switch strings.TrimSpace(name) {
	case "x":
		c.role = xRole
	case "y":
		c.role = yRole
	default:
		return column{}, false
	}
	return c, c.unit != "cm-1"
}

// parseColumns reads --columns.
func parseColumns(names []string) ([]column, error) {
	var columns []column
	seen := map[role]bool{}
	for _, name := range names {
		word, u, stated := strings.Cut(strings.TrimSpace(name), ":")
		var c column
		switch strings.ToLower(strings.TrimSpace(word)) {
		case "x":
			c.role = xRole
		case "y":
			c.role = yRole
		case "shift":
			c.role = shiftRole
		case "wavelength":
			c.role, c.unit = shiftRole, "nm"
		case "counts":
			c.role = countsRole
		case "-", "":
		default:
			return nil, fmt.Errorf("%q is no column; x, y, shift, wavelength, counts and - are", word)
		}
		if stated {
			c.unit = unit(tidy.Replace(strings.ToLower(strings.TrimSpace(u))))
			position, axis := c.role == xRole || c.role == yRole, c.role == shiftRole
			if !(position && (c.unit == "um" || c.unit == "mm" || c.unit == "nm") || axis && (c.unit == "cm-1" || c.unit == "nm")) {
				return nil, fmt.Errorf("%q: positions come in um, mm or nm, the axis in cm-1 or nm", name)
			}
		}
		if c.role != ignored && seen[c.role] {
			return nil, fmt.Errorf("there are two columns for %s", word)
		}
		seen[c.role] = true
		columns = append(columns, c)
	}
	if len(names) > 0 && (!seen[xRole] || !seen[yRole]) {
		return nil, fmt.Errorf("x and y must be among them")
	}
	if seen[countsRole] && !seen[shiftRole] {
		return nil, fmt.Errorf("counts need a column of the shift or wavelength beside them")
	}
	return columns, nil
}

// header is what the lines above the data say of the run.
type header struct {
	laser float64 // nm; 0 if not stated
	unit  string  // of the axis, where a line says so; cm-1, nm or empty
	notes map[string]string
}

// Bounds on the notes that are kept, so that a long header does no harm.
const (
	maxNotes    = 200
	maxNoteName = 80
	maxNote     = 1000
)

var (
	laserLine = regexp.MustCompile(`(?:laser|excitation)([^0-9]*)([0-9]+(?:[.,][0-9]+)?)[\s_]*([a-z%]*)`)
	noLaser   = regexp.MustCompile(`power|time|filter|intensity|current|temperature|spot|serial|no\.|\bid\b`)
	noteLine  = regexp.MustCompile(`^\s*([^:=]*[^:=\s])\s*[:=]\s*(.*?)\s*$`)
	waveLine  = regexp.MustCompile(`wavelength[^0-9a-z]*nm|axis[^0-9]*\bnm\b`)
	shiftLine = regexp.MustCompile(`shift[^0-9a-z]*cm-1|axis[^0-9]*cm-1`)
)

// add reads a comment or a line of words.
func (h *header) add(line []byte) {
	if len(line) > 2*maxNote {
		return
	}
	s := text(line)
	lower := tidy.Replace(strings.ToLower(s))
	if m := laserLine.FindStringSubmatch(lower); m != nil && !noLaser.MatchString(m[1]) && h.laser == 0 {
		v, err := strconv.ParseFloat(strings.ReplaceAll(m[2], ",", "."), 64)
		if err == nil && v >= 200 && v <= 2000 && (m[3] == "nm" || m[3] == "") {
			h.laser = v
		}
	} else if m == nil && h.unit == "" {
		if waveLine.MatchString(lower) {
			h.unit = "nm"
		} else if shiftLine.MatchString(lower) {
			h.unit = "cm-1"
		}
	}
	if m := noteLine.FindStringSubmatch(s); m != nil && len(m[1]) <= maxNoteName && len(m[2]) <= maxNote && len(h.notes) < maxNotes {
		if h.notes == nil {
			h.notes = map[string]string{}
		}
		h.notes[strings.ToValidUTF8(m[1], "")] = m[2]
	}
}
