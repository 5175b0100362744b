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

// alarmOf is something about a station that no single unit shows.
type alarmOf struct {
	Line    string     `json:"line"`
	Station string     `json:"station"`
	View    string     `json:"view"`
	Name    string     `json:"name"`
	XPx     float64    `json:"x_px"` // in the camera's frame as received
	YPx     float64    `json:"y_px"`
	Units   []string   `json:"units"` // that showed it, oldest first
	Raised  time.Time  `json:"raised"`
	Cleared *time.Time `json:"cleared"` // null = it is open
	Text    string     `json:"text"`
}

func newAlarms(list []*inspectpb.Alarm) []alarmOf {
	out := make([]alarmOf, 0, len(list))
	for _, a := range list {
		out = append(out, alarmOf{a.GetLine(), a.GetStation(), a.GetView(), a.GetName(), a.GetXPx(), a.GetYPx(), orEmpty(a.GetUnits()),
			a.GetRaised().AsTime(), timeOf(a.GetCleared()), a.GetText()})
	}
	return out
}

func (a alarmOf) standing() string {
	if a.Cleared == nil {
		return "raised"
	}
	return "cleared"
}

func alarmsCommand() *cobra.Command {
	var line, station string
	var all, asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "alarms",
		Short: "List the open alarms of stations, such as dirt on a lens; with --all those cleared too",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&line, "line", "", "only this line")
	c.Flags().StringVar(&station, "station", "", "only this station")
	c.Flags().BoolVar(&all, "all", false, "cleared ones too, newest first")
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		var d display
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewInspectionServiceClient(conn).ListAlarms(ctx, &inspectpb.ListAlarmsRequest{Line: line, Station: station, OpenOnly: !all, PageSize: 1000})
			d = alarmsDisplay(newAlarms(r.GetAlarms()))
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func alarmsDisplay(list []alarmOf) display {
	d := display{document: map[string]any{"alarms": list}, head: []string{"raised", "cleared", "line", "station", "view", "name", "x_px", "y_px", "units", "text"}}
	for _, a := range list {
		end := []string{a.Line, a.Station, a.View, a.Name, fmt.Sprintf("%.1f", a.XPx), fmt.Sprintf("%.1f", a.YPx), strings.Join(a.Units, " "), a.Text}
		d.rows = append(d.rows, join([]string{zulu(&a.Raised), zulu(a.Cleared)}, end))
		cleared := "open"
		if a.Cleared != nil {
			cleared = whenOf(*a.Cleared)
		}
		d.forEye = append(d.forEye, join([]string{whenOf(a.Raised), cleared}, end))
	}
	return d.withEyeHead([]string{"raised", "cleared", "line", "station", "view", "alarm", "x px", "y px", "units", ""})
}

// driftOf is one reading of a view over the latest units of a station.
type driftOf struct {
	Line     string    `json:"line"`
	Station  string    `json:"station"`
	View     string    `json:"view"`
	Name     string    `json:"name"`
	Value    float64   `json:"value"` // 1 = as calibrated
	HoldLow  float64   `json:"hold_below"`
	WarnLow  float64   `json:"warn_below"`
	WarnHigh float64   `json:"warn_above"`
	HoldHigh float64   `json:"hold_above"`
	State    string    `json:"state"` // steady, warning or hold
	PerHour  float64   `json:"per_hour"`
	Units    int32     `json:"units"`
	Unit     string    `json:"unit"` // the latest
	At       time.Time `json:"at"`
	Text     string    `json:"text"`
}

func driftCommand() *cobra.Command {
	var line, station string
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "drift",
		Short: "Show light, focus, scale and fixed pattern of each view against its calibration, and where they are going",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&line, "line", "", "only this line")
	c.Flags().StringVar(&station, "station", "", "only this station")
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		var d display
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewInspectionServiceClient(conn).ListDrift(ctx, &inspectpb.ListDriftRequest{Line: line, Station: station})
			d = driftDisplay(r)
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func driftDisplay(r *inspectpb.ListDriftResponse) display {
	list := []driftOf{}
	d := display{head: []string{"line", "station", "view", "name", "value", "hold_below", "warn_below", "warn_above", "hold_above", "state", "per_hour", "units", "unit", "at", "text"}}
	for _, x := range r.GetReadings() {
		p := x.GetLatest()
		one := driftOf{x.GetLine(), x.GetStation(), x.GetView(), x.GetName(), p.GetValue(), p.GetLow(), p.GetWarnLow(), p.GetWarnHigh(), p.GetHigh(),
			x.GetState(), x.GetPerHour(), x.GetUnits(), x.GetUnit(), x.GetAt().AsTime(), x.GetText()}
		list = append(list, one)
		start := []string{one.Line, one.Station, one.View, one.Name}
		bounds := []string{real64(one.HoldLow), real64(one.WarnLow), real64(one.WarnHigh), real64(one.HoldHigh)}
		d.rows = append(d.rows, join(start, []string{real64(one.Value)}, bounds, []string{one.State, real64(one.PerHour)}, numbers(one.Units), []string{one.Unit, zulu(&one.At), one.Text}))
		d.forEye = append(d.forEye, join(start, []string{fmt.Sprintf("%.4f", one.Value), fmt.Sprintf("%g–%g", one.WarnLow, one.WarnHigh), fmt.Sprintf("%g–%g", one.HoldLow, one.HoldHigh),
			one.State, fmt.Sprintf("%+.4f", one.PerHour)}, numbers(one.Units), []string{one.Unit, one.Text}))
	}
	d.document = map[string]any{"readings": list}
	return d.withEyeHead([]string{"line", "station", "view", "reading", "of calibrated", "warning beyond", "hold beyond", "state", "per hour", "units", "latest", ""})
}
