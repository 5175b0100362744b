package main

import (
	"context"
	"fmt"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/proto/inspectpb"
	"lapgate/server/volume/plan"
)

// askLedger asks a running server's yield service for the counts of one
// filter; only production counts there.
func askLedger(ctx context.Context, server string, f plan.LedgerFilter) (plan.Counts, error) {
	filter := &inspectpb.Filter{Part: f.Part, Process: f.Process, Lot: f.Lot, Line: f.Line, Station: f.Station, Recipe: f.Recipe}
	for text, field := range map[string]**timestamppb.Timestamp{f.From: &filter.From, f.To: &filter.To} {
		if text == "" {
			continue
		}
		at, err := time.Parse(time.RFC3339, text)
		if err != nil {
			return plan.Counts{}, err
		}
		*field = timestamppb.New(at)
	}
	var total *inspectpb.Yield
	err := ask(ctx, server, func(ctx context.Context, conn *grpc.ClientConn) error {
		answer, err := inspectpb.NewYieldServiceClient(conn).GetSummary(ctx, &inspectpb.GetSummaryRequest{Filter: filter})
		total = answer.GetTotal()
		return err
	})
	if err != nil {
		return plan.Counts{}, fmt.Errorf("asking %s for %s: %w; give --server or --ledger-counts", server, f, err)
	}
	first := total.GetFirstPass()
	return plan.Counts{Started: int(first.GetN()), Accepted: int(first.GetK()),
		Rejected: int(total.GetFirstRejected()), Held: int(total.GetFirstHeld())}, nil
}
