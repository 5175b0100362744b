package server_test

import (
	"context"
	"fmt"
	"testing"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// Latencies of 1 to 100 ms on line A and one on line B; the nearest rank of the share p
// of 100 values is the 100·p-th.
func TestLatencyByStation(t *testing.T) {
	r := newRig(t, rigOptions{})
	ctx := context.Background()
	record := func(unit, line string, ms float64) {
		h := header(unit, "ring", frame(1, 0))
		h.Line = line
		_, _, err := r.ledger.Record(ctx, ledger.Inspection{Identity: h.Identity, Digest: unit, Captured: h.Captured, LatencyMS: ms,
			Judgement: pipeline.Judgement{Verdict: pipeline.Accept}})
		must(t, err)
	}
	for i := range 100 {
		record(fmt.Sprint("u", i), "A", float64(1+(i*37)%100))
	}
	record("v", "B", 7.5)
	got, err := r.yield.GetLatency(ctx, &inspectpb.GetLatencyRequest{})
	must(t, err)
	if len(got.Stations) != 2 {
		t.Fatalf("stations %v, want A and B", got.Stations)
	}
	a, b := got.Stations[0], got.Stations[1]
	if a.N != 100 || a.P50Ms != 50 || a.P90Ms != 90 || a.P99Ms != 99 || a.MaxMs != 100 || a.Line != "A" {
		t.Errorf("line A: %v, want 100 with 50, 90, 99 and 100 ms", a)
	}
	if b.N != 1 || b.P50Ms != 7.5 || b.MaxMs != 7.5 {
		t.Errorf("line B: %v, want one of 7.5 ms", b)
	}
	one, err := r.yield.GetLatency(ctx, &inspectpb.GetLatencyRequest{Filter: &inspectpb.Filter{Line: "B"}})
	must(t, err)
	if len(one.Stations) != 1 {
		t.Errorf("of line B: %v", one.Stations)
	}
}

// Showing until it passes is seen: attempts per unit, and how many that failed first
// passed later.
func TestRetestsAreVisible(t *testing.T) {
	r := newRig(t, rigOptions{clock: &clock{at: header("u", "ring", frame(1, 0)).Captured}})
	r.show("good", 1, pipeline.Production, 0)
	r.show("tried", 1, pipeline.Production, 8)
	r.show("tried", 2, pipeline.Production, 8)
	r.show("tried", 3, pipeline.Production, 0)
	r.show("bad", 1, pipeline.Production, 8)
	sum, err := r.yield.GetSummary(context.Background(), &inspectpb.GetSummaryRequest{})
	must(t, err)
	y := sum.Total
	if y.PassByRetest.K != 1 || y.PassByRetest.N != 2 || y.AttemptsPerUnit != 5.0/3 {
		t.Errorf("got %v, want 1 of 2 passed by retest and 5 showings of 3 units", y)
	}
}
