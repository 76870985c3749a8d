package survey

// A Drift is how the shift axis moved during a run, from a line that every spectrum shows; it was taken out of all positions.
type Drift struct {
	Band  string    `json:"band"`       // the line that was followed
	Step  float64   `json:"step_cm-1"`  // standard deviation of the movement from pixel to pixel
	Range float64   `json:"range_cm-1"` // from the lowest to the highest offset
	Error float64   `json:"error_cm-1"` // median standard error of the offset
	Jumps []Jump    `json:"jumps,omitempty"`
	Pixel []int     `json:"pixel"` // some hundred of them, in order of acquisition
	Shift []float64 `json:"shift_cm-1"`
}

// A Jump is a sudden movement between two pixels.
type Jump struct {
	Pixel int     `json:"pixel"` // the first after it, in order of acquisition
	Size  float64 `json:"size_cm-1"`
	SE    float64 `json:"se_cm-1"`
}
