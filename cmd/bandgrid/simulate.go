package main

import (
	"context"
	"errors"

	"github.com/spf13/pflag"
)

var simulateVerb = verb{
	name:  "simulate",
	usage: "SCENE",
	short: "write a run with known truth from a scene file",
	setup: func(*pflag.FlagSet) func(context.Context, []string, streams) error {
		return func(context.Context, []string, streams) error { return errors.ErrUnsupported }
	},
}
