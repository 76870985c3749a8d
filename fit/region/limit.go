package region

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"

	"bandgrid/mapio/survey"
)

// A Limit is what a survey must keep to be used further: at least so much area of single layer, D/G at most so large.
type Limit struct {
	Quantity  string   `json:"quantity"`            // "area", um2, or a quantity of the survey
	Statistic string   `json:"statistic,omitempty"` // "median" (default) or "mean" of a quantity
	Layer     *int     `json:"layer,omitempty"`     // of this layer number only; without, of the whole map
	AtLeast   *float64 `json:"at_least,omitempty"`
	AtMost    *float64 `json:"at_most,omitempty"`
}

// ReadLimits reads limits from JSON, {"limits": [...]}. It refuses unknown fields and limits that make no sense.
func ReadLimits(r io.Reader) ([]Limit, error) {
	data, err := io.ReadAll(io.LimitReader(r, 1<<20))
	if err != nil {
		return nil, err
	}
	var file struct {
		Limits []Limit `json:"limits"`
	}
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&file); err != nil {
		return nil, fmt.Errorf(`%w; the form is {"limits": [{"quantity": "area", "layer": 1, "at_least": 500}, {"quantity": "d_g_ratio", "layer": 1, "at_most": 0.05}]}`, err)
	}
	if len(file.Limits) == 0 {
		return nil, errors.New("there are no limits in it")
	}
	for i, l := range file.Limits {
		switch {
		case l.Quantity == "":
			return nil, fmt.Errorf("limit %d: the quantity is missing", i+1)
		case (l.AtLeast == nil) == (l.AtMost == nil):
			return nil, fmt.Errorf("limit %d (%s): either at_least or at_most is needed", i+1, l.Quantity)
		case l.Statistic != "" && l.Statistic != "median" && l.Statistic != "mean":
			return nil, fmt.Errorf("limit %d (%s): statistic is %q; median or mean is possible", i+1, l.Quantity, l.Statistic)
		case l.Layer != nil && !(*l.Layer >= 0 && *l.Layer <= 5):
			return nil, fmt.Errorf("limit %d (%s): layer is %d; 0 to 5 are possible", i+1, l.Quantity, *l.Layer)
		}
	}
	return file.Limits, nil
}

// Judge compares a survey whose regions were found with limits. What the survey does not have, or has no pixel of, is no go. The
// error names a quantity that no survey of that recipe has.
//
// The standard error of an area is that of its boundary; of a mean it allows for correlation between neighbours; that of a
// median is 1.25 times that of the mean, as for normal scatter.
func Judge(s *survey.Survey, limits []Limit) (list []survey.Verdict, err error) {
	for _, l := range limits {
		v := survey.Verdict{What: l.what(), Value: math.NaN(), SE: math.NaN(), Margin: math.NaN()}
		if l.Quantity == "area" {
			v.Value, v.SE = l.area(s)
		} else {
			q := s.Map(l.Quantity)
			if q == nil {
				return nil, fmt.Errorf("the survey has no quantity %q", l.Quantity)
			}
			v.Value, v.SE = l.statistic(s, q)
		}
		if l.AtLeast != nil {
			v.Limit = fmt.Sprintf("at least %g", *l.AtLeast)
			v.Margin = v.Value - *l.AtLeast
		} else {
			v.Limit = fmt.Sprintf("at most %g", *l.AtMost)
			v.Margin = *l.AtMost - v.Value

		}
		v.Go = v.Margin >= 0
		v.Margin /= v.SE
		for _, x := range []*float64{&v.Value, &v.SE, &v.Margin} { // JSON knows no NaN and no infinity
			if math.IsNaN(*x) || math.IsInf(*x, 0) {
				*x = 0
			}
		}
		list = append(list, v)
	}
	return list, nil
}

func (l Limit) what() string {
	text := l.Quantity
	if l.Quantity != "area" {
		text = l.stat() + " " + l.Quantity
	}
	switch {
	case l.Layer == nil:
		return text + " of the whole map"
	case *l.Layer == 0:
		return text + " of bare substrate"
	case *l.Layer == 1:
		return text + " of 1 layer"
	}
	return fmt.Sprintf("%s of %d layers", text, *l.Layer)
}

func (l Limit) stat() string {
	if l.Statistic == "" {
		return "median"
	}
	return l.Statistic
}

// area sums the regions of the layer.
func (l Limit) area(s *survey.Survey) (sum, se float64) {
	for i, r := range s.Regions {
		if (i == 0) != (l.Layer == nil) || l.Layer != nil && r.Layer != float64(*l.Layer) {
			continue
		}
		sum += r.Area
		if r.AreaSE == r.AreaSE {
			se = math.Hypot(se, r.AreaSE)
		}
	}
	return sum, se
}

func (l Limit) statistic(s *survey.Survey, q *survey.Quantity) (value, se float64) {
	number := s.Map("layer_number")
	var cells []int32
	for i := range q.Values {
		if l.Layer == nil || number != nil && number.Values[i] == float32(*l.Layer) {
			cells = append(cells, int32(i))
		}
	}
	var sum summary
	st := sum.of(q, cells, s.Grid)
	if l.stat() == "median" {
		return st.Median, 1.25 * st.MeanSE
	}
	if len(q.Of) == 2 {
		sum.ratio(&st, q, s.Map(q.Of[0]), s.Map(q.Of[1]), cells, s.Grid)
	}
	return st.Mean, st.MeanSE
}
