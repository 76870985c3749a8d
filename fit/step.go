package fit

import (
	"fmt"

	"bandgrid/mapio/survey"
)

// A Scope says how much of the map a step must see. It decides where the step may run: local and neighbour steps can run while
// the scan streams, global ones wait for the whole map, so that slices of a run can be worked on apart and put together with
// the same result.
type Scope uint8

const (
	Local     Scope = iota + 1 // one pixel
	Neighbour                  // a pixel and a halo around it
	Global                     // the whole map
)

func (s Scope) String() string {
	switch s {
	case Local:
		return "local"
	case Neighbour:
		return "neighbour"
	case Global:
		return "global"
	}
	return fmt.Sprintf("Scope(%d)", uint8(s))
}

// A Step makes quantities from stored quantities, after the spectra are fitted.
type Step struct {
	Name  string // for messages
	Scope Scope
	Needs []string // quantities that must be there; where one is missing the step is left out
	Gives []string // quantities that it puts into the survey
	// Run does it. What it wants people to know it appends to the survey's warnings. It must not depend on the order in which
	// pixels were acquired.
	Run func(*survey.Survey) error
}

// Apply runs the steps in order. A step whose needs are not met is left out: a run that has only one window gives what it can.
func Apply(s *survey.Survey, steps []Step) error {
next:
	for _, step := range steps {
		for _, name := range step.Needs {
			if s.Map(name) == nil {
				continue next
			}
		}
		if err := step.Run(s); err != nil {
			return fmt.Errorf("%s: %w", step.Name, err)
		}
	}
	return nil
}
