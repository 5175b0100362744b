package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
)

func changeCommand() *cobra.Command {
	var req inspectpb.NoteChangeRequest
	c := &cobra.Command{
		Use:   "change lamp|lens|camera --line NAME --station NAME --person NAME --reason TEXT",
		Short: "Record that something of a station was changed: its masters are due before it judges on",
		Args:  cobra.ExactArgs(1),
	}
	server := serverFlag(c)
	c.Flags().StringVar(&req.Line, "line", "", "line")
	c.Flags().StringVar(&req.Station, "station", "", "station")
	c.Flags().StringVar(&req.Person, "person", "", "who changed it")
	c.Flags().StringVar(&req.Reason, "reason", "", "why")
	c.RunE = func(c *cobra.Command, args []string) error {
		req.What = args[0]
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			_, err := inspectpb.NewMasterServiceClient(conn).NoteChange(ctx, &req)
			return err
		})
		if err != nil {
			return err
		}
		_, err = fmt.Fprintf(c.OutOrStdout(), "line %s, station %s: %s changed; show its masters\n", req.Line, req.Station, req.What)
		return err
	}
	return c
}
