package main

import (
	"errors"
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"lapgate/pipeline"
	"lapgate/server/report"
	"lapgate/server/volume"
	"lapgate/server/volume/plan"
)

// volumeJob is one run of the volume verb.
type volumeJob struct {
	file, counts, report, server string
	quantities                   []float64
	solve                        string
	between                      []string
	json, csv, crossovers        bool
}

// volumeCommand works out a plan file.
func volumeCommand() *cobra.Command {
	job := &volumeJob{}
	var server *string
	cmd := &cobra.Command{
		Use:   "volume FILE",
		Short: "Work out what a good unit costs at every quantity, for every way of making and inspecting it",
		Long: `Work out what a good unit costs at every quantity, for every way of making and inspecting it.

Prints the yields used, the costs at the quantities asked for, the ranges where each
combination is the cheapest, the crossovers with their distribution over the draws and what
more data would be worth. All costs are per good unit shipped. Yields named by a ledger filter are asked from the server,
or read from --ledger-counts.

--solve finds the value of one figure at which two combinations cost the same:
  lapgate volume plan.yaml --solve processes.replicated.yield \
    --between turned/none --between replicated/none --quantity 2600`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			job.file, job.server = args[0], *server
			return asUsage(job.run(cmd))
		},
	}
	server = serverFlag(cmd)
	flags := cmd.Flags()
	flags.BoolVar(&job.json, "json", false, "print the whole result as JSON")
	flags.BoolVar(&job.csv, "csv", false, "print one line per quantity and combination as CSV")
	flags.BoolVar(&job.crossovers, "csv-crossovers", false, "print one line per crossover, with its distribution over the draws, as CSV")
	flags.StringVar(&job.report, "report", "", "write a report to this HTML file")
	flags.StringVar(&job.counts, "ledger-counts", "", "file of verdict counts (YAML), instead of asking a server")
	flags.Float64SliceVar(&job.quantities, "quantity", nil, "further quantity of good units shipped; may be repeated")
	flags.StringVar(&job.solve, "solve", "", "figure to solve for, such as processes.replicated.yield")
	flags.StringSliceVar(&job.between, "between", nil, "PROCESS/INSPECTION, given twice, for --solve")
	cmd.MarkFlagsMutuallyExclusive("json", "csv", "csv-crossovers")
	cmd.MarkFlagsRequiredTogether("solve", "between")
	return cmd
}

// asUsage marks mistakes in plans and arguments as input errors.
func asUsage(err error) error {
	var bad *volumeInputError
	if errors.As(err, &bad) {
		return pipeline.Invalid("%w", err)
	}
	return err
}

// volumeInputError is a mistake in the plan, a file beside it, or an argument.
type volumeInputError struct{ err error }

func (e *volumeInputError) Error() string { return e.err.Error() }

func (e *volumeInputError) Unwrap() error { return e.err }

func (j *volumeJob) run(cmd *cobra.Command) error {
	p, err := j.load(cmd.Context())
	if err != nil {
		return err
	}
	if j.solve != "" {
		return j.solveFor(cmd, p)
	}
	bar := showVolumeProgress(cmd.ErrOrStderr())
	result, err := volume.Evaluate(cmd.Context(), p, j.quantities, bar.update)
	bar.stop()
	if err != nil {
		return &volumeInputError{err}
	}
	if j.report != "" {
		if err := j.writeReport(p, result); err != nil {
			return err
		}
	}
	switch {
	case j.json:
		return writeJSON(cmd.OutOrStdout(), result)
	case j.csv:
		return writeVolumeCSV(cmd.OutOrStdout(), result)
	case j.crossovers:
		return writeCrossoversCSV(cmd.OutOrStdout(), result)
	}
	return printVolume(cmd.OutOrStdout(), result)
}

func (j *volumeJob) writeReport(p *plan.Plan, result *volume.Result) error {
	f, err := os.Create(j.report)
	if err != nil {
		return err
	}
	if err := report.WriteVolume(f, p, result); err != nil {
		return errors.Join(err, f.Close())
	}
	return f.Close()
}

func (j *volumeJob) solveFor(cmd *cobra.Command, p *plan.Plan) error {
	if len(j.between) != 2 || len(j.quantities) == 0 {
		return &volumeInputError{errors.New("--solve wants --between twice and at least one --quantity")}
	}
	var pair [2]volume.Combination
	for i, text := range j.between {
		process, inspection, ok := strings.Cut(text, "/")
		if !ok {
			return &volumeInputError{fmt.Errorf("--between %s: want PROCESS/INSPECTION", text)}
		}
		pair[i] = volume.Combination{Process: process, Inspection: inspection}
	}
	var all []*volume.BreakEven
	for _, quantity := range j.quantities {
		b, err := volume.SolveBreakEven(p, j.solve, pair[0], pair[1], quantity)
		if err != nil {
			return &volumeInputError{err}
		}
		all = append(all, b)
	}
	if j.json {
		return writeJSON(cmd.OutOrStdout(), all)
	}
	return printBreakEvens(cmd.OutOrStdout(), p.Currency, all)
}
