package mapio

import (
	"context"
	"errors"
	"math"
	"slices"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/table"
)

// A Spectrum is a single one: a reference, a detector's dark counts.
type Spectrum struct {
	Axis   scan.Axis
	Counts []float32 // NaN where there are none
	Laser  float64   // nm; 0 where neither the file nor the caller says
	Pixels int       // spectra that it is the mean of
}

// On returns the spectrum on another axis by linear interpolation between its channels, NaN beyond them.
func (s *Spectrum) On(axis scan.Axis) []float64 {
	x, y := slices.Clone(s.Axis), make([]float64, len(s.Counts))
	for i, c := range s.Counts {
		y[i] = float64(c)
	}
	if s.Axis.Descending() {
		slices.Reverse(x)
		slices.Reverse(y)
	}
	out := make([]float64, len(axis))
	for i, v := range axis {
		k, exact := slices.BinarySearch(x, v)
		switch {
		case exact:
			out[i] = y[k]
		case k == 0 || k == len(x):
			out[i] = math.NaN()
		default:
			out[i] = y[k-1] + (y[k]-y[k-1])*(v-x[k-1])/(x[k]-x[k-1])
		}
	}
	return out
}

// OpenSpectrum reads a single spectrum from two columns of delimited text, or the mean of all spectra of a run. The file may be
// compressed; "-" is standard input, which must be of two columns.
func OpenSpectrum(ctx context.Context, path string, opt Options) (*Spectrum, error) {
	in, err := openInput(path, opt.Stdin)
	if err != nil {
		return nil, err
	}
	axis, counts, laser, err := table.Spectrum(in, table.Options{File: in.name, Laser: opt.Laser})
	in.Close()
	if err == nil {
		return &Spectrum{axis, counts, laser, 1}, nil
	}
	if !errors.Is(err, table.ErrNoSpectrum) || path == "-" {
		return nil, err
	}
	sc, openErr := Open(path, opt)
	if openErr != nil {
		return nil, err // what is wrong with it as a single spectrum
	}
	defer sc.Close()
	return mean(ctx, sc)
}

// mean averages the spectra of a run, channel by channel.
func mean(ctx context.Context, sc *scan.Scan) (*Spectrum, error) {
	sum, n := make([]float64, len(sc.Axis)), make([]float64, len(sc.Axis))
	s := &Spectrum{Axis: sc.Axis, Laser: sc.Laser, Counts: make([]float32, len(sc.Axis))}
	for block, err := range sc.Blocks(ctx) {
		if err != nil {
			return nil, err
		}
		for p, err := range block.Pixels() {
			if err != nil {
				continue // one of many
			}
			s.Pixels++
			for i, c := range p.Counts {
				if v := float64(c); math.Abs(v) < math.MaxFloat32 {
					sum[i] += v
					n[i]++
				}
			}
		}
	}
	if s.Pixels == 0 {
		return nil, &scan.InputError{File: sc.File, Pixel: -1, What: "no spectrum could be read from it", Remedy: "give a spectrum in two columns or a run"}
	}
	for i := range sum {
		s.Counts[i] = float32(sum[i] / n[i]) // NaN without any
	}
	return s, nil
}
