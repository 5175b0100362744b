package main

import (
	"context"
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
)

// stationOf is a line and station that the server heard of since it started.
type stationOf struct {
	Line       string     `json:"line"`
	Station    string     `json:"station"`
	Heartbeat  *time.Time `json:"heartbeat"` // null = none
	Inspection *time.Time `json:"inspection"`
	State      string     `json:"state"` // ok or holding
	Because    []string   `json:"because"`
	Alarms     []string   `json:"alarms"`   // open ones
	Warnings   []string   `json:"warnings"` // readings that drift
}

func stationsCommand() *cobra.Command {
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "stations",
		Short: "List the stations heard of since the server started, and which of them hold",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		var d display
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewInspectionServiceClient(conn).ListStations(ctx, &inspectpb.ListStationsRequest{})
			if err == nil {
				d, err = stationsDisplay(r)
			}
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func stationsDisplay(r *inspectpb.ListStationsResponse) (display, error) {
	now := r.GetServerTime().AsTime()
	list := []stationOf{}
	d := display{head: []string{"line", "station", "heartbeat", "inspection", "state", "because", "alarms", "warnings"}}
	for _, s := range r.GetStations() {
		state, err := inspectpb.ToStationState(s.GetState())
		if err != nil {
			return d, err
		}
		one := stationOf{s.GetLine(), s.GetStation(), timeOf(s.GetHeartbeat()), timeOf(s.GetInspection()), state, orEmpty(s.GetBecause()), orEmpty(s.GetAlarms()), orEmpty(s.GetWarnings())}
		list = append(list, one)
		end := []string{one.State, strings.Join(one.Because, "; "), strings.Join(one.Alarms, "; "), strings.Join(one.Warnings, "; ")}
		d.rows = append(d.rows, join([]string{one.Line, one.Station, zulu(one.Heartbeat), zulu(one.Inspection)}, end))
		d.forEye = append(d.forEye, join([]string{one.Line, one.Station, ago(one.Heartbeat, now), ago(one.Inspection, now)}, end))
	}
	stages := outsideStages(r.GetOutsideStages())
	d.document = map[string]any{"server_time": now, "stations": list, "outside_stages": stages}
	for _, s := range stages {
		if s.State != "up" {
			d.after = append(d.after, fmt.Sprintf("stage %s is %s (%s), units that need it are held: %s", s.Type, s.State, ago(s.Since, now), s.Cause))
		}
	}
	return d.withEyeHead([]string{"line", "station", "last heartbeat", "last inspection", "state", "because", "alarms", "warnings"}), nil
}

// stageOf is a stage in a process of its own.
type stageOf struct {
	Type     string     `json:"type"`
	State    string     `json:"state"`
	Cause    string     `json:"cause"`
	Restarts int32      `json:"restarts"`
	Since    *time.Time `json:"since"`
}

func outsideStages(list []*inspectpb.OutsideStage) []stageOf {
	out := []stageOf{}
	for _, s := range list {
		out = append(out, stageOf{s.GetType(), s.GetState(), s.GetCause(), s.GetRestarts(), timeOf(s.GetSince())})
	}
	return out
}

// ago writes how long before the server's now something was.
func ago(t *time.Time, now time.Time) string {
	if t == nil {
		return "-"
	}
	return fmt.Sprintf("%v ago", max(now.Sub(*t), 0).Round(time.Second))
}
