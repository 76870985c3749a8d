package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
	"github.com/spf13/pflag"

	"bandgrid/fit/synth"
	"bandgrid/mapio/table"
)

var simulateVerb = verb{
	name:  "simulate",
	usage: "SCENE -o RUN",
	short: "write a run with known truth from a scene file",
	long: `It makes the run that a microscope would leave of the flakes, films, spectrometer and stage that a scene file (JSON)
describes, for trying out settings and for checking what a survey finds. A name that ends in .gz or .zst is compressed.
The same scene and seed give the same run, with any number of workers.

Example:
  bandgrid simulate examples/flake/scene.json -o night.txt.zst --truth truth`,
	setup: func(fs *pflag.FlagSet) func(context.Context, []string, streams) error {
		o := new(simulateOptions)
		o.add(fs)
		return func(ctx context.Context, args []string, std streams) error {
			o.seeded = fs.Changed("seed")
			if err := o.check(args); err != nil {
				return usageError{fmt.Errorf("simulate: %w", err)}
			}
			return o.run(ctx, args[0], std)
		}
	},
}

type simulateOptions struct {
	out, truth        string
	long, comma, crlf bool
	separator         string
	seed              uint64
	seeded            bool
	workers           int
	force             bool
	layout            table.Style
}

func (o *simulateOptions) add(fs *pflag.FlagSet) {
	fs.StringVarP(&o.out, "output", "o", "", "`file` to write; - is standard output")
	fs.StringVar(&o.truth, "truth", "", "`folder` for what each pixel was made from: maps as .npy, truth.json, spikes.csv")
	fs.BoolVar(&o.long, "long", false, "a row per channel instead of a row per pixel")
	fs.StringVar(&o.separator, "separator", "tab", "tab, comma, semicolon or blank")
	fs.BoolVar(&o.comma, "decimal-comma", false, "write 0,5 for one half")
	fs.BoolVar(&o.crlf, "crlf", false, "end lines with CR LF")
	fs.Uint64Var(&o.seed, "seed", 0, "seed instead of the scene's")
	fs.IntVar(&o.workers, "workers", runtime.GOMAXPROCS(0), "pixels made at the same time")
	fs.BoolVar(&o.force, "force", false, "overwrite RUN and the truth")
}

func (o *simulateOptions) check(args []string) error {
	separators := map[string]byte{"tab": '\t', "comma": ',', "semicolon": ';', "blank": ' '}
	sep, known := separators[o.separator]
	o.layout = table.Style{Long: o.long, DecimalComma: o.comma, CRLF: o.crlf, Separator: sep}
	switch {
	case len(args) != 1:
		return errors.New("give one scene file, for instance examples/flake/scene.json")
	case o.out == "":
		return errors.New("say where the run goes with -o RUN; - is standard output")
	case !known:
		return fmt.Errorf("--separator is %q; tab, comma, semicolon and blank are known", o.separator)
	case o.comma && sep == ',':
		return errors.New("--decimal-comma and --separator comma do not go together")
	case o.workers < 1:
		return errors.New("--workers must be at least 1")
	}
	return nil
}

func (o *simulateOptions) run(ctx context.Context, path string, std streams) error {
	scene, source, err := loadScene(path, std.in)
	if err != nil {
		return err
	}
	if o.seeded && o.seed != scene.Seed {
		scene.Seed = o.seed
		if err := scene.Prepare(); err != nil {
			return fmt.Errorf("%s: %w", path, err)
		}
	}
	var truth *truthMaps
	if o.truth != "" {
		if _, err := os.Stat(o.truth); err == nil && !o.force {
			return fmt.Errorf("%s exists; name another folder or give --force", o.truth)
		}
		truth = newTruthMaps(scene)
	}
	if o.out == "-" {
		if err := o.write(ctx, scene, std.out, truth); err != nil {
			return err
		}
	} else if err := o.writeFile(ctx, scene, truth); err != nil {
		return err
	}
	if truth != nil {
		if err := truth.save(o.truth, scene, source); err != nil {
			return err
		}
	}
	fmt.Fprintf(std.err, "%s: %d x %d cells, %d spectra of %d channels, seed %d\n", o.out, scene.Stage.Cols, scene.Stage.Rows,
		scene.Len(), len(scene.Axis()), scene.Seed)
	return nil
}

// loadScene reads a scene and returns its JSON as well.
func loadScene(path string, stdin io.Reader) (*synth.Scene, []byte, error) {
	var data []byte
	var err error
	if path == "-" {
		data, err = io.ReadAll(io.LimitReader(stdin, 64<<20))
	} else {
		data, err = os.ReadFile(path)
	}
	if err != nil {
		return nil, nil, err
	}
	scene, err := synth.Parse(data)
	if err != nil {
		return nil, nil, fmt.Errorf("%s: %w", path, err)
	}
	return scene, data, nil
}

