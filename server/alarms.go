package server

import (
	"context"
	"slices"

	"lapgate/proto/inspectpb"
	"lapgate/server/alarm"
	"lapgate/server/ledger"
)

// troubles are the open alarms of a station, and its readings that are not steady.
func (d Deps) troubles(ctx context.Context, where place) (open, warnings []string, err error) {
	list, err := d.Ledger.Alarms(ctx, ledger.AlarmFilter{Line: where.line, Station: where.station, OpenOnly: true}, 0)
	if err != nil {
		return nil, nil, err
	}
	for _, a := range list {
		open = append(open, a.Name+": "+a.Text)
	}
	drifts, err := d.Alarms.Drifts(ctx, where.line, where.station)
	for _, r := range drifts {
		if r.State != "steady" {
			warnings = append(warnings, "view "+r.View+": "+r.Text)
		}
	}
	return open, warnings, err
}

// ListAlarms implements InspectionService.
func (s *Inspection) ListAlarms(ctx context.Context, req *inspectpb.ListAlarmsRequest) (*inspectpb.ListAlarmsResponse, error) {
	list, err := s.deps.Ledger.Alarms(ctx, ledger.AlarmFilter{Line: req.Line, Station: req.Station, OpenOnly: req.OpenOnly}, int(req.PageSize))
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.ListAlarmsResponse{Alarms: alarms(list)}, nil
}

func alarms(list []ledger.Alarm) []*inspectpb.Alarm {
	var out []*inspectpb.Alarm
	for _, a := range list {
		out = append(out, &inspectpb.Alarm{Line: a.Line, Station: a.Station, View: a.View, Name: a.Name, XPx: a.XPx, YPx: a.YPx, Units: a.Units,
			Raised: inspectpb.FromTime(a.Raised), Cleared: inspectpb.FromTime(a.Cleared), Text: a.Text})
	}
	return out
}

// ListDrift implements InspectionService.
func (s *Inspection) ListDrift(ctx context.Context, req *inspectpb.ListDriftRequest) (*inspectpb.ListDriftResponse, error) {
	out := &inspectpb.ListDriftResponse{}
	for _, at := range s.stationsFor(req) {
		if req.Line != "" && req.Line != at.line || req.Station != "" && req.Station != at.station {
			continue
		}
		list, err := s.deps.Alarms.Drifts(ctx, at.line, at.station)
		if err != nil {
			return nil, inspectpb.ToStatus(err)
		}
		for _, d := range list {
			out.Readings = append(out.Readings, driftOf(d))
		}
	}
	return out, nil
}

// stationsFor are the stations heard of since the server started, and the one asked for by
// name.
func (s *Inspection) stationsFor(req *inspectpb.ListDriftRequest) []stationSight {
	list := s.deps.Stations.list()
	named := place{req.Line, req.Station}
	if req.Line != "" && req.Station != "" && !slices.ContainsFunc(list, func(at stationSight) bool { return at.place == named }) {
		list = append(list, stationSight{place: named})
	}
	return list
}

func driftOf(d alarm.Drift) *inspectpb.Drift {
	return &inspectpb.Drift{Line: d.Line, Station: d.Station, View: d.View, Name: d.Latest.Name, Latest: inspectpb.FromProof(d.Latest), Unit: d.Unit,
		At: inspectpb.FromTime(d.At), Units: int32(d.Units), PerHour: d.PerHour, State: d.State, Text: d.Text}
}
