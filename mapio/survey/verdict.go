package survey

// A Verdict says whether what was found keeps a limit.
type Verdict struct {
	What   string  `json:"what"`  // in words: "median d_g_ratio of 1 layer"
	Limit  string  `json:"limit"` // in words: "at most 0.05"
	Value  float64 `json:"value"`
	SE     float64 `json:"se"`
	Margin float64 `json:"margin_se"` // how far on the good side, in standard errors; negative on the other
	Go     bool    `json:"go"`
}
