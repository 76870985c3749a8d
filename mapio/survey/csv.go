package survey

import (
	"encoding/csv"
	"fmt"
	"io"
	"strconv"
	"strings"
)

// number writes a value with six significant digits; an empty field where there is none.
func number(v float64) string {
	if !finite(v) {
		return ""
	}
	return strconv.FormatFloat(v, 'g', 6, 64)
}

// regionColumn is a column of regions.csv that describes the region itself.
type regionColumn struct {
	name string
	of   func(*Region) *float64
}

var regionColumns = []regionColumn{
	{"layer_number", func(r *Region) *float64 { return &r.Layer }},
	{"area_um2", func(r *Region) *float64 { return &r.Area }},
	{"area_se_um2", func(r *Region) *float64 { return &r.AreaSE }},
	{"centroid_x_um", func(r *Region) *float64 { return &r.CX }},
	{"centroid_y_um", func(r *Region) *float64 { return &r.CY }},
	{"min_x_um", func(r *Region) *float64 { return &r.MinX }},
	{"min_y_um", func(r *Region) *float64 { return &r.MinY }},
	{"max_x_um", func(r *Region) *float64 { return &r.MaxX }},
	{"max_y_um", func(r *Region) *float64 { return &r.MaxY }},
	{"perimeter_um", func(r *Region) *float64 { return &r.Perimeter }},
	{"inscribed_radius_um", func(r *Region) *float64 { return &r.Inscribed }},
}

// statColumn is a column of regions.csv that each quantity has.
type statColumn struct {
	suffix string
	of     func(*Stat) *float64
}

var statColumns = []statColumn{
	{"median", func(s *Stat) *float64 { return &s.Median }},
	{"spread", func(s *Stat) *float64 { return &s.Spread }},
	{"mean", func(s *Stat) *float64 { return &s.Mean }},
	{"mean_se", func(s *Stat) *float64 { return &s.MeanSE }},
	{"p5", func(s *Stat) *float64 { return &s.P5 }},
	{"p95", func(s *Stat) *float64 { return &s.P95 }},
}

// writeRegions writes regions.csv: a row per region, and for each quantity n, median, robust spread, mean, its standard error,
// 5th and 95th percentile.
func writeRegions(w io.Writer, s *Survey) error {
	c := csv.NewWriter(w)
	header := []string{"region", "pixels"}
	for _, col := range regionColumns {
		header = append(header, col.name)
	}
	if len(s.Regions) > 0 {
		for _, st := range s.Regions[0].Stats {
			header = append(header, st.Quantity+"_n")
			for _, col := range statColumns {
				header = append(header, st.Quantity+"_"+col.suffix)
			}
		}
	}
	if err := c.Write(header); err != nil {
		return err
	}
	for i := range s.Regions {
		r := &s.Regions[i]
		row := []string{r.ID, strconv.Itoa(r.Pixels)}
		for _, col := range regionColumns {
			row = append(row, number(*col.of(r)))
		}
		for k := range r.Stats {
			row = append(row, strconv.Itoa(r.Stats[k].N))
			for _, col := range statColumns {
				row = append(row, number(*col.of(&r.Stats[k])))
			}
		}
		if err := c.Write(row); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}

// readRegions reads what writeRegions wrote; it knows no cells.
func readRegions(r io.Reader) ([]Region, error) {
	c := csv.NewReader(r)
	c.ReuseRecord = true
	header, err := c.Read()
	if err != nil {
		return nil, err
	}
	header = append([]string(nil), header...)
	var regions []Region
	for {
		row, err := c.Read()
		if err == io.EOF {
			return regions, nil
		}
		if err != nil {
			return nil, err
		}
		var reg Region
		for i, name := range header {
			if err := reg.set(name, row[i]); err != nil {
				line, _ := c.FieldPos(i)
				return nil, fmt.Errorf("line %d, column %s: %w", line, name, err)
			}
		}
		regions = append(regions, reg)
	}
}

// set fills in the field that a column of regions.csv holds.
func (r *Region) set(column, text string) (err error) {
	switch column {
	case "region":
		r.ID = text
		return nil
	case "pixels":
		r.Pixels, err = strconv.Atoi(text)
		return err
	}
	for _, col := range regionColumns {
		if col.name == column {
			*col.of(r), err = parse(text)
			return err
		}
	}
	if quantity, ok := strings.CutSuffix(column, "_n"); ok {
		n, err := strconv.Atoi(text)
		r.Stats = append(r.Stats, Stat{Quantity: quantity, N: n})
		return err
	}
	if len(r.Stats) > 0 { // the column of n comes first
		st := &r.Stats[len(r.Stats)-1]
		for _, col := range statColumns {
			if column == st.Quantity+"_"+col.suffix {
				*col.of(st), err = parse(text)
				return err
			}
		}
	}
	return fmt.Errorf("unknown column")
}

func parse(text string) (float64, error) {
	if text == "" {
		text = "nan"
	}
	return strconv.ParseFloat(text, 64)
}

// WritePixels writes all quantities as CSV, a row per cell that has a pixel, lowest y first: column, row, x, y, then each
// quantity and its standard error, empty where there is none.
func WritePixels(w io.Writer, s *Survey) error {
	var b []byte
	b = append(b, "col,row,x_um,y_um"...)
	for _, q := range s.Maps {
		b = append(b, ',')
		b = append(b, q.Name...)
		if q.SE != nil {
			b = append(b, ',')
			b = append(b, q.Name...)
			b = append(b, "_se"...)
		}
	}
	b = append(b, '\n')
	field := func(v float32) {
		if b = append(b, ','); finite(float64(v)) {
			b = strconv.AppendFloat(b, float64(v), 'g', -1, 32)
		}
	}
	status := s.Map("status")
	for c := range s.Grid.Cells() {
		if status != nil && status.Values[c] != status.Values[c] {
			continue
		}
		b = strconv.AppendInt(b, int64(c%s.Grid.Cols), 10)
		b = append(b, ',')
		b = strconv.AppendInt(b, int64(c/s.Grid.Cols), 10)
		field(s.X[c])
		field(s.Y[c])
		for i := range s.Maps {
			q := &s.Maps[i]
			field(q.Values[c])
			if q.SE != nil {
				field(q.SE[c])
			}
		}
		b = append(b, '\n')
		if len(b) > 1<<16 {
			if _, err := w.Write(b); err != nil {
				return err
			}
			b = b[:0]
		}
	}
	_, err := w.Write(b)
	return err
}

// WriteSpikes writes the channels that were left out because of cosmic rays: place and shift, a row each.
func WriteSpikes(w io.Writer, s *Survey) error {
	c := csv.NewWriter(w)
	if err := c.Write([]string{"x_um", "y_um", "shift_cm-1"}); err != nil {
		return err
	}
	for _, k := range s.Spikes {
		if err := c.Write([]string{number(float64(k.X)), number(float64(k.Y)), strconv.FormatFloat(float64(k.Shift), 'f', 2, 64)}); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}
