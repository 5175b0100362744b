package main

import (
	"context"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// yieldFlags is the command line of the yield verb.
type yieldFlags struct {
	filterFlags
	by        []string
	series    time.Duration
	pareto    bool
	most      int32
	json, csv bool
}

func yieldCommand() *cobra.Command {
	var f yieldFlags
	c := &cobra.Command{
		Use:   "yield",
		Short: "Show counts, first-pass and final yield with their 95 % intervals",
		Long: `Show counts and yield of inspections by time of capture. Only purpose production counts
unless --purpose says otherwise. First pass: units accepted at their first attempt. Final
yield is given twice: with open holds counted as bad, and as good. Passed by retest:
units that a later attempt accepted, of those held or rejected at their first. By permanent
defects: first pass with the defects left out that a later attempt, after air-blow or
cleaning, proved gone or moved; what it did not prove counts as permanent.

With --series: accepted of all verdicts per time bucket. With --pareto: the reasons, most
frequent first; a unit with two reasons counts once under "first" and under both in "any".
Removable: first attempts that had the reason by defects that later went or moved.`,
		Args: cobra.NoArgs,
	}
	server := serverFlag(c)
	f.add(c.Flags())
	c.Flags().StringSliceVar(&f.by, "by", nil, "group by any of part, process, lot, line, station, recipe")
	c.Flags().DurationVar(&f.series, "series", 0, "per time bucket of this length, a multiple of 15m")
	c.Flags().BoolVar(&f.pareto, "pareto", false, "the reasons, most frequent first")
	c.Flags().Int32Var(&f.most, "most", 0, "with --pareto: at most so many reasons; 0 = all")
	c.Flags().BoolVar(&f.json, "json", false, "print one JSON document")
	c.Flags().BoolVar(&f.csv, "csv", false, "print CSV with a header line")
	c.MarkFlagsMutuallyExclusive("json", "csv")
	c.MarkFlagsMutuallyExclusive("series", "pareto", "by")
	c.RunE = func(c *cobra.Command, _ []string) error {
		filter, err := f.filter()
		if err != nil {
			return err
		}
		var d display
		err = ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
			d, err = f.ask(ctx, inspectpb.NewYieldServiceClient(conn), filter)
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), f.json, f.csv)
	}
	return c
}

func (f *yieldFlags) ask(ctx context.Context, client inspectpb.YieldServiceClient, filter *inspectpb.Filter) (display, error) {
	switch {
	case f.series != 0:
		if f.series < 0 || f.series%(15*time.Minute) != 0 {
			return display{}, inspectpb.ToStatus(pipeline.Invalid("series: got %v, want a multiple of 15m", f.series))
		}
		r, err := client.GetSeries(ctx, &inspectpb.GetSeriesRequest{Filter: filter, BucketMinutes: int32(f.series / time.Minute)})
		return seriesDisplay(r), err
	case f.pareto:
		r, err := client.GetPareto(ctx, &inspectpb.GetParetoRequest{Filter: filter, Most: f.most})
		return paretoDisplay(r), err
	}
	r, err := client.GetSummary(ctx, &inspectpb.GetSummaryRequest{Filter: filter, GroupBy: f.by})
	return summaryDisplay(r, f.by), err
}
