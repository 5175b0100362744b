package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
)

func watchCommand() *cobra.Command {
	var f filterFlags
	var asJSON bool
	c := &cobra.Command{
		Use:   "watch",
		Short: "Show each inspection as the ledger takes it, until interrupted",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	f.add(c.Flags())
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON document a line")
	c.RunE = func(c *cobra.Command, _ []string) error {
		filter, err := f.filter()
		if err != nil {
			return err
		}
		err = ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			stream, err := inspectpb.NewYieldServiceClient(conn).Watch(ctx, &inspectpb.WatchRequest{Filter: filter})
			if err != nil {
				return err
			}
			return watchAll(stream, c.OutOrStdout(), asJSON)
		})
		if c.Context().Err() != nil {
			return nil // told to stop
		}
		return err
	}
	return c
}

func watchAll(stream grpc.ServerStreamingClient[inspectpb.WatchResponse], w io.Writer, asJSON bool) error {
	for {
		r, err := stream.Recv()
		if errors.Is(err, io.EOF) {
			return errors.New("the server ended the stream")
		}
		if err != nil {
			return err
		}
		row, err := newRow(r.GetUnit())
		if err != nil {
			return err
		}
		row.Missed = r.GetMissed()
		row.Alarms = newAlarms(r.GetAlarms())
		if err := printRow(w, row, asJSON); err != nil {
			return err
		}
	}
}

func printRow(w io.Writer, row rowOf, asJSON bool) error {
	if asJSON {
		text, err := json.Marshal(row)
		if err != nil {
			return err
		}
		_, err = w.Write(append(text, '\n'))
		return err
	}
	for _, a := range row.Alarms {
		fmt.Fprintf(w, "%s  alarm  line %s  station %s  %s: %s\n", whenOf(row.Judged), a.Line, a.Station, a.standing(), a.Text)
	}
	if row.Missed > 0 {
		fmt.Fprintf(w, "(%d inspections missed)\n", row.Missed)
	}
	_, err := fmt.Fprintf(w, "%s  %-6s  %s %s  line %s  station %s  attempt %d  coverage %s  %s\n", whenOf(row.Judged), row.Verdict,
		row.Part, row.Unit, row.Line, row.Station, row.Attempt, percent(row.Coverage), strings.Join(row.Reasons, ", "))
	return err
}
