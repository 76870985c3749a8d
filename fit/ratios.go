package fit

import (
	"math"

	"bandgrid/mapio/survey"
)

// RatioSteps returns the steps that make the recipe's ratios of bands in different windows, from stored heights or areas.
// Ratios within a window are made by the fit, which knows the covariance; bands of different windows have none.
func RatioSteps(r Recipe) []Step {
	var steps []Step
	for _, ratio := range r.Ratios {
		num, den := ratio.Numerator+"_"+ratio.Of, ratio.Denominator+"_"+ratio.Of
		found := ratio.Denominator + "_position"
		steps = append(steps, Step{
			Name: ratio.Name, Scope: Local, Needs: []string{num, den, found}, Gives: []string{ratio.Name},
			Run: func(s *survey.Survey) error {
				if s.Map(ratio.Name) == nil {
					s.Put(divide(ratio, s.Map(num), s.Map(den), s.Map(found)))
				}
				return nil
			},
		})
	}
	return steps
}

func divide(r Ratio, num, den, found *survey.Quantity) survey.Quantity {
	c := ratioColumn(r)
	n := len(num.Values)
	q := survey.Quantity{Name: c.Name, Unit: c.Unit, Description: c.Description, Of: c.Of, Values: make([]float32, n), SE: make([]float32, n)}
	for i := range n {
		q.Values[i], q.SE[i] = float32(nan), float32(nan)
		if p := found.Values[i]; p != p {
			continue
		}
		a, b := float64(num.Values[i]), float64(den.Values[i])
		ratio := a / b
		se := float64(den.SE[i]) / b
		q.Values[i] = float32(ratio * (1 - se*se)) // less its bias to second order
		q.SE[i] = float32(math.Hypot(float64(num.SE[i]), ratio*float64(den.SE[i])) / math.Abs(b))
	}
	return q
}
