// Command lapgate is the line's and the office's client: it sends frames, keeps them
// until their verdict came, and shows what the server knows. It inspects nothing itself.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"

	"lapgate/pipeline"
)

// Exit codes beside 0.
const (
	exitFailure = 1 // it did not do its job
	exitUsage   = 2 // the command line or an input file is wrong
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	code := run(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr)
	stop()
	os.Exit(code)
}

// run is the whole program; it returns the exit code.
func run(ctx context.Context, args []string, stdin io.Reader, stdout, stderr io.Writer) int {
	root := rootCommand()
	root.SetArgs(args)
	root.SetIn(stdin)
	root.SetOut(stdout)
	root.SetErr(stderr)
	started := false
	noteStart(root, &started)
	err := root.ExecuteContext(ctx)
	if err == nil {
		return 0
	}
	fmt.Fprintln(stderr, "lapgate:", err)
	if strings.Contains(err.Error(), "Error while dialing") { // the words of gRPC; no code says this alone
		fmt.Fprintln(stderr, "no server answers there: start `lapgated serve`, or name its host and port with --server")
	}
	if !started {
		fmt.Fprintln(stderr, "see lapgate --help, or lapgate VERB --help")
		return exitUsage
	}
	return exitCode(err)
}

// noteStart sets started once a verb runs: an error before that is one of usage.
func noteStart(c *cobra.Command, started *bool) {
	if verb := c.RunE; verb != nil {
		c.RunE = func(c *cobra.Command, args []string) error {
			*started = true
			return verb(c, args)
		}
	}
	for _, sub := range c.Commands() {
		noteStart(sub, started)
	}
}

func exitCode(err error) int {
	if pipeline.KindOf(err) == pipeline.InvalidKind || errors.Is(err, fs.ErrNotExist) {
		return exitUsage
	}
	return exitFailure
}

func rootCommand() *cobra.Command {
	root := &cobra.Command{
		Use:           "lapgate",
		Short:         "Send frames of polished parts to lapgated, and see verdicts and yield",
		Version:       versionText(),
		SilenceUsage:  true,
		SilenceErrors: true,
	}
	root.SetVersionTemplate("{{.Version}}\n")
	root.AddCommand(feedCommand(), yieldCommand(), watchCommand(), unitCommand(), holdsCommand(), disposeCommand(),
		outcomeCommand(), recipesCommand(), renderCommand(), volumeCommand())
	root.AddCommand(approveCommand(), approvalsCommand(), mastersCommand(), suspectsCommand(), stationsCommand(), changeCommand(), latencyCommand(), alarmsCommand(), driftCommand(), mapCommand())
	return root
}
