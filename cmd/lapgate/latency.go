package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
)

// latencyOf is how long verdicts took at a station.
type latencyOf struct {
	Line    string  `json:"line"`
	Station string  `json:"station"`
	N       int32   `json:"n"`
	P50MS   float64 `json:"p50_ms"`
	P90MS   float64 `json:"p90_ms"`
	P99MS   float64 `json:"p99_ms"`
	MaxMS   float64 `json:"max_ms"`
}

func latencyCommand() *cobra.Command {
	var f filterFlags
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "latency",
		Short: "Show how long verdicts took by station, from the last byte received to the verdict",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	f.add(c.Flags())
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		filter, err := f.filter()
		if err != nil {
			return err
		}
		var d display
		err = ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewYieldServiceClient(conn).GetLatency(ctx, &inspectpb.GetLatencyRequest{Filter: filter})
			d = latencyDisplay(r)
			return err
		})
		if err != nil {
			return err
		}
		return d.write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func latencyDisplay(r *inspectpb.GetLatencyResponse) display {
	list := []latencyOf{}
	d := display{head: []string{"line", "station", "n", "p50_ms", "p90_ms", "p99_ms", "max_ms"}}
	for _, s := range r.GetStations() {
		one := latencyOf{s.GetLine(), s.GetStation(), s.GetN(), s.GetP50Ms(), s.GetP90Ms(), s.GetP99Ms(), s.GetMaxMs()}
		list = append(list, one)
		start := join([]string{one.Line, one.Station}, numbers(one.N))
		d.rows = append(d.rows, join(start, []string{real64(one.P50MS), real64(one.P90MS), real64(one.P99MS), real64(one.MaxMS)}))
		d.forEye = append(d.forEye, join(start, []string{ms(one.P50MS), ms(one.P90MS), ms(one.P99MS), ms(one.MaxMS)}))
	}
	d.document = map[string]any{"stations": list}
	return d.withEyeHead([]string{"line", "station", "n", "p50 ms", "p90 ms", "p99 ms", "max ms"})
}

func ms(v float64) string { return fmt.Sprintf("%.1f", v) }
