// Package mapio opens Raman area scans.
//
// [Open] recognises a run by its content. The [scan.Scan] it returns knows the shift axis at once and yields the pixels in
// blocks:
//
//	sc, err := mapio.Open("night.txt.zst", mapio.Options{Laser: 532})
//	...
//	defer sc.Close()
//	for block, err := range sc.Blocks(ctx) { ... } // still undecoded: decode it in a worker
package mapio

import (
	"bufio"
	"io"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/table"
)

// Options say what a run does not say of itself. The zero value works for runs that do.
type Options struct {
	Laser float64 // laser line, nm; 0: take it from the run's header if it says
	// Columns names the columns of delimited text where guessing fails, from the left: x, y, shift, wavelength, counts, or -
	// for one to ignore, with the unit if need be, as in x:mm. Without counts the rows are pixels, and all further columns
	// are channels.
	Columns []string
	Stdin   io.Reader // what "-" reads; default: os.Stdin
}

// sniffLen is how many bytes of a run, unpacked, the formats may look at to recognise it.
const sniffLen = 4096

// A format is a way in which runs are written.
type format struct {
	is   func(head []byte) bool // whether the run, of which head is the beginning, is written so
	open func(r io.Reader, file string, opt Options) (*scan.Scan, error)
}

// formats are tried in order. Text is last: it takes what is left, and says why if it cannot.
var formats = []format{
	{func([]byte) bool { return true }, openTable},
}

func openTable(r io.Reader, file string, opt Options) (*scan.Scan, error) {
	return table.Open(r, table.Options{File: file, Laser: opt.Laser, Columns: opt.Columns})
}

// Open opens the run at path, plain or compressed with gzip or zstd; "-" is standard input. Format and compression are told by
// content, whatever the name. A run that cannot be used is refused with a [*scan.InputError]. The caller closes the scan.
func Open(path string, opt Options) (*scan.Scan, error) {
	in, err := openInput(path, opt.Stdin)
	if err != nil {
		return nil, err
	}
	r := bufio.NewReaderSize(in, sniffLen)
	head, _ := r.Peek(sniffLen) // an error comes again when the format reads on
	for _, f := range formats {
		if !f.is(head) {
			continue
		}
		sc, err := f.open(r, in.name, opt)
		if err != nil {
			in.Close()
			return nil, err
		}
		sc.File, sc.Input = in.name, in
		if in.packed != "" {
			sc.Format += ", " + in.packed
		}
		return sc, nil
	}
	panic("mapio: no format took the run, not even text")
}
