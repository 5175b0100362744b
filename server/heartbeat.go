package server

import (
	"context"

	"lapgate/proto/inspectpb"
)

// Heartbeat implements InspectionService.
func (s *Inspection) Heartbeat(ctx context.Context, req *inspectpb.HeartbeatRequest) (*inspectpb.HeartbeatResponse, error) {
	where := place{req.Line, req.Station}
	now := s.deps.Now()
	if err := s.deps.Stations.heard(where, now); err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	list, err := s.deps.standings(ctx, "", req.Line, req.Station)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	why := because(list)[where]
	return &inspectpb.HeartbeatResponse{ServerTime: inspectpb.FromTime(now), State: stationState(why), Because: why}, nil
}

func stationState(why []string) inspectpb.StationState {
	if len(why) > 0 {
		return inspectpb.StationState_STATION_STATE_HOLDING
	}
	return inspectpb.StationState_STATION_STATE_OK
}

// ListStations implements InspectionService.
func (s *Inspection) ListStations(ctx context.Context, _ *inspectpb.ListStationsRequest) (*inspectpb.ListStationsResponse, error) {
	list, err := s.deps.standings(ctx, "", "", "")
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	all := because(list)
	out := &inspectpb.ListStationsResponse{ServerTime: inspectpb.FromTime(s.deps.Now()), OutsideStages: s.deps.outsideStages()}
	for _, at := range s.deps.Stations.list() {
		why := all[at.place]
		row := &inspectpb.Station{Line: at.line, Station: at.station, Heartbeat: inspectpb.FromTime(at.heartbeat),
			Inspection: inspectpb.FromTime(at.inspection), State: stationState(why), Because: why}
		if row.Alarms, row.Warnings, err = s.deps.troubles(ctx, at.place); err != nil {
			return nil, inspectpb.ToStatus(err)
		}
		out.Stations = append(out.Stations, row)
	}
	return out, nil
}
