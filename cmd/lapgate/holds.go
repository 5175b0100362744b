package main

import (
	"context"
	"fmt"
	"strings"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// pageSize is how many records are asked for at once.
const pageSize = 200

func holdsCommand() *cobra.Command {
	var req inspectpb.ListHoldsRequest
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "holds",
		Short: "List the open holds, oldest first",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&req.Part, "part", "", "only this part")
	c.Flags().StringVar(&req.Line, "line", "", "only this line")
	c.Flags().StringVar(&req.Lot, "lot", "", "only this lot")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON document")
	c.Flags().BoolVar(&asCSV, "csv", false, "print CSV with a header line")
	c.MarkFlagsMutuallyExclusive("json", "csv")
	c.RunE = func(c *cobra.Command, _ []string) error {
		var list []inspectionOf
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) (err error) {
			list, err = allHolds(ctx, inspectpb.NewInspectionServiceClient(conn), &req)
			return err
		})
		if err != nil {
			return err
		}
		return inspectionsDisplay("holds", list).write(c.OutOrStdout(), asJSON, asCSV)
	}
	return c
}

func allHolds(ctx context.Context, client inspectpb.InspectionServiceClient, req *inspectpb.ListHoldsRequest) ([]inspectionOf, error) {
	out := []inspectionOf{}
	req.PageSize = pageSize
	for {
		r, err := client.ListHolds(ctx, req)
		if err != nil {
			return nil, err
		}
		page, err := newInspections(r.GetHolds())
		if err != nil {
			return nil, err
		}
		out = append(out, page...)
		if req.PageToken = r.GetNextPageToken(); req.PageToken == "" {
			return out, nil
		}
	}
}

// inspectionsDisplay lists inspections, in the document under the name given.
func inspectionsDisplay(name string, list []inspectionOf) display {
	d := display{document: map[string]any{name: list},
		head: []string{"inspection_id", "part", "lot", "unit", "line", "station", "attempt", "judged", "verdict", "reasons"}}
	for _, i := range list {
		id := i.Identity
		row := []string{i.InspectionID, id.Part, id.Lot, id.Unit, id.Line, id.Station, fmt.Sprint(id.Attempt), i.Judged.Format("2006-01-02T15:04:05Z07:00"),
			string(i.Verdict), strings.Join(i.reasons(), "; ")}
		d.rows = append(d.rows, row)
		d.forEye = append(d.forEye, append(append([]string{}, row[:7]...), whenOf(i.Judged), row[8], row[9]))
	}
	return d.withEyeHead([]string{"inspection", "part", "lot", "unit", "line", "station", "attempt", "judged", "verdict", "reasons"})
}

func disposeCommand() *cobra.Command {
	var req inspectpb.DisposeHoldRequest
	var asJSON bool
	c := &cobra.Command{
		Use:   "dispose INSPECTION accept|reject|clean|rework --person NAME --reason TEXT",
		Short: "Close a hold with a named person's decision; the machine's verdict stays on record",
		Args:  cobra.ExactArgs(2),
	}
	server := serverFlag(c)
	c.Flags().StringVar(&req.Person, "person", "", "who decided")
	c.Flags().StringVar(&req.Reason, "reason", "", "why")
	c.Flags().BoolVar(&asJSON, "json", false, "print the closed hold as one JSON document")
	c.RunE = func(c *cobra.Command, args []string) error {
		if strings.TrimSpace(req.Person) == "" || strings.TrimSpace(req.Reason) == "" {
			return pipeline.Invalid("person and reason: got %q and %q, want both: a hold is closed by somebody for a reason", req.Person, req.Reason)
		}
		var err error
		if req.Disposition, err = inspectpb.FromDisposition(args[1]); err != nil {
			return err
		}
		req.InspectionId = args[0]
		var i inspectionOf
		err = ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewInspectionServiceClient(conn).DisposeHold(ctx, &req)
			if err == nil {
				i, err = newInspection(r.GetInspection())
			}
			return err
		})
		if err != nil {
			return err
		}
		if asJSON {
			return writeJSON(c.OutOrStdout(), i)
		}
		_, err = fmt.Fprintf(c.OutOrStdout(), "inspection %s of unit %s: %s by %s\n", i.InspectionID, i.Unit, args[1], req.Person)
		return err
	}
	return c
}
