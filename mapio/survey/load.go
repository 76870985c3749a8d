package survey

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"slices"

	"bandgrid/mapio/npy"
)

// maxInfo bounds survey.json, bytes.
const maxInfo = 16 << 20

var quantityName = regexp.MustCompile(`^[a-z0-9][a-z0-9_]*$`)

// Load reads a survey's numbers back. Quantities come in the order of regions.csv. The error names the file and what is wrong
// with it. Regions know no cells.
func Load(dir string) (*Survey, error) {
	name := filepath.Join(dir, infoFile)
	info, err := os.Stat(name)
	if errors.Is(err, os.ErrNotExist) {
		return nil, fmt.Errorf("%s is not a survey: it has no %s; make one with bandgrid survey", dir, infoFile)
	}
	if err != nil {
		return nil, err
	}
	if info.Size() > maxInfo {
		return nil, fmt.Errorf("%s: %d bytes, at most %d are read", name, info.Size(), maxInfo)
	}
	text, err := os.ReadFile(name)
	if err != nil {
		return nil, err
	}
	s := &Survey{}
	if err := json.Unmarshal(text, &s.Info); err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	g := s.Grid
	if g.Rows < 1 || g.Cols < 1 || g.Rows > 1<<30/g.Cols {
		return nil, fmt.Errorf("%s: a grid of %d by %d cells makes no sense", name, g.Cols, g.Rows)
	}
	if s.X, err = s.array(dir, "x"); err != nil {
		return nil, err
	}
	if s.Y, err = s.array(dir, "y"); err != nil {
		return nil, err
	}
	for q := range s.Quantities {
		if !quantityName.MatchString(q) {
			return nil, fmt.Errorf("%s: %q is not the name of a quantity", name, q)
		}
	}
	for q, about := range s.Quantities {
		about.Name = q
		if about.Values, err = s.array(dir, q); err != nil {
			return nil, err
		}
		if about.SE, err = s.array(dir, q+"_se"); errors.Is(err, os.ErrNotExist) {
			about.SE, err = nil, nil
		}
		if err != nil {
			return nil, err
		}
		s.Maps = append(s.Maps, about)
	}
	slices.SortFunc(s.Maps, func(a, b Quantity) int {
		if a.Name < b.Name {
			return -1
		}
		return 1
	})
	regions := filepath.Join(dir, regionsFile)
	f, err := os.Open(regions)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	if s.Regions, err = readRegions(f); err != nil {
		return nil, fmt.Errorf("%s: %w", regions, err)
	}
	s.order()
	return s, nil
}

// order puts the quantities in the order in which regions.csv has them; those that it has not, which have no mean, come last.
func (s *Survey) order() {
	if len(s.Regions) == 0 {
		return
	}
	place := map[string]int{}
	for i, st := range s.Regions[0].Stats {
		place[st.Quantity] = i - len(s.Regions[0].Stats)
	}
	slices.SortStableFunc(s.Maps, func(a, b Quantity) int { return place[a.Name] - place[b.Name] })
}

// array reads one array, which must have the grid's shape.
func (s *Survey) array(dir, quantity string) ([]float32, error) {
	name := filepath.Join(dir, mapsFolder, quantity+".npy")
	f, err := os.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	shape, data, err := npy.Read(f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	if !slices.Equal(shape, []int{s.Grid.Rows, s.Grid.Cols}) {
		return nil, fmt.Errorf("%s: its shape is %v, the grid has %d rows and %d columns", name, shape, s.Grid.Rows, s.Grid.Cols)
	}
	return data, nil
}
