// Command bandgrid turns the Raman map of a graphene sample into layer numbers, defects, regions and figures.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"

	"github.com/spf13/pflag"
)

// A verb is one thing that the program does. Each lives in a file of its name.
type verb struct {
	name  string
	usage string // arguments, after the name
	short string // one line
	long  string // what it is for, then an example that works on examples/
	// setup adds the verb's flags and returns what runs it once they are parsed.
	setup func(*pflag.FlagSet) func(ctx context.Context, args []string, std streams) error
}

// streams are what a verb reads and writes; tests hand in buffers.
type streams struct {
	in       io.Reader
	out, err io.Writer
	terminal bool // err is a terminal: progress may overwrite its line
}

var verbs = []verb{surveyVerb, interpretVerb, calibrateVerb, simulateVerb}

// Exit status, as documented in the README.
const (
	exitDone        = 0
	exitFailed      = 1
	exitUsage       = 2
	exitPartly      = 3   // done, but part of the input was unusable
	exitInterrupted = 130 // what was finished is kept
)

// A usageError is the caller's mistake: wrong flags or arguments.
type usageError struct{ error }

func (e usageError) Unwrap() error { return e.error }

// errPartly is wrapped by errors of verbs that did their work but could not use all of the input.
var errPartly = errors.New("part of the input was unusable")

// errNoGo is wrapped where a limit that was given is not kept; what was asked for is done all the same.
var errNoGo = errors.New("no go")

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	info, err := os.Stderr.Stat()
	std := streams{os.Stdin, os.Stdout, os.Stderr, err == nil && info.Mode()&os.ModeCharDevice != 0}
	os.Exit(run(ctx, os.Args[1:], std))
}

// run runs the verb that args name and returns the exit status.
func run(ctx context.Context, args []string, std streams) int {
	err := dispatch(ctx, args, std)
	switch {
	case err == nil, errors.Is(err, pflag.ErrHelp):
		return exitDone
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(std.err, "bandgrid: interrupted:", err)
		return exitInterrupted
	}
	fmt.Fprintln(std.err, "bandgrid:", err)
	if errors.As(err, new(usageError)) {
		return exitUsage
	}
	if errors.Is(err, errPartly) && !errors.Is(err, errNoGo) {
		return exitPartly
	}
	return exitFailed
}

func dispatch(ctx context.Context, args []string, std streams) error {
	if len(args) == 0 {
		overview(std.err)
		return usageError{errors.New("no verb given")}
	}
	switch args[0] {
	case "--help", "-h", "help":
		overview(std.out)
		return nil
	case "--version", "version":
		fmt.Fprintln(std.out, "bandgrid", version())
		return nil
	}
	for _, v := range verbs {
		if v.name != args[0] {
			continue
		}
		flags := pflag.NewFlagSet(v.name, pflag.ContinueOnError)
		flags.SetOutput(std.err)
		flags.SortFlags = false
		do := v.setup(flags)
		flags.Usage = func() {
			fmt.Fprintf(std.out, "bandgrid %s %s\n\n%s\n\nFlags:\n%s", v.name, v.usage, v.long, flags.FlagUsages())
		}
		if err := flags.Parse(args[1:]); err != nil {
			if errors.Is(err, pflag.ErrHelp) {
				return err
			}
			return usageError{fmt.Errorf("%s: %w; bandgrid %s --help lists the flags", v.name, err, v.name)}
		}
		return do(ctx, flags.Args(), std)
	}
	return usageError{fmt.Errorf("there is no verb %q; bandgrid --help lists them", args[0])}
}

func overview(w io.Writer) {
	fmt.Fprint(w, "bandgrid maps layer number, defects, strain and doping of graphene from a Raman scan.\n\nVerbs:\n")
	for _, v := range verbs {
		fmt.Fprintf(w, "  %-10s %s\n", v.name, v.short)
	}
	fmt.Fprint(w, "\nbandgrid VERB --help tells more. First steps: bandgrid survey RUN --laser 532\n")
}
