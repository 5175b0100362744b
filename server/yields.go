package server

import (
	"context"
	"slices"
	"time"

	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
	"lapgate/server/yield"
)

// confidence of every interval the service gives.
const confidence = 0.95

// GetSummary implements YieldService.
func (s *Yield) GetSummary(ctx context.Context, req *inspectpb.GetSummaryRequest) (*inspectpb.GetSummaryResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	dims, err := dimensionsOf(req.GroupBy)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	total, err := s.yields(ctx, ledger.Question{Filter: f})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.GetSummaryResponse{Total: emptyYield()}
	if len(total) > 0 {
		out.Total = total[0]
	}
	if len(dims) > 0 {
		out.Groups, err = s.yields(ctx, ledger.Question{Filter: f, GroupBy: dims})
	}
	return out, inspectpb.ToStatus(err)
}

func (s *Yield) yields(ctx context.Context, q ledger.Question) ([]*inspectpb.Yield, error) {
	if err := s.deps.Retest.CatchUp(ctx); err != nil {
		return nil, err
	}
	rows, err := s.deps.Ledger.Counts(ctx, q)
	if err != nil {
		return nil, err
	}
	var out []*inspectpb.Yield
	for _, c := range rows {
		y, err := yieldOf(c)
		if err != nil {
			return nil, err
		}
		out = append(out, y)
	}
	return out, nil
}

// emptyYield is the yield of no units.
func emptyYield() *inspectpb.Yield {
	y, _ := yieldOf(ledger.Counts{}) // zero counts cannot be refused
	return y
}

// yieldOf turns exact counts into rates with intervals. Units sent round to be cleaned
// or reworked are open like holds.
func yieldOf(c ledger.Counts) (*inspectpb.Yield, error) {
	first, err := yield.FirstPass(tally(c.First), confidence)
	if err != nil {
		return nil, err
	}
	open := c.Final.Open + c.Final.Rework
	final, err := yield.FinalYield(yield.Tally{Accepted: int(c.Final.Accept), Rejected: int(c.Final.Reject), Held: int(open)}, confidence)
	if err != nil {
		return nil, err
	}
	retest, err := yield.NewRate(int(c.RetestAccepts.Total()), int(c.First.Reject+c.First.Hold), confidence)
	if err != nil {
		return nil, err
	}
	permanent, err := yield.NewRate(int(c.Permanent.Accept), int(c.First.Total()), confidence)
	if err != nil {
		return nil, err
	}
	return &inspectpb.Yield{Group: groupOf(c), Units: int32(c.Final.Total()), Inspections: int32(c.Showings.Total()),
		Accepted: int32(c.Showings.Accept), Rejected: int32(c.Showings.Reject), Held: int32(c.Showings.Hold),
		FirstPass: rate(first), FinalIfHoldsFail: rate(final.Low), FinalIfHoldsPass: rate(final.High), OpenHolds: int32(open),
		FirstRejected: int32(c.First.Reject), FirstHeld: int32(c.First.Hold),
		AttemptsPerUnit: float64(c.Attempts) / float64(max(c.Final.Total(), 1)), PassByRetest: rate(retest), Permanent: rate(permanent)}, nil
}

func groupOf(c ledger.Counts) map[string]string {
	group := map[string]string{}
	for d, v := range c.Of {
		group[string(d)] = v
	}
	return group
}

func tally(t ledger.Tally) yield.Tally {
	return yield.Tally{Accepted: int(t.Accept), Rejected: int(t.Reject), Held: int(t.Hold)}
}

// rate encodes a rate; that of nothing is 0 of 0 with the interval from 0 to 1.
func rate(r yield.Rate) *inspectpb.Rate {
	if r.Of == 0 {
		r.Value = 0
	}
	return &inspectpb.Rate{K: int32(r.Count), N: int32(r.Of), Value: r.Value,
		ClopperPearson: &inspectpb.Interval{Low: r.ClopperPearson.Low, High: r.ClopperPearson.High},
		Wilson:         &inspectpb.Interval{Low: r.Wilson.Low, High: r.Wilson.High}}
}

