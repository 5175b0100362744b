package main

import (
	"context"
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// approvalOf is an approval and what it is of.
type approvalOf struct {
	Hash      string    `json:"hash"`
	Author    string    `json:"author"`
	Approver  string    `json:"approver"`
	Reason    string    `json:"reason"`
	Effective string    `json:"effective"`
	At        time.Time `json:"at"`
	Part      string    `json:"part,omitempty"`
	Revision  string    `json:"revision,omitempty"`
	Surface   string    `json:"surface,omitempty"`
	File      string    `json:"file,omitempty"`
}

func newApproval(a *inspectpb.Approval) (approvalOf, error) {
	effective, err := inspectpb.ToEffective(a.GetEffective())
	return approvalOf{Hash: a.GetHash(), Author: a.GetAuthor(), Approver: a.GetApprover(), Reason: a.GetReason(), Effective: effective, At: a.GetAt().AsTime()}, err
}

func approveCommand() *cobra.Command {
	var a inspectpb.Approval
	var effective string
	var asJSON bool
	c := &cobra.Command{
		Use:   "approve HASH --author NAME --person NAME --reason TEXT --effective now|next-lot",
		Short: "Let a saved recipe judge units: a second person's word, kept for ever",
		Long: `Let a saved recipe judge units. HASH is that of its text; "lapgate recipes" lists the
recipes that wait. The approver (--person) must not be the author. With --effective
next-lot the recipe judges lots that a line and station have not seen before; units
without a lot are one lot. To go back, approve the earlier recipe again.

Names are recorded as they are given.`,
		Args: cobra.ExactArgs(1),
	}
	server := serverFlag(c)
	c.Flags().StringVar(&a.Author, "author", "", "who wrote the recipe")
	c.Flags().StringVar(&a.Approver, "person", "", "who approves it")
	c.Flags().StringVar(&a.Reason, "reason", "", "why it may judge")
	c.Flags().StringVar(&effective, "effective", "", "now or next-lot")
	c.Flags().BoolVar(&asJSON, "json", false, "print the approval as one JSON document")
	c.RunE = func(c *cobra.Command, args []string) error {
		a.Hash, a.Effective = args[0], inspectpb.FromEffective(strings.ReplaceAll(effective, "-", "_"))
		if a.Effective == inspectpb.Effective_EFFECTIVE_UNSPECIFIED {
			return pipeline.Invalid("effective: got %q, want now or next-lot", effective)
		}
		var done approvalOf
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewRecipeServiceClient(conn).ApproveRecipe(ctx, &inspectpb.ApproveRecipeRequest{Approval: &a})
			if err == nil {
				done, err = newApproval(r.GetApproval())
			}
			return err
		})
		if err != nil {
			return err
		}
		if asJSON {
			return writeJSON(c.OutOrStdout(), done)
		}
		_, err = fmt.Fprintf(c.OutOrStdout(), "recipe %s: approved by %s, written by %s, effective %s\n", done.Hash, done.Approver, done.Author, effective)
		return err
	}
	return c
}

func approvalsCommand() *cobra.Command {
	var part string
	var asJSON, asCSV bool
	c := &cobra.Command{
		Use:   "approvals",
		Short: "List who approved which recipe, oldest first",
		Args:  cobra.NoArgs,
	}
	server := serverFlag(c)
	c.Flags().StringVar(&part, "part", "", "only this part")
	tableFlags(c, &asJSON, &asCSV)
	c.RunE = func(c *cobra.Command, _ []string) error {
		var d display
		err := ask(c.Context(), *server, func(ctx context.Context, conn *grpc.ClientConn) error {
			r, err := inspectpb.NewRecipeServiceClient(conn).ListApprovals(ctx, &inspectpb.ListApprovalsRequest{Part: part})
			if err == nil {
				d, err = approvalsDisplay(r)
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

// tableFlags adds --json and --csv.
func tableFlags(c *cobra.Command, asJSON, asCSV *bool) {
	c.Flags().BoolVar(asJSON, "json", false, "print one JSON document")
	c.Flags().BoolVar(asCSV, "csv", false, "print CSV with a header line")
	c.MarkFlagsMutuallyExclusive("json", "csv")
}

func approvalsDisplay(r *inspectpb.ListApprovalsResponse) (display, error) {
	list := []approvalOf{}
	d := display{head: []string{"at", "part", "revision", "surface", "file", "effective", "author", "approver", "reason", "hash"}}
	for _, p := range r.GetApprovals() {
		a, err := newApproval(p.GetApproval())
		if err != nil {
			return d, err
		}
		a.Part, a.Revision, a.Surface, a.File = p.GetPart(), p.GetRevision(), p.GetSurface(), p.GetFile()
		list = append(list, a)
		rest := []string{a.Part, a.Revision, a.Surface, a.File, a.Effective, a.Author, a.Approver, a.Reason, a.Hash}
		d.rows = append(d.rows, join([]string{a.At.Format(time.RFC3339)}, rest))
		d.forEye = append(d.forEye, join([]string{whenOf(a.At)}, rest))
	}
	d.document = map[string]any{"approvals": list}
	return d.withEyeHead(d.head), nil
}
