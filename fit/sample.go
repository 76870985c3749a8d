package fit

import (
	"container/heap"
	"context"
	"iter"
	"math"
	"slices"
	"sync"
	"sync/atomic"

	"bandgrid/mapio/scan"
)

// SampleSize is how many pixels tell enough of a run: medians over them are good to a twentieth of the scatter, and the noise
// of the detector to a part in a thousand.
const SampleSize = 1000

// Sample reads a scan to its end and returns up to SampleSize pixels, spread over the map by chance. Which ones depends on
// their places alone, not on the order in which they were acquired or on the form of the file: they are those with the
// smallest hashes of their coordinates. Pixels that cannot be read or that the options leave out do not count; an error that ends the stream is returned with
// the pixels found until then.
func Sample(ctx context.Context, sc *scan.Scan, opt RunOptions) ([]scan.Pixel, error) {
	var kept smallest
	kept.limit.Store(math.MaxUint64)
	blocks := make(chan scan.Block)
	var wait sync.WaitGroup
	for range opt.workers() {
		wait.Go(func() {
			for block := range blocks {
				for pixel, err := range block.Pixels() {
					if _, _, left := opt.place(pixel); err == nil && !left {
						kept.offer(pixel)
					}
				}
			}
		})
	}
	var failed error
	for block, err := range sc.Blocks(ctx) {
		if failed = err; err != nil {
			break
		}
		blocks <- block
	}
	close(blocks)
	wait.Wait()
	pixels := make([]scan.Pixel, len(kept.list))
	for i, h := range kept.list {
		pixels[i] = h.pixel
	}
	return pixels, failed
}

// Head reads the first pixels of a scan that cannot be read twice, up to SampleSize of them or a little more, and returns them
// with a scan that yields all pixels, these first.
func Head(ctx context.Context, sc *scan.Scan, opt RunOptions) ([]scan.Pixel, *scan.Scan) {
	next, stop := iter.Pull2(sc.Blocks(ctx))
	rest := &replay{next: next, stop: stop}
	var sample []scan.Pixel
	for len(sample) < SampleSize {
		block, err, ok := next()
		if !ok || err != nil {
			rest.done, rest.failed = true, err
			break
		}
		read := &readBlock{seq: block.Seq()}
		for pixel, err := range block.Pixels() {
			read.pixels, read.errors = append(read.pixels, clonePixel(pixel)), append(read.errors, err)
			if _, _, left := opt.place(pixel); err == nil && !left {
				sample = append(sample, read.pixels[len(read.pixels)-1])
			}
		}
		rest.first = append(rest.first, read)
	}
	all := *sc
	all.Source = rest
	return sample, &all
}

func clonePixel(p *scan.Pixel) scan.Pixel {
	c := *p
	c.Counts = slices.Clone(p.Counts)
	return c
}

// smallest keeps the pixels with the smallest hashes; the largest of them is on top of the heap.
type smallest struct {
	limit atomic.Uint64 // a larger hash need not be offered
	lock  sync.Mutex
	list  []hashed
}

type hashed struct {
	hash  uint64
	pixel scan.Pixel
}

func (s *smallest) offer(p *scan.Pixel) {
	h := hashOf(p.X, p.Y)
	if h >= s.limit.Load() {
		return
	}
	s.lock.Lock()
	defer s.lock.Unlock()
	if len(s.list) < SampleSize {
		heap.Push(s, hashed{h, clonePixel(p)})
	} else if h < s.list[0].hash {
		old := s.list[0].pixel.Counts
		c := *p
		c.Counts = append(old[:0], p.Counts...)
		s.list[0] = hashed{h, c}
		heap.Fix(s, 0)
	}
	if len(s.list) == SampleSize {
		s.limit.Store(s.list[0].hash)
	}
}

func (s *smallest) Len() int           { return len(s.list) }
func (s *smallest) Less(i, j int) bool { return s.list[i].hash > s.list[j].hash }
func (s *smallest) Swap(i, j int)      { s.list[i], s.list[j] = s.list[j], s.list[i] }
func (s *smallest) Push(v any)         { s.list = append(s.list, v.(hashed)) }
func (s *smallest) Pop() any {
	last := s.list[len(s.list)-1]
	s.list = s.list[:len(s.list)-1]
	return last
}

// hashOf mixes the bits of a place (the finaliser of SplitMix64, Proc. OOPSLA 2014, 453, from memory).
func hashOf(x, y float64) uint64 {
	mix := func(z uint64) uint64 {
		z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
		z = (z ^ z>>27) * 0x94d049bb133111eb
		return z ^ z>>31
	}
	return mix(mix(math.Float64bits(x)+0x9e3779b97f4a7c15) + math.Float64bits(y))
}

// A replay yields blocks that were read already, then the rest of the stream.
type replay struct {
	first  []*readBlock
	next   func() (scan.Block, error, bool)
	stop   func()
	done   bool
	failed error
}

func (r *replay) Blocks(context.Context) iter.Seq2[scan.Block, error] {
	return func(yield func(scan.Block, error) bool) {
		defer r.stop()
		for i, b := range r.first {
			r.first[i] = nil // the worker's from now on
			if !yield(b, nil) {
				return
			}
		}
		if r.done {
			if r.failed != nil {
				yield(nil, r.failed)
			}
			return
		}
		for {
			block, err, ok := r.next()
			if !ok || !yield(block, err) || err != nil {
				return
			}
		}
	}
}

// A readBlock is a block whose pixels are decoded.
type readBlock struct {
	seq    int
	pixels []scan.Pixel
	errors []error
}

func (b *readBlock) Seq() int { return b.seq }

func (b *readBlock) Pixels() iter.Seq2[*scan.Pixel, error] {
	return func(yield func(*scan.Pixel, error) bool) {
		for i := range b.pixels {
			if !yield(&b.pixels[i], b.errors[i]) {
				return
			}
		}
	}
}