// GetSeries implements YieldService.
func (s *Yield) GetSeries(ctx context.Context, req *inspectpb.GetSeriesRequest) (*inspectpb.GetSeriesResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	if req.BucketMinutes < 15 || req.BucketMinutes%15 != 0 {
		return nil, inspectpb.ToStatus(pipeline.Invalid("bucket_minutes: got %d, want a multiple of 15", req.BucketMinutes))
	}
	rows, err := s.deps.Ledger.Counts(ctx, ledger.Question{Filter: f, Every: time.Duration(req.BucketMinutes) * time.Minute})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.GetSeriesResponse{}
	for _, c := range rows {
		if c.Showings.Total() == 0 {
			continue
		}
		r, err := yield.NewRate(int(c.Showings.Accept), int(c.Showings.Total()), confidence)
		if err != nil {
			return nil, inspectpb.ToStatus(err)
		}
		out.Points = append(out.Points, &inspectpb.SeriesPoint{Start: inspectpb.FromTime(c.Start), Inspections: int32(c.Showings.Total()),
			Accepted: int32(c.Showings.Accept), Rejected: int32(c.Showings.Reject), Held: int32(c.Showings.Hold), AcceptRate: rate(r)})
	}
	return out, nil
}

// GetPareto implements YieldService.
func (s *Yield) GetPareto(ctx context.Context, req *inspectpb.GetParetoRequest) (*inspectpb.GetParetoResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	q := ledger.Question{Filter: f}
	if err := s.deps.Retest.CatchUp(ctx); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	reasons, err := s.deps.Ledger.Reasons(ctx, q)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	total, err := s.deps.Ledger.Counts(ctx, q)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.GetParetoResponse{Rows: paretoRows(reasons)}
	if req.Most > 0 && len(out.Rows) > int(req.Most) {
		out.Rows = out.Rows[:req.Most]
	}
	if len(total) > 0 {
		out.Inspections = int32(total[0].Showings.Total())
	}
	return out, nil
}

// paretoRows orders reasons by how often they came first, and gives each its share of
// the showings that had a reason.
func paretoRows(reasons []ledger.ReasonCounts) []*inspectpb.ParetoRow {
	var rows []*inspectpb.ParetoRow
	sum := 0.0
	for _, r := range reasons {
		sum += float64(r.Principal)
		rows = append(rows, &inspectpb.ParetoRow{Reason: r.Reason, Verdict: inspectpb.FromVerdict(r.Verdict), First: int32(r.Principal), Any: int32(r.Showings),
			FirstAttempts: int32(r.First), Removable: int32(r.Removable)})
	}
	slices.SortStableFunc(rows, func(a, b *inspectpb.ParetoRow) int {
		if a.First != b.First {
			return int(b.First - a.First)
		}
		return int(b.Any - a.Any)
	})
	running := 0.0
	for _, r := range rows {
		if sum > 0 {
			running += float64(r.First)
			r.Share, r.CumulativeShare = float64(r.First)/sum, running/sum
		}
	}
	return rows
}

// ListUnits implements YieldService.
func (s *Yield) ListUnits(ctx context.Context, req *inspectpb.ListUnitsRequest) (*inspectpb.ListUnitsResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	f.Reason = req.Reason
	if req.Verdict != inspectpb.Verdict_VERDICT_UNSPECIFIED {
		if f.Verdict, err = inspectpb.ToVerdict(req.Verdict); err != nil {
			return nil, inspectpb.ToStatus(err)
		}
	}
	page, err := s.deps.Ledger.Showings(ctx, f, ledger.Page{Limit: int(req.PageSize), After: req.PageToken})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.ListUnitsResponse{NextPageToken: page.Next}
	for _, sh := range page.List {
		out.Units = append(out.Units, unitRow(sh.Inspection))
	}
	return out, nil
}

// Watch implements YieldService.
func (s *Yield) Watch(req *inspectpb.WatchRequest, stream grpc.ServerStreamingServer[inspectpb.WatchResponse]) error {
	f, err := filterOf(req.Filter)
	if err != nil {
		return inspectpb.ToStatus(err)
	}
	w, stop := s.deps.Feed.watch()
	defer stop()
	if err := stream.SendHeader(nil); err != nil { // from here on nothing is missed
		return err
	}
	for {
		select {
		case <-stream.Context().Done():
			return stream.Context().Err()
		case v, open := <-w.c:
			if !open {
				return nil
			}
			if !picks(f, v.Inspection) {
				continue
			}
			err := stream.Send(&inspectpb.WatchResponse{Unit: unitRow(v.Inspection), Missed: int32(s.deps.Feed.takeMissed(w)),
				Alarms: alarms(s.deps.Alarms.By(v.ID))})
			if err != nil {
				return err
			}
		}
	}
}
