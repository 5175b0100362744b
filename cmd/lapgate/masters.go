package main

import (
	"context"
	"fmt"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"
	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// mastersFlags is the command line of the masters verb.
type mastersFlags struct {
	part, line, station, chart, from string
	most                             int32
	json, csv                        bool
}

func mastersCommand() *cobra.Command {
	var f mastersFlags
	c := &cobra.Command{
		Use:   "masters [UNIT]",
		Short: "Show how masters stand, or the history of one and its chart",
		Long: `Show when each master is due, whether it failed or is overdue, and whether its measure
is on its way to a bound. With the id of a master: its showings, newest first, and with
--chart a picture of them.`,
		Args: cobra.MaximumNArgs(1),
	}
	server := serverFlag(c)
	fs := c.Flags()
	fs.StringVar(&f.part, "part", "", "only this part")
	fs.StringVar(&f.line, "line", "", "only this line")
	fs.StringVar(&f.station, "station", "", "only this station")
	fs.StringVar(&f.from, "from", "", "with a master: only showings judged at or after")
	fs.Int32Var(&f.most, "most", 100, "with a master: at most so many showings, up to 1000")
	fs.StringVar(&f.chart, "chart", "", "with a master: write an SVG picture of its measure over time to this file")
	tableFlags(c, &f.json, &f.csv)
	c.RunE = func(c *cobra.Command, args []string) error {
		if len(args) == 0 && (f.chart != "" || f.from != "") {
			return pipeline.Invalid("masters: --chart and --from want the id of a master")
		}
		var d display
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
			client := inspectpb.NewMasterServiceClient(conn)
			if len(args) == 0 {
				d, err = f.standing(ctx, client)
			} else {
				d, err = f.history(ctx, client, args[0])
			}
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), f.json, f.csv)
	}
	return c
}

// masterOf is how a master stands at a station.
type masterOf struct {
	Part     string           `json:"part"`
	Surface  string           `json:"surface"`
	Line     string           `json:"line"`
	Station  string           `json:"station"`
	Master   string           `json:"master"`
	Expect   pipeline.Verdict `json:"expect"`
	View     string           `json:"view"`
	Kind     string           `json:"kind"`
	Measure  string           `json:"measure"`
	Due      *time.Time       `json:"due"`    // null = due for another reason than the clock
	Reason   string           `json:"reason"` // empty = all is well
	Text     string           `json:"text"`
	LastPass *time.Time       `json:"last_pass"`
	LastFail *time.Time       `json:"last_fail"`
	Warning  string           `json:"warning"`
}

// timeOf is nil for none.
func timeOf(t *timestamppb.Timestamp) *time.Time {
	if t == nil {
		return nil
	}
	at := t.AsTime()
	return &at
}

func whenOrNone(t *time.Time) string {
	if t == nil {
		return "-"
	}
	return whenOf(*t)
}

func (f *mastersFlags) standing(ctx context.Context, client inspectpb.MasterServiceClient) (display, error) {
	r, err := client.ListMasters(ctx, &inspectpb.ListMastersRequest{Part: f.part, Line: f.line, Station: f.station})
	if err != nil {
		return display{}, err
	}
	list := []masterOf{}
	d := display{head: []string{"line", "station", "part", "surface", "master", "expect", "due", "last_pass", "last_fail", "reason", "text", "warning"}}
	for _, m := range r.GetMasters() {
		expect, err := inspectpb.ToVerdict(m.GetExpect())
		if err != nil {
			return d, err
		}
		one := masterOf{m.GetPart(), m.GetSurface(), m.GetLine(), m.GetStation(), m.GetMaster(), expect, m.GetView(), m.GetKind(), m.GetMeasure(),
			timeOf(m.GetDue()), m.GetReason(), m.GetText(), timeOf(m.GetLastPass()), timeOf(m.GetLastFail()), m.GetWarning()}
		list = append(list, one)
		start := []string{one.Line, one.Station, one.Part, one.Surface, one.Master, string(one.Expect)}
		d.rows = append(d.rows, join(start, []string{zulu(one.Due), zulu(one.LastPass), zulu(one.LastFail), one.Reason, one.Text, one.Warning}))
		d.forEye = append(d.forEye, join(start, []string{dueText(one), whenOrNone(one.LastPass), whenOrNone(one.LastFail), standingText(one)}))
	}
	d.document = map[string]any{"masters": list}
	return d.withEyeHead([]string{"line", "station", "part", "surface", "master", "expect", "due", "last pass", "last fail", "standing"}), nil
}

// zulu writes a time for a program, or nothing.
func zulu(t *time.Time) string {
	if t == nil {
		return ""
	}
	return t.UTC().Format(time.RFC3339)
}

func dueText(m masterOf) string {
	if m.Due == nil {
		return "now"
	}
	return whenOf(*m.Due)
}

func standingText(m masterOf) string {
	switch {
	case m.Reason != "":
		return fmt.Sprintf("%s: %s", m.Reason, m.Text)
	case m.Warning != "":
		return "ok; warning: " + m.Warning
	}
	return "ok"
}
