package main

import (
	"fmt"
	"io"
	"sync"
	"sync/atomic"
	"time"
)

// A progress reports how far a long piece of work has come, at intervals.
type progress struct {
	fitted atomic.Int64
	stop   chan struct{}
	done   sync.WaitGroup
}

// startProgress calls report at every interval, and once more from Close, with a line that says how many pixels are done, at
// what rate, and how long the rest will take. read returns how many bytes of the input are read and how many there are, -1 if
// unknown.
func startProgress(interval time.Duration, read func() (done, size int64), report func(line string)) *progress {
	p := &progress{stop: make(chan struct{})}
	start := time.Now()
	say := func() { report(progressLine(time.Since(start), p.fitted.Load(), read)) }
	p.done.Go(func() {
		tick := time.NewTicker(interval)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				say()
			case <-p.stop:
				say()
				return
			}
		}
	})
	return p
}

// Add counts pixels. It may be called from several goroutines.
func (p *progress) Add(pixels int) { p.fitted.Add(int64(pixels)) }

// Close reports a last time and waits for that.
func (p *progress) Close() {
	close(p.stop)
	p.done.Wait()
}

func progressLine(elapsed time.Duration, pixels int64, read func() (done, size int64)) string {
	line := fmt.Sprintf("%d pixels", pixels)
	if s := elapsed.Seconds(); s > 0 {
		line += fmt.Sprintf(", %.0f/s", float64(pixels)/s)
	}
	done, size := read()
	if size <= 0 || done <= 0 {
		return line
	}
	share := min(1, float64(done)/float64(size))
	left := time.Duration(float64(elapsed) * (1 - share) / share).Round(time.Second)
	return line + fmt.Sprintf(", %.0f %% of the file, %s left", 100*share, left)
}

// terminalLine returns a report function that overwrites one line of a terminal.
func terminalLine(w io.Writer) func(string) {
	return func(line string) { fmt.Fprintf(w, "\r\x1b[K%s", line) }
}
