package page

import (
	"math"
	"slices"

	"bandgrid/mapio/survey"
)

// A column of the region table is one quantity.
type column struct{ Quantity, Title, Unit string }

type regionRow struct {
	survey.Region
	Name  string
	Cells []statCell // one per column
}

type statCell struct{ Median, Spread float64 }

// tableColumns are the quantities that people look for first; regions.csv has them all.
var tableColumns = []column{
	{"d_g_ratio", "D/G", ""}, {"g_position", "G position", "cm⁻¹"}, {"g_width", "G width", "cm⁻¹"},
	{"2d_position", "2D position", "cm⁻¹"}, {"2d_width", "2D width", "cm⁻¹"}, {"2d_g_ratio", "2D/G", ""},
}

// leastValues is the number of values below which a median means little: stray pixels of a region say nothing about it.
const leastValues = 3

func regionTable(s *survey.Survey) (columns []column, rows []regionRow, omitted int) {
	for _, c := range tableColumns {
		if s.Map(c.Quantity) != nil {
			columns = append(columns, c)
		}
	}
	for i, r := range s.Regions {
		if len(rows) == maxRegions {
			return columns, rows, len(s.Regions) - i
		}
		row := regionRow{Region: r, Name: LayerName(r.Layer)}
		if math.IsNaN(r.Layer) {
			row.Name = "named area"
			if r.ID == "all" {
				row.Name = "whole map"
			}
		}
		for _, c := range columns {
			cell := statCell{math.NaN(), math.NaN()}
			if k := slices.IndexFunc(r.Stats, func(s survey.Stat) bool { return s.Quantity == c.Quantity }); k >= 0 && r.Stats[k].N >= leastValues {
				cell = statCell{r.Stats[k].Median, r.Stats[k].Spread}
			}
			row.Cells = append(row.Cells, cell)
		}
		rows = append(rows, row)
	}
	return columns, rows, 0
}
