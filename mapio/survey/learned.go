package survey

// Learned is what a sample of a run's pixels told of the whole run before it was fitted: how the detector scatters, and where
// bands lie that are too weak to be located in single pixels.
type Learned struct {
	Pixels        int       `json:"pixels"` // looked at
	Gain          float64   `json:"gain_e_per_count,omitempty"`
	ReadNoise     float64   `json:"read_noise_counts,omitempty"`
	NoiseChannels int       `json:"noise_channels"`                // that gain and read noise come from; 0: as given, or not to be had
	Correlation   []float64 `json:"channel_correlation,omitempty"` // of the noise of channels 1, 2 ... apart; 0 where chance explains it
	Inflation     float64   `json:"variance_inflation,omitempty"`  // of the estimates, for that correlation
	// Bare is how many pixels without film gave the substrate's own spectrum, and Substrate the windows where it shows lines.
	Bare      int      `json:"bare_pixels,omitempty"`
	Substrate []string `json:"substrate_lines,omitempty"`
	// Bands that some pixels show clearly.
	Bands []LearnedBand `json:"bands,omitempty"`
}

// A LearnedBand is where a band lies in a run. Spreads are robust standard deviations between pixels, without their errors.
type LearnedBand struct {
	Name           string  `json:"name"`
	Pixels         int     `json:"pixels"`
	Position       float64 `json:"position_cm-1"`
	PositionSpread float64 `json:"position_spread_cm-1"`
	Width          float64 `json:"width_cm-1"`
	WidthSpread    float64 `json:"width_spread_cm-1"`
	Discrepancy    float64 `json:"discrepancy,omitempty"` // from its shape, a fraction of the height; 0 where chance explains it
}
