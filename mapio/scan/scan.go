// Package scan describes an opened run: the shift axis, the place of each pixel on the stage, the grid, and a stream of
// blocks that workers decode.
//
// The formats (mapio/table and its siblings) fill in a [Scan]; mapio.Open chooses among them by content. Nothing here knows of
// bands.
package scan

import (
	"context"
	"iter"
)

// A Pixel is one spectrum and its place on the stage. It is overwritten when the next one is asked for; clone what you keep.
type Pixel struct {
	Index  int       // place in its block, from 0
	X, Y   float64   // stage position, um
	Counts []float32 // detector counts, one per channel of the scan's axis and in its order; NaN where the run has none
	Line   int       // line of the run on which the pixel begins, from 1; 0 where lines mean nothing
	Open   bool      // the run ends inside this pixel's last line: its last number may have lost digits
}

// A Block is a stretch of a run, read but not yet decoded. Decoding is the costly part, so it is left to the workers.
type Block interface {
	// Seq is the block's place in the run, from 0. Pixels of block n were all acquired before those of block n+1.
	Seq() int
	// Pixels decodes the block, once: its memory is used again when the loop ends. A pixel that cannot be read comes with an
	// *InputError and with a Pixel that has Index, Line and, where they could be read, X and Y (NaN otherwise); those after it
	// follow.
	Pixels() iter.Seq2[*Pixel, error]
}

// A Source yields the blocks of a run in order. It may be used once. An error ends the stream; what came before stays valid.
// When ctx is done the stream ends with ctx.Err().
type Source interface {
	Blocks(ctx context.Context) iter.Seq2[Block, error]
}

// A Scan is a run opened for reading.
type Scan struct {
	File   string            // name for messages; "standard input" for -
	Format string            // what the run was recognised as, in words: "wide text", "long text"
	Axis   Axis              // Raman shift of each channel
	Laser  float64           // laser line, nm (as customary: in air); 0 where neither the run nor the caller says
	Notes  map[string]string // what the run's header says of itself, name to value, as found; may be nil
	Source
	Input // bytes read so far, digest, closing
}

// An Input is the file behind a scan.
type Input interface {
	// Progress returns how many bytes of the file have been read, and its size, or -1 where the size is not known (a pipe).
	Progress() (read, size int64)
	// Digest returns the SHA-256 of the file's bytes in hexadecimal, once the stream has ended.
	Digest() string
	// Close gives the file back.
	Close() error
}
