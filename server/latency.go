package server

import (
	"context"

	"lapgate/proto/inspectpb"
	"lapgate/server/yield"
)

// GetLatency implements YieldService.
func (s *Yield) GetLatency(ctx context.Context, req *inspectpb.GetLatencyRequest) (*inspectpb.GetLatencyResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	list, err := s.deps.Ledger.Latencies(ctx, f)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.GetLatencyResponse{}
	for _, at := range list {
		row := &inspectpb.Latency{Line: at.Line, Station: at.Station, N: int32(len(at.MS))}
		for _, p := range []struct {
			share float64
			into  *float64
		}{{0.5, &row.P50Ms}, {0.9, &row.P90Ms}, {0.99, &row.P99Ms}, {1, &row.MaxMs}} {
			if *p.into, err = yield.Percentile(at.MS, p.share); err != nil {
				return nil, inspectpb.ToStatus(err)
			}
		}
		out.Stations = append(out.Stations, row)
	}
	return out, nil
}
