package fit

import (
	"errors"
	"fmt"
	"math"

	"bandgrid/fit/clean"
	"bandgrid/mapio/scan"
)

// A Preparation says what is done to the counts of every pixel before they are fitted. The zero value does nothing.
type Preparation struct {
	// Dark is what the detector gives without light: one value for all channels, or one per channel; counts.
	Dark []float64
	// Response is the spectrometer's relative sensitivity, one value per channel, above 0: counts are divided by it. The noise is
	// still that of the counts as measured. Where it is NaN it is not known, and the channel is left out.
	Response []float64
	// Substrate is the spectrum of the bare substrate, one value per channel of the axis, prepared: what it shows beside the
	// background becomes a term of the background, in place of what the map's own bare pixels show. nil: theirs.
	Substrate []float64
}

// Check returns an error where the preparation does not go with an axis of that many channels.
func (p Preparation) Check(channels int) error {
	if n := len(p.Dark); n > 1 && n != channels {
		return fmt.Errorf("the dark spectrum has %d channels, the run %d", n, channels)
	}
	for i, v := range p.Dark {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("dark spectrum: channel %d is %g", i, v)
		}
	}
	if n := len(p.Substrate); n > 0 && n != channels {
		return fmt.Errorf("the substrate's spectrum has %d channels, the run %d", n, channels)
	}
	if n := len(p.Response); n > 0 && n != channels {
		return fmt.Errorf("the response has %d channels, the run %d", n, channels)
	}
	for i, v := range p.Response {
		if v <= 0 || math.IsInf(v, 0) {
			return fmt.Errorf("response: channel %d is %g; numbers above 0, or NaN, are needed", i, v)
		}
	}
	return nil
}

// errChannels is a caller's bug.
var errChannels = errors.New("fit: counts are not as long as the axis")

// A preparer prepares one spectrum at a time, in memory of its own.
type preparer struct {
	full    float64   // counts from which a channel is saturated
	dark    []float64 // per channel
	scale   []float64 // one over the response; 1 without
	counts  []float64 // prepared; 0 where there are none
	holes   []bool    // channels without a usable count
	removed []float64 // light that was taken off but makes noise, in counts as measured; nil without
	base    *clean.Background
	line    []float64 // the background of the whole spectrum, prepared
	bridged []bool    // channels that say nothing of it: holes and cosmic rays
	scratch []float64
}

func newPreparer(p Preparation, d Detector, axis scan.Axis, baseline clean.Baseline) *preparer {
	channels := len(axis)
	q := &preparer{full: math.Inf(1), dark: make([]float64, channels), scale: make([]float64, channels),
		counts: make([]float64, channels), holes: make([]bool, channels)}
	if d.Saturation > 0 {
		q.full = d.Saturation
	}
	for i := range channels {
		q.scale[i] = 1
		switch {
		case len(p.Dark) == 1:
			q.dark[i] = p.Dark[0]
		case len(p.Dark) > 1:
			q.dark[i] = p.Dark[i]
		}
		if len(p.Response) > 0 {
			q.scale[i] = 1 / p.Response[i]
		}
	}
	if !baseline.None() {
		low, high := axis.Range()
		q.base = clean.NewBackground(baseline, channels, (high-low)/float64(channels-1))
		q.line, q.removed = make([]float64, channels), make([]float64, channels)
		q.bridged, q.scratch = make([]bool, channels), make([]float64, 2*channels)
	}
	return q
}

// take prepares a spectrum. It panics where counts are not as long as the axis.
func (q *preparer) take(counts []float32) {
	if len(counts) != len(q.counts) {
		panic(errChannels)
	}
	for i, c := range counts {
		v := float64(c)
		q.holes[i] = !(math.Abs(v) < math.MaxFloat32) || v >= q.full || q.scale[i] != q.scale[i]
		if q.holes[i] {
			q.counts[i] = 0
			continue
		}
		q.counts[i] = (v - q.dark[i]) * q.scale[i]
	}
	if q.base == nil {
		return
	}
	copy(q.bridged, q.holes)
	clean.Differences(q.counts, q.bridged, 8, q.scratch)
	q.base.Estimate(q.line, q.counts, q.bridged)
	for i, z := range q.line {
		q.removed[i] = 0
		if !q.holes[i] {
			q.counts[i] -= z
			q.removed[i] = z / q.scale[i]
		}
	}
}
