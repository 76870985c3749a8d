package main

import (
	"context"
	"errors"

	"github.com/spf13/pflag"
)

var surveyVerb = verb{
	name:  "survey",
	usage: "RUN...",
	short: "fit every pixel of a run, interpret, and write maps, regions, figures and a report",
	setup: func(*pflag.FlagSet) func(context.Context, []string, streams) error {
		return func(context.Context, []string, streams) error { return errors.ErrUnsupported }
	},
}
