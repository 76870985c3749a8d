package survey

// A Trace is one pixel's spectrum with its fit, to be looked at.
type Trace struct {
	Title   string
	X, Y    float64 // stage position, um
	Windows []TraceWindow
}

// A TraceWindow is the stretch of a trace that was fitted at once. All slices have a value per channel, by rising shift.
type TraceWindow struct {
	Name   string
	Shift  []float64 // cm-1
	Counts []float64 // as prepared for the fit; NaN where there are none
	Base   []float64 // the background
	Curve  []float64 // the fit, background included
	Left   []bool    // left out of the fit as a cosmic ray
	Found  []Peak    // bands that were found
}

// A Peak marks a band.
type Peak struct {
	Name     string
	Position float64 // cm-1
}
