package synth

import (
	"context"
	"iter"

	"bandgrid/mapio/scan"
)

// blockPixels is how many pixels a block of [Scene.Scan] holds.
const blockPixels = 64

// Scan returns the scene as a scan that has been opened, for fitting without a file. Pixels are made when a block is decoded. It
// may be used once, as scans may.
func (s *Scene) Scan() *scan.Scan {
	return &scan.Scan{File: "scene", Format: "simulated", Axis: s.Axis(), Laser: s.Laser, Notes: s.Notes,
		Source: source{s}, Input: input{}}
}

type source struct{ *Scene }

func (s source) Blocks(ctx context.Context) iter.Seq2[scan.Block, error] {
	return func(yield func(scan.Block, error) bool) {
		for seq := 0; seq*blockPixels < s.Len(); seq++ {
			if err := ctx.Err(); err != nil {
				yield(nil, err)
				return
			}
			if !yield(block{s.Scene, seq}, nil) {
				return
			}
		}
	}
}

type block struct {
	*Scene
	seq int
}

func (b block) Seq() int { return b.seq }

func (b block) Pixels() iter.Seq2[*scan.Pixel, error] {
	return func(yield func(*scan.Pixel, error) bool) {
		g := b.NewGenerator()
		pixel := scan.Pixel{Counts: make([]float32, len(b.shifts))}
		first := b.seq * blockPixels
		for i := first; i < min(first+blockPixels, b.Len()); i++ {
			pixel.Index = i - first
			pixel.X, pixel.Y, _ = g.Pixel(i, pixel.Counts)
			if !yield(&pixel, nil) {
				return
			}
		}
	}
}

// input stands for the file that is not there.
type input struct{}

func (input) Progress() (read, size int64) { return 0, -1 }
func (input) Digest() string               { return "" }
func (input) Close() error                 { return nil }
