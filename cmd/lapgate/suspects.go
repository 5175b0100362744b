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

// suspectOf is an inspection that a master put in doubt.
type suspectOf struct {
	InspectionID string `json:"inspection_id"`
	pipeline.Identity
	Verdict pipeline.Verdict `json:"verdict"`
	Judged  time.Time        `json:"judged"`
	Master  string           `json:"master"`
	Cause   string           `json:"cause"`
	Why     string           `json:"why"`
	At      time.Time        `json:"at"`
}

// suspicionOf is one master that puts an inspection in doubt.
type suspicionOf struct {
	Master string    `json:"master"`
	Cause  string    `json:"cause"`
	Why    string    `json:"why"`
	At     time.Time `json:"at"`
}

func newSuspicions(list []*inspectpb.Suspicion) []suspicionOf {
	out := []suspicionOf{}
	for _, s := range list {
		out = append(out, suspicionOf{s.GetMaster(), s.GetCause(), s.GetWhy(), s.GetAt().AsTime()})
	}
	return out
}

func suspectsCommand() *cobra.Command {
	var req inspectpb.ListSuspectsRequest
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "suspects",
		Short: "List the units since the last pass of a master that failed or was overdue",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&req.Part, "part", "", "only this part")
	c.Flags().StringVar(&req.Lot, "lot", "", "only this lot")
	c.Flags().StringVar(&req.Line, "line", "", "only this line")
	c.Flags().StringVar(&req.Station, "station", "", "only this station")
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		var list []suspectOf
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
			list, err = allSuspects(ctx, inspectpb.NewMasterServiceClient(conn), &req)
			return err
		})
		if err != nil {
			return err
		}
		return suspectsDisplay(list).write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func allSuspects(ctx context.Context, client inspectpb.MasterServiceClient, req *inspectpb.ListSuspectsRequest) ([]suspectOf, error) {
	out := []suspectOf{}
	req.PageSize = pageSize
	for {
		r, err := client.ListSuspects(ctx, req)
		if err != nil {
			return nil, err
		}
		for _, s := range r.GetSuspects() {
			one, err := newSuspect(s)
			if err != nil {
				return nil, err
			}
			out = append(out, one)
		}
		if req.PageToken = r.GetNextPageToken(); req.PageToken == "" {
			return out, nil
		}
	}
}

func newSuspect(s *inspectpb.Suspect) (suspectOf, error) {
	out := suspectOf{InspectionID: s.GetInspectionId(), Judged: s.GetJudged().AsTime(), Master: s.GetMaster(), Cause: s.GetCause(), Why: s.GetWhy(), At: s.GetAt().AsTime()}
	var err error
	if out.Identity, err = inspectpb.ToIdentity(s.GetIdentity()); err != nil {
		return out, err
	}
	out.Verdict, err = inspectpb.ToVerdict(s.GetVerdict())
	return out, err
}

func suspectsDisplay(list []suspectOf) display {
	d := display{document: map[string]any{"suspects": list},
		head: []string{"inspection_id", "part", "lot", "unit", "line", "station", "attempt", "judged", "verdict", "master", "cause", "why", "at"}}
	for _, s := range list {
		start := []string{s.InspectionID, s.Part, s.Lot, s.Unit, s.Line, s.Station, fmt.Sprint(s.Attempt)}
		d.rows = append(d.rows, join(start, []string{s.Judged.Format(time.RFC3339), string(s.Verdict), s.Master, s.Cause, s.Why, s.At.Format(time.RFC3339)}))
		d.forEye = append(d.forEye, join(start, []string{whenOf(s.Judged), string(s.Verdict), s.Master, s.Cause, s.Why, whenOf(s.At)}))
	}
	return d.withEyeHead([]string{"inspection", "part", "lot", "unit", "line", "station", "attempt", "judged", "verdict", "master", "cause", "why", "marked"})
}
