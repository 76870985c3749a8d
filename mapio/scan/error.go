package scan

import (
	"fmt"
	"strings"
)

// An InputError says what is wrong with a run, where, and what to do about it. It prints as
//
//	night.txt: line 20481 (pixel 19): 1023 values, the axis has 1024; the pixel is left out
type InputError struct {
	File         string
	Line         int    // from 1; 0 where lines mean nothing
	Offset       int64  // byte offset, for formats without lines; 0 where it means nothing
	Pixel        int    // in order of acquisition (within its block until the run is put together), from 0; -1 where unknown
	What, Remedy string // the finding with its numbers; what to do, or what was done
	Err          error  // the cause, for errors.Is; may be nil
}

func (e *InputError) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	switch {
	case e.Line > 0 && e.Pixel >= 0:
		fmt.Fprintf(&b, ": line %d (pixel %d)", e.Line, e.Pixel)
	case e.Line > 0:
		fmt.Fprintf(&b, ": line %d", e.Line)
	case e.Pixel >= 0:
		fmt.Fprintf(&b, ": pixel %d", e.Pixel)
	case e.Offset > 0:
		fmt.Fprintf(&b, ": byte %d", e.Offset)
	}
	b.WriteString(": ")
	b.WriteString(e.What)
	if e.Err != nil {
		fmt.Fprintf(&b, ": %v", e.Err)
	}
	if e.Remedy != "" {
		b.WriteString("; ")
		b.WriteString(e.Remedy)
	}
	return b.String()
}

func (e *InputError) Unwrap() error { return e.Err }
