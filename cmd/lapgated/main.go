// Command lapgated is the inspection server and the verbs that touch pixels.
package main

import (
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"runtime/debug"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline"
)

// version and commit are set by the linker.
var (
	version = "development"
	commit  = ""
)

func main() { os.Exit(run(os.Args[1:], os.Stdout, os.Stderr)) }

// Exit codes.
const (
	exitDone    = 0
	exitFailure = 1
	exitUsage   = 2 // the call or a file it names is wrong
	exitReject  = 3 // only with inspect --gate
	exitHold    = 4 // only with inspect --gate
)

// app is what every verb is given.
type app struct {
	out, err io.Writer
	log      *slog.Logger
	exit     int // of a verb that did its job
}

// run is the program; it returns the exit code.
func run(args []string, out, errOut io.Writer) int {

	a := &app{out: out, err: errOut, log: slog.New(slog.NewTextHandler(errOut, nil))}
	root := a.root()
	root.SetArgs(args)
	root.SetOut(out)
	root.SetErr(errOut)
	if err := root.Execute(); err != nil {
		fmt.Fprintln(errOut, "lapgated:", err)
		return exitCode(err)
	}
	return a.exit
}

// usageError marks a wrong call.
type usageError struct{ error }

func (u usageError) Unwrap() error { return u.error }

func exitCode(err error) int {
	var usage usageError
	var problems configs.Problems
	if errors.As(err, &usage) || errors.As(err, &problems) || pipeline.KindOf(err) == pipeline.InvalidKind ||
		pipeline.KindOf(err) == pipeline.NotFoundKind || errors.Is(err, os.ErrNotExist) {
		return exitUsage
	}
	return exitFailure
}

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:           "lapgated",
		Short:         "Inspect the surfaces of polished parts: the server, and the verbs that touch pixels",
		Version:       programVersion(),
		SilenceUsage:  true,
		SilenceErrors: true,
		Args:          cobra.NoArgs,
	}
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return usageError{err} })
	root.AddCommand(a.serveCommand(), a.inspectCommand(), a.calibrateCommand(), a.validateCommand(), a.stagesCommand(), a.demoCommand())
	for _, c := range root.Commands() {
		if check := c.Args; check != nil {
			c.Args = func(cmd *cobra.Command, args []string) error {
				if err := check(cmd, args); err != nil {
					return usageError{fmt.Errorf("%w; usage: %s", err, cmd.UseLine())}
				}
				return nil
			}
		}
	}
	return root
}

// programVersion is version and commit, as every judgement records it.
func programVersion() string {
	c := commit
	if c == "" {
		if info, ok := debug.ReadBuildInfo(); ok {
			for _, s := range info.Settings {
				if s.Key == "vcs.revision" {
					c = s.Value
				}
			}
		}
	}
	if c == "" {
		c = "unknown"
	}
	return version + " (" + c + ")"
}
