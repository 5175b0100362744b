package main

import (
	"context"
	"net"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
	"lapgate/server/volume/plan"
)

// countingYield answers every filter with the same counts and keeps the last.
type countingYield struct {
	inspectpb.UnimplementedYieldServiceServer
	asked *inspectpb.Filter
}

func (s *countingYield) GetSummary(_ context.Context, r *inspectpb.GetSummaryRequest) (*inspectpb.GetSummaryResponse, error) {
	s.asked = r.GetFilter()
	return &inspectpb.GetSummaryResponse{Total: &inspectpb.Yield{FirstPass: &inspectpb.Rate{K: 181, N: 200}, FirstRejected: 15, FirstHeld: 4}}, nil
}

// The filter reaches the yield service over the wire, and its counts come back.
func TestAskLedgerOverTheWire(t *testing.T) {
	listener, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	service, server := &countingYield{}, grpc.NewServer()
	inspectpb.RegisterYieldServiceServer(server, service)
	go server.Serve(listener)
	t.Cleanup(server.Stop)
	got, err := askLedger(context.Background(), listener.Addr().String(), plan.LedgerFilter{Part: "disc-25", Process: "turned",
		Lot: "L24-001", Line: "A", Station: "A1", Recipe: "sha256:0", From: "2031-05-01T06:15:00+05:30", Gate: "every-unit"})
	if err != nil {
		t.Fatal(err)
	}
	if want := (plan.Counts{Started: 200, Accepted: 181, Rejected: 15, Held: 4}); got != want {
		t.Errorf("got %+v, want %+v", got, want)
	}
	f := service.asked
	if f.GetPart() != "disc-25" || f.GetProcess() != "turned" || f.GetLot() != "L24-001" || f.GetLine() != "A" ||
		f.GetStation() != "A1" || f.GetRecipe() != "sha256:0" || f.GetTo() != nil ||
		!f.GetFrom().AsTime().Equal(time.Date(2031, 5, 1, 0, 45, 0, 0, time.UTC)) {
		t.Errorf("the service was asked for %v", f)
	}
	_, err = runVolume(t, fewer(t), "--server", listener.Addr().String(), "--json")
	if err != nil {
		t.Error(err)
	}
}

func TestAskLedgerSaysWhichServer(t *testing.T) {
	_, err := askLedger(context.Background(), "127.0.0.1:1", plan.LedgerFilter{Process: "turned"})
	if err == nil || !strings.Contains(err.Error(), "127.0.0.1:1") || !strings.Contains(err.Error(), "--ledger-counts") {
		t.Errorf("got %v", err)
	}
}
