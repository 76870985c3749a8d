package fit_test

import (
	"bytes"
	"context"
	"iter"
	"runtime"
	"slices"
	"sync"
	"testing"

	"bandgrid/fit"
	"bandgrid/fit/synth"
	"bandgrid/mapio"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/table"
)

// BenchmarkStages measures what a survey costs: reading and decoding text alone, fitting decoded pixels alone, and both
// together through the pool, on all processors.
func BenchmarkStages(b *testing.B) {
	scene := flakes(3)
	scene.Instrument.Channels = 1024
	scene.Stage.Cols, scene.Stage.Rows = 100, 80
	if err := scene.Prepare(); err != nil {
		b.Fatal(err)
	}
	decoded, text := recorded(b, scene)
	rate := func(b *testing.B) {
		b.ReportMetric(float64(b.N*scene.Len())/b.Elapsed().Seconds(), "pixels/s")
	}
	plan, err := fit.NewPlan(fit.Graphene(), scene.Axis(), scene.Laser, fit.Detector{})
	if err != nil {
		b.Fatal(err)
	}
	open := func(b *testing.B) *scan.Scan {
		sc, err := mapio.Open("-", mapio.Options{Stdin: bytes.NewReader(text)})
		if err != nil {
			b.Fatal(err)
		}
		return sc
	}
	b.Run("stage=read", func(b *testing.B) {
		b.SetBytes(int64(len(text)))
		for b.Loop() {
			if n := drain(b, open(b)); n != scene.Len() {
				b.Fatalf("%d pixels", n)
			}
		}
		rate(b)
	})
	b.Run("stage=fit", func(b *testing.B) {
		for b.Loop() {
			if _, err := fit.Run(b.Context(), &scan.Scan{Source: decoded}, plan, fit.RunOptions{}); err != nil {
				b.Fatal(err)
			}
		}
		rate(b)
	})
	b.Run("stage=whole", func(b *testing.B) {
		b.SetBytes(int64(len(text)))
		for b.Loop() {
			if _, err := fit.Run(b.Context(), open(b), plan, fit.RunOptions{}); err != nil {
				b.Fatal(err)
			}
		}
		rate(b)
	})
}

// recorded makes the scene's pixels once, in memory and as wide text.
func recorded(b *testing.B, scene *synth.Scene) (memory, []byte) {
	var text bytes.Buffer
	w := table.NewWriter(&text, scene.Axis(), table.Style{Comments: []string{"laser 532 nm"}})
	var m memory
	g := scene.NewGenerator()
	for i := range scene.Len() {
		counts := make([]float32, len(scene.Axis()))
		x, y, _ := g.Pixel(i, counts)
		if err := w.Write(x, y, counts); err != nil {
			b.Fatal(err)
		}
		m = append(m, scan.Pixel{X: x, Y: y, Counts: counts})
	}
	if err := w.Flush(); err != nil {
		b.Fatal(err)
	}
	return m, text.Bytes()
}

// drain decodes a scan on all processors and returns the number of pixels.
func drain(b *testing.B, sc *scan.Scan) int {
	blocks := make(chan scan.Block)
	counts := make([]int, runtime.GOMAXPROCS(0))
	var workers sync.WaitGroup
	for i := range counts {
		workers.Go(func() {
			for block := range blocks {
				for _, err := range block.Pixels() {
					if err != nil {
						b.Error(err)
					}
					counts[i]++
				}
			}
		})
	}
	for block, err := range sc.Blocks(b.Context()) {
		if err != nil {
			b.Fatal(err)
		}
		blocks <- block
	}
	close(blocks)
	workers.Wait()
	n := 0
	for _, c := range counts {
		n += c
	}
	return n
}

// memory is a scan of pixels that are decoded already.
type memory []scan.Pixel

func (m memory) Blocks(context.Context) iter.Seq2[scan.Block, error] {
	return func(yield func(scan.Block, error) bool) {
		seq := 0
		for part := range slices.Chunk(m, 128) {
			if !yield(memoryBlock{seq, part}, nil) {
				return
			}
			seq++
		}
	}
}

type memoryBlock struct {
	seq    int
	pixels []scan.Pixel
}

func (b memoryBlock) Seq() int { return b.seq }

func (b memoryBlock) Pixels() iter.Seq2[*scan.Pixel, error] {
	return func(yield func(*scan.Pixel, error) bool) {
		for i := range b.pixels {
			p := b.pixels[i]
			p.Index = i
			if !yield(&p, nil) {
				return
			}
		}
	}
}
