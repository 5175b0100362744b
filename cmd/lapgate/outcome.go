package main

import (
	"context"
	"fmt"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// outcomeFlags is the command line of the outcome verb.
type outcomeFlags struct {
	server, part, line, bin, at string
	attempt                     int
	confirmed, mismatches, json bool
}

func outcomeCommand() *cobra.Command {
	var f outcomeFlags
	c := &cobra.Command{
		Use:   "outcome UNIT --bin accept|reject|hold  |  outcome --mismatches",
		Short: "Report what the line really did with a unit, or list units where that differs from the verdict",
		Args:  cobra.MaximumNArgs(1),
	}
	server := serverFlag(c)
	c.Flags().StringVar(&f.part, "part", "", "part number")
	c.Flags().StringVar(&f.line, "line", "", "with --mismatches: only this line")
	c.Flags().StringVar(&f.bin, "bin", "", "the bin that the unit went into: accept, reject or hold")
	c.Flags().IntVar(&f.attempt, "attempt", 0, "which showing of the unit; 0 = the last")
	c.Flags().BoolVar(&f.confirmed, "confirmed", false, "the line saw the unit go there")
	c.Flags().StringVar(&f.at, "at", "", "when; default now")
	c.Flags().BoolVar(&f.mismatches, "mismatches", false, "list units whose bin differs from their verdict")
	c.Flags().BoolVar(&f.json, "json", false, "print one JSON document")
	c.RunE = func(c *cobra.Command, args []string) error {
		f.server = *server
		if f.mismatches == (len(args) == 1) {
			return pipeline.Invalid("outcome: want either a unit with --bin, or --mismatches")
		}
		if f.mismatches {
			return f.list(c)
		}
		return f.report(c, args[0])
	}
	return c
}

func (f *outcomeFlags) list(c *cobra.Command) error {
	list := []inspectionOf{}
	err := ask(c.Context(), f.server, func(ctx context.Context, conn *grpc.ClientConn) error {
		client := inspectpb.NewInspectionServiceClient(conn)
		req := &inspectpb.ListMismatchesRequest{Part: f.part, Line: f.line, PageSize: pageSize}
		for {
			r, err := client.ListMismatches(ctx, req)
			if err != nil {
				return err
			}
			page, err := newInspections(r.GetInspections())
			if err != nil {
				return err
			}
			list = append(list, page...)
			if req.PageToken = r.GetNextPageToken(); req.PageToken == "" {
				return nil
			}
		}
	})
	if err != nil {
		return err
	}
	return inspectionsDisplay("mismatches", list).write(c.OutOrStdout(), f.json, false)
}

func (f *outcomeFlags) report(c *cobra.Command, unit string) error {
	bin := inspectpb.FromVerdict(pipeline.Verdict(f.bin))
	if bin == inspectpb.Verdict_VERDICT_UNSPECIFIED {
		return pipeline.Invalid("bin: got %q, want accept, reject or hold", f.bin)
	}
	at, err := parseTime("at", f.at)
	if err != nil {
		return err
	}
	if at.IsZero() {
		at = time.Now()
	}
	story, err := unitStory(c.Context(), f.server, f.part, unit)
	if err != nil {
		return err
	}
	showing, err := f.showingIn(story)
	if err != nil {
		return err
	}
	req := &inspectpb.ReportOutcomeRequest{Identity: inspectpb.FromIdentity(showing.Identity), Bin: bin, Confirmed: f.confirmed, At: inspectpb.FromTime(at)}
	matches := false
	err = ask(c.Context(), f.server, func(ctx context.Context, conn *grpc.ClientConn) error {
		r, err := inspectpb.NewInspectionServiceClient(conn).ReportOutcome(ctx, req)
		matches = r.GetMatches()
		return err
	})
	if err != nil {
		return err
	}
	if f.json {
		return writeJSON(c.OutOrStdout(), map[string]any{"unit": unit, "inspection_id": showing.InspectionID, "bin": f.bin,
			"verdict": showing.Verdict, "matches": matches})
	}
	_, err = fmt.Fprintf(c.OutOrStdout(), "unit %s, attempt %d: %s bin%s\n", unit, showing.Attempt, f.bin, mismatch(showing.Verdict, pipeline.Verdict(f.bin)))
	return err
}

// showingIn returns the showing that is meant. Units of two parts under one id are not
// told apart without --part.
func (f *outcomeFlags) showingIn(story []inspectionOf) (inspectionOf, error) {
	for _, i := range story {
		if i.Part != story[0].Part {
			return i, pipeline.Invalid("part: unit %s is known of parts %s and %s; say which with --part", i.Unit, story[0].Part, i.Part)
		}
	}
	if f.attempt == 0 {
		return story[len(story)-1], nil
	}
	for n := len(story) - 1; n >= 0; n-- {
		if story[n].Attempt == f.attempt {
			return story[n], nil
		}
	}
	return inspectionOf{}, pipeline.NotFound("unit %s: no attempt %d in the ledger", story[0].Unit, f.attempt)
}