// writeFile writes the run under a temporary name beside its place and renames it when it is whole.
func (o *simulateOptions) writeFile(ctx context.Context, scene *synth.Scene, truth *truthMaps) error {
	if _, err := os.Stat(o.out); err == nil && !o.force {
		return fmt.Errorf("%s exists; name another file or give --force", o.out)
	}
	part, err := os.CreateTemp(filepath.Dir(o.out), filepath.Base(o.out)+".*.partial")
	if err != nil {
		return err
	}
	defer os.Remove(part.Name()) // finds nothing after success
	if err := errors.Join(o.pack(ctx, scene, part, truth), part.Sync(), part.Close()); err != nil {
		return err
	}
	if err := os.Chmod(part.Name(), 0o644); err != nil {
		return err
	}
	return os.Rename(part.Name(), o.out)
}

// pack writes the run, compressed as its name says.
func (o *simulateOptions) pack(ctx context.Context, scene *synth.Scene, w io.Writer, truth *truthMaps) error {
	switch {
	case strings.HasSuffix(o.out, ".gz"):
		z := gzip.NewWriter(w)
		return errors.Join(o.write(ctx, scene, z, truth), z.Close())
	case strings.HasSuffix(o.out, ".zst"):
		z, err := zstd.NewWriter(w)
		if err != nil {
			return err
		}
		return errors.Join(o.write(ctx, scene, z, truth), z.Close())
	}
	return o.write(ctx, scene, w, truth)
}

// simulateChunk is how many pixels a worker makes at a time.
const simulateChunk = 32

// A runChunk is a stretch of the run. The same few chunks go round between workers and the writer.
type runChunk struct {
	first int
	text  []byte
	truth []pixelTruth
	ready chan struct{}
}

// write writes the run in order of acquisition while workers make the pixels that follow.
func (o *simulateOptions) write(ctx context.Context, scene *synth.Scene, w io.Writer, truth *truthMaps) error {
	encoder := newSceneEncoder(scene, o.layout)
	if _, err := w.Write(encoder.AppendHeader(nil)); err != nil {
		return err
	}
	ring := make([]*runChunk, 2*o.workers+1)
	jobs := make(chan *runChunk, len(ring))
	var workers sync.WaitGroup
	for range o.workers {
		workers.Go(func() {
			g := scene.NewGenerator()
			counts := make([]float32, len(scene.Axis()))
			for c := range jobs {
				c.text, c.truth = c.text[:0], c.truth[:0]
				for i := c.first; i < min(c.first+simulateChunk, scene.Len()); i++ {
					x, y, t := g.Pixel(i, counts)
					c.text = encoder.AppendPixel(c.text, x, y, counts)
					if truth != nil {
						t.Spikes = slices.Clone(t.Spikes)
						c.truth = append(c.truth, pixelTruth{x, y, t})
					}
				}
				c.ready <- struct{}{}
			}
		})
	}
	defer workers.Wait()
	defer close(jobs)
	for i := range ring {
		ring[i] = &runChunk{first: i * simulateChunk, ready: make(chan struct{}, 1)}
		jobs <- ring[i]
	}
	for n := 0; n*simulateChunk < scene.Len(); n++ {
		if err := ctx.Err(); err != nil {
			return err
		}
		c := ring[n%len(ring)]
		<-c.ready
		if _, err := w.Write(c.text); err != nil {
			return err
		}
		for k := range c.truth {
			truth.put(c.first+k, &c.truth[k])
		}
		c.first += len(ring) * simulateChunk
		jobs <- c
	}
	if scene.Torn() {
		counts := make([]float32, len(scene.Axis()))
		x, y, _ := scene.NewGenerator().Pixel(scene.Len(), counts)
		text := encoder.AppendPixel(nil, x, y, counts)
		_, err := w.Write(text[:len(text)/2])
		return err
	}
	return nil
}

// newSceneEncoder returns the encoder of a scene's run in that style.
func newSceneEncoder(scene *synth.Scene, style table.Style) *table.Encoder {
	for _, name := range slices.Sorted(maps.Keys(scene.Notes)) {
		style.Comments = append(style.Comments, name+": "+scene.Notes[name])
	}
	if _, said := scene.Notes["laser"]; !said {
		style.Comments = append(style.Comments, fmt.Sprintf("laser: %g nm", scene.Laser))
	}
	if scene.Instrument.Fractional || scene.Instrument.Noiseless {
		style.CountsDecimals = 3
	}
	if scene.Instrument.Wavelength {
		style.Wavelength, style.AxisDecimals = true, 4
		return table.NewEncoder(scene.Wavelengths(), style)
	}
	return table.NewEncoder(scene.Axis(), style)
}
