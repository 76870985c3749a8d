package table

import (
	"errors"
	"strings"
	"testing"

	"bandgrid/mapio/scan"
)

func TestSpectrum(t *testing.T) {
	want := scan.Axis{100, 101.5, 103}
	for name, text := range map[string]string{
		"bare":          "100\t20\n101.5\t30.5\n103\t25\n",
		"comma":         "100,20\n101.5,30.5\n103,25\n",
		"decimal comma": "# laser 532 nm\nshift;counts\n100;20\n101,5;30,5\n103;25",
		"blanks":        "Raman shift (cm-1)  Counts\r\n100  20\r\n101.5  30.5\r\n\r\n103  25\r\n",
	} {
		axis, counts, laser, err := Spectrum(strings.NewReader(text), Options{File: "s.txt"})
		if err != nil || len(axis) != 3 || axis[1] != want[1] || len(counts) != 3 || counts[1] != 30.5 {
			t.Errorf("%s: %v %v %v", name, axis, counts, err)
		}
		if name == "decimal comma" && laser != 532 {
			t.Errorf("%s: laser line %g", name, laser)
		}
	}
	axis, _, _, err := Spectrum(strings.NewReader("wavelength (nm)\tcounts\n540\t1\n550\t2\n560\t3\n"), Options{File: "s.txt", Laser: 532})
	if err != nil || axis[0] < 270 || axis[0] > 290 {
		t.Errorf("%v %v", axis, err)
	}
	for text, is := range map[string]error{
		"":                                 ErrNoSpectrum,
		"no numbers\n":                     ErrNoSpectrum,
		"1\t2\t3\n2\t3\t4\n3\t4\t5\n":      ErrNoSpectrum,
		"100\t20\n101\t30\nx\ty\n102\t3\n": ErrNoSpectrum,
		"100\t20\n99\t30\n102\t3\n":        nil,
		"a\x00b":                           ErrNoSpectrum,
		"nm\n":                             ErrNoSpectrum,
		"wavelength (nm)\tcounts\n540\t1\n550\t2\n560\t3\n": nil,
	} {
		_, _, _, err := Spectrum(strings.NewReader(text), Options{File: "s.txt"})
		var input *scan.InputError
		if !errors.As(err, &input) || is != nil && !errors.Is(err, is) || !strings.HasPrefix(err.Error(), "s.txt: ") {
			t.Errorf("%q: %v", text, err)
		}
	}
}

func FuzzSpectrum(f *testing.F) {
	f.Add("100\t20\n101.5\t30.5\n103\t25\n")
	f.Add("# laser 532 nm\nshift;counts\n100;20\n101,5;30,5\n103;25")
	f.Fuzz(func(t *testing.T, text string) {
		axis, counts, _, err := Spectrum(strings.NewReader(text), Options{File: "f"})
		if _, ok := errors.AsType[*scan.InputError](err); err != nil && !ok {
			t.Errorf("%v: a refusal must be an InputError", err)
		}
		if err == nil && (len(axis) != len(counts) || axis.Check() != nil) {
			t.Errorf("%d shifts, %d counts", len(axis), len(counts))
		}
	})
}
