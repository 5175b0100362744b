package server

import (
	"context"
	"strconv"
	"time"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
	"lapgate/server/masters"
)

// Masters implements inspectpb.MasterServiceServer.
type Masters struct {
	inspectpb.UnimplementedMasterServiceServer
	deps Deps
}

// driftHistory is how many showings are looked at for a drift.
const driftHistory = 50

// ListMasters implements MasterService.
func (s *Masters) ListMasters(ctx context.Context, req *inspectpb.ListMastersRequest) (*inspectpb.ListMastersResponse, error) {
	list, err := s.deps.standings(ctx, req.Part, req.Line, req.Station)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.ListMastersResponse{}
	for _, at := range list {
		for _, m := range at.states {
			row := masterState(at.MasterPlace, m)
			if row.Warning, err = s.drift(ctx, at.MasterPlace, m.Master.Unit); err != nil {
				return nil, inspectpb.ToStatus(err)
			}
			out.Masters = append(out.Masters, row)
		}
	}
	return out, nil
}

func (s *Masters) drift(ctx context.Context, p ledger.MasterPlace, master string) (string, error) {
	history, err := s.deps.Ledger.Checks(ctx, ledger.CheckFilter{Part: p.Part, Line: p.Line, Station: p.Station, Master: master}, driftHistory)
	if err != nil {
		return "", err
	}
	change, err := s.deps.Ledger.LastChange(ctx, p.Line, p.Station)
	if err != nil && pipeline.KindOf(err) != pipeline.NotFoundKind {
		return "", err
	}
	return masters.Drift(history, change.At), nil // the zero time without a change
}

func masterState(p ledger.MasterPlace, s masters.State) *inspectpb.MasterState {
	row := &inspectpb.MasterState{Part: p.Part, Surface: p.Surface, Line: p.Line, Station: p.Station, Master: s.Master.Unit,
		Expect: inspectpb.FromVerdict(s.Master.Expect), View: s.Master.View, Kind: string(s.Master.Kind), Measure: s.Master.Measure,
		Due: inspectpb.FromTime(s.Due), Reason: s.Reason, Text: s.Text}
	if c := s.History.OtherPass; c != nil {
		row.LastPass = inspectpb.FromTime(c.At)
	}
	if c := s.History.Fail; c != nil {
		row.LastFail = inspectpb.FromTime(c.At)
	}
	return row
}

// ListChecks implements MasterService.
func (s *Masters) ListChecks(ctx context.Context, req *inspectpb.ListChecksRequest) (*inspectpb.ListChecksResponse, error) {
	f := ledger.CheckFilter{Part: req.Part, Line: req.Line, Station: req.Station, Master: req.Master}
	var err error
	if f.From, err = inspectpb.ToTime("from", req.From); err == nil {
		f.To, err = inspectpb.ToTime("to", req.To)
	}
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	list, err := s.deps.Ledger.Checks(ctx, f, int(req.PageSize))
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.ListChecksResponse{}
	for _, c := range list {
		out.Checks = append(out.Checks, masterCheck(c))
	}
	return out, nil
}

func masterCheck(c ledger.MasterCheck) *inspectpb.MasterCheck {
	return &inspectpb.MasterCheck{InspectionId: strconv.FormatInt(c.InspectionID, 10), Part: c.Part, Surface: c.Surface, Line: c.Line, Station: c.Station,
		Master: c.Master, View: c.View, Kind: string(c.Kind), Expected: inspectpb.FromVerdict(c.Expected), Verdict: inspectpb.FromVerdict(c.Verdict),
		Result: inspectpb.FromCheckResult(string(c.Result)), Why: c.Why, Measure: c.Measure, Value: c.Value, Low: c.Low, High: c.High,
		Recipe: c.Recipe, At: inspectpb.FromTime(c.At), Conditions: c.Conditions}
}

// ListSuspects implements MasterService.
func (s *Masters) ListSuspects(ctx context.Context, req *inspectpb.ListSuspectsRequest) (*inspectpb.ListSuspectsResponse, error) {
	f := ledger.Filter{Part: req.Part, Lot: req.Lot, Line: req.Line, Station: req.Station}
	list, next, err := s.deps.Ledger.Suspects(ctx, f, ledger.Page{Limit: int(req.PageSize), After: req.PageToken})
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	out := &inspectpb.ListSuspectsResponse{NextPageToken: next}
	for _, one := range list {
		out.Suspects = append(out.Suspects, &inspectpb.Suspect{InspectionId: strconv.FormatInt(one.ID, 10), Identity: inspectpb.FromIdentity(one.Identity),
			Verdict: inspectpb.FromVerdict(one.Judgement.Verdict), Judged: inspectpb.FromTime(one.Judged), Master: one.Master, Cause: string(one.Cause),
			Why: one.Why, At: inspectpb.FromTime(one.At)})
	}
	return out, nil
}

// NoteChange implements MasterService.
func (s *Masters) NoteChange(ctx context.Context, req *inspectpb.NoteChangeRequest) (*inspectpb.NoteChangeResponse, error) {
	err := s.deps.People.mayAct(req.Person)
	if err == nil {
		err = s.deps.Ledger.Change(ctx, ledger.StationChange{Line: req.Line, Station: req.Station, What: req.What, Person: req.Person, Reason: req.Reason,
			At: s.deps.Now().Truncate(time.Microsecond)})
	}
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.NoteChangeResponse{}, nil
}
