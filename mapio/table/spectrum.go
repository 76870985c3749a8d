package table

import (
	"bytes"
	"errors"
	"fmt"
	"io"

	"bandgrid/mapio/scan"
)

// maxSpectrum bounds the file of a single spectrum, bytes.
const maxSpectrum = 64 << 20

// ErrNoSpectrum says that a file does not hold a single spectrum in two columns; it may be a map.
var ErrNoSpectrum = errors.New("it is not a single spectrum in two columns")

// Spectrum reads a single spectrum: two columns of delimited text, the shift (or wavelength, where the header says nm) and the
// counts, under any lines of words. Refusals are of type *scan.InputError and wrap ErrNoSpectrum where the file has another
// form.
func Spectrum(r io.Reader, opt Options) (axis scan.Axis, counts []float32, laser float64, err error) {
	fail := func(line int, what, remedy string, cause error) error {
		return &scan.InputError{File: opt.File, Line: line, Pixel: -1, What: what, Remedy: remedy, Err: cause}
	}
	data, err := io.ReadAll(io.LimitReader(r, maxSpectrum+1))
	switch {
	case err != nil:
		return nil, nil, 0, fail(0, "it cannot be read", "", err)
	case len(data) > maxSpectrum:
		return nil, nil, 0, fail(0, "it is larger than 64 MiB", "give a single spectrum", ErrNoSpectrum)
	case bytes.IndexByte(data, 0) >= 0:
		return nil, nil, 0, fail(0, "it is binary data, not text", "export the spectrum as delimited text", ErrNoSpectrum)
	}
	lines := bytes.SplitAfter(bytes.TrimPrefix(append(data, '\n'), []byte("\ufeff")), []byte("\n"))
	best, rows := dialect{}, 0
	for _, d := range []dialect{{'\t', '.'}, {'\t', ','}, {';', '.'}, {';', ','}, {',', '.'}, {' ', '.'}, {' ', ','}} {
		n := 0
		for _, l := range lines {
			if len(l) > 1 && !isBlank(l) {
				if s := d.shape(l); s.fields == 2 && s.numbers == 2 {
					n++
				}
			}
		}
		if n > rows {
			best, rows = d, n
		}
	}
	var h header
	for i, l := range lines {
		if len(l) < 2 || isBlank(l) {
			continue
		}
		if s := best.shape(l); rows > 0 && s.fields == 2 && s.numbers == 2 {
			first := best.start(l)
			x, stop, _ := best.number(l, first)
			y, _, ok := best.number(l, best.next(l, stop))
			if !ok {
				return nil, nil, 0, fail(i+1, "the row has no counts", "export the spectrum again", nil)
			}
			axis, counts = append(axis, x), append(counts, float32(y))
			continue
		}
		if len(axis) > 0 {
			return nil, nil, 0, fail(i+1, fmt.Sprintf("%.30q is not a row of shift and counts", bytes.TrimSpace(l)), "export a single spectrum in two columns", ErrNoSpectrum)
		}
		body, ok := best.comment(l)
		if !ok {
			body = l
			for _, cell := range best.cells(l) {
				if c, ok := parseCell(cell); ok && c.role == shiftRole && c.unit != "" {
					h.unit = c.unit
				}
			}
		}
		h.add(body)
	}
	if len(axis) < 3 {
		return nil, nil, 0, fail(0, "there are no rows of shift and counts in it", "export a single spectrum in two columns", ErrNoSpectrum)
	}
	if laser = opt.Laser; laser == 0 {
		laser = h.laser
	}
	if h.unit == "nm" {
		if laser == 0 {
			return nil, nil, 0, fail(0, "the axis is in nm, so the laser line is needed to make Raman shifts of it", "give it with --laser, for instance --laser 532", nil)
		}
		axis = scan.ShiftFromWavelength(axis, laser)
	}
	if err := axis.Check(); err != nil {
		return nil, nil, 0, fail(0, "its axis cannot be used", "correct it; an axis rises or falls all the way", err)
	}
	return axis, counts, laser, nil
}
