package survey

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"

	"bandgrid/mapio/npy"
)

// Names within a survey's folder.
const (
	infoFile    = "survey.json"
	mapsFolder  = "maps"
	regionsFile = "regions.csv"
)

// Save writes the numbers of a survey into dir, which exists: survey.json, maps/ and regions.csv. Each file is there whole or
// not at all, and survey.json comes last.
func Save(dir string, s *Survey) error {
	if err := os.MkdirAll(filepath.Join(dir, mapsFolder), 0o777); err != nil {
		return err
	}
	s.Quantities = make(map[string]Quantity, len(s.Maps))
	shape := []int{s.Grid.Rows, s.Grid.Cols}
	array := func(name string, values []float32) error {
		return WriteFile(filepath.Join(dir, mapsFolder, name+".npy"), func(w io.Writer) error { return npy.Write(w, shape, values) })
	}
	for _, q := range s.Maps {
		s.Quantities[q.Name] = Quantity{Unit: q.Unit, Description: q.Description, Of: q.Of}
		if err := array(q.Name, q.Values); err != nil {
			return err
		}
		if q.SE != nil {
			if err := array(q.Name+"_se", q.SE); err != nil {
				return err
			}
		}
	}
	if err := errors.Join(array("x", s.X), array("y", s.Y)); err != nil {
		return err
	}
	if err := WriteFile(filepath.Join(dir, regionsFile), func(w io.Writer) error { return writeRegions(w, s) }); err != nil {
		return err
	}
	text, err := json.MarshalIndent(s.Info, "", "  ")
	if err != nil {
		return fmt.Errorf("%s: %w", infoFile, err)
	}
	return WriteFile(filepath.Join(dir, infoFile), func(w io.Writer) error {
		_, err := w.Write(append(text, '\n'))
		return err
	})
}

// WriteFile writes a file whole or not at all: a part beside it is written, synced and renamed.
func WriteFile(name string, write func(io.Writer) error) error {
	part, err := os.CreateTemp(filepath.Dir(name), "."+filepath.Base(name)+".*")
	if err != nil {
		return err
	}
	defer os.Remove(part.Name()) // finds nothing after success
	b := bufio.NewWriterSize(part, 1<<16)
	if err := errors.Join(write(b), b.Flush(), part.Chmod(0o644), part.Sync(), part.Close()); err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	return os.Rename(part.Name(), name)
}

// A Folder is a survey's folder while it is being made: everything goes into NAME.partial, which takes its final name at the
// end.
type Folder struct{ final, partial string }

// Create makes the folder in which a survey is put together. It refuses where a survey of that name is there already, unless
// force is set; what is not a survey is never replaced.
func Create(final string, force bool) (*Folder, error) {
	final = filepath.Clean(final)
	if _, err := os.Lstat(final); err == nil {
		if _, err := os.Stat(filepath.Join(final, infoFile)); err != nil {
			return nil, fmt.Errorf("%s is there already and is not a survey; choose another folder with -o", final)
		}
		if !force {
			return nil, fmt.Errorf("%s is there already; replace it with --force, or choose another folder with -o", final)
		}
	}
	f := &Folder{final, final + ".partial"}
	// What an interrupted survey left is of no use any more.
	if err := os.RemoveAll(f.partial); err != nil {
		return nil, err
	}
	if err := os.Mkdir(f.partial, 0o777); err != nil {
		return nil, fmt.Errorf("the survey's folder cannot be made: %w; choose another place with -o", err)
	}
	return f, nil
}

// Path is where the survey is put together.
func (f *Folder) Path() string { return f.partial }

// Commit gives the folder its final name, in place of an older survey.
func (f *Folder) Commit() error {
	old := f.final + ".old"
	err := os.Rename(f.final, old)
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		return err
	}
	replaced := err == nil
	if err := os.Rename(f.partial, f.final); err != nil {
		if replaced {
			err = errors.Join(err, os.Rename(old, f.final))
		}
		return err
	}
	if replaced {
		if err := os.RemoveAll(old); err != nil {
			return err
		}
	}
	return syncFolder(filepath.Dir(f.final))
}

// Abandon removes what was put together.
func (f *Folder) Abandon() error { return os.RemoveAll(f.partial) }

// syncFolder makes the renaming last. Some systems cannot sync folders; the rename holds there too, short of a power cut.
func syncFolder(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	if err := d.Sync(); err != nil && !errors.Is(err, errors.ErrUnsupported) && !errors.Is(err, os.ErrInvalid) && !os.IsPermission(err) {
		return fmt.Errorf("%s: %w", dir, err)
	}
	return nil
}

// finite tells whether v can stand in a table.
func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
