package main

import (
	"context"
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

func unitCommand() *cobra.Command {
	var part string
	var asJSON bool
	c := &cobra.Command{
		Use:   "unit ID",
		Short: "Tell the whole story of a unit: every showing, what was found, who decided what",
		Args:  cobra.ExactArgs(1),
	}
	server := serverFlag(c)
	c.Flags().StringVar(&part, "part", "", "part number, where several parts have a unit of this id")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON document")
	c.RunE = func(c *cobra.Command, args []string) error {
		list, err := unitStory(c.Context(), *server, part, args[0])
		if err != nil {
			return err
		}
		if asJSON {
			return writeJSON(c.OutOrStdout(), map[string]any{"unit": args[0], "inspections": list})
		}
		for _, i := range list {
			tell(c.OutOrStdout(), i, func(id int) string { return markOf(list, i, id) })
		}
		return nil
	}
	return c
}

// unitStory asks for a unit's inspections, oldest first; none is an error.
func unitStory(ctx context.Context, server, part, unit string) ([]inspectionOf, error) {
	var list []inspectionOf
	err := ask(ctx, server, func(ctx context.Context, conn *grpc.ClientConn) error {
		r, err := inspectpb.NewInspectionServiceClient(conn).GetUnit(ctx, &inspectpb.GetUnitRequest{Part: part, Unit: unit})
		if err != nil {
			return err
		}
		list, err = newInspections(r.GetInspections())
		return err
	})
	if err == nil && len(list) == 0 {
		err = pipeline.NotFound("unit %s: the ledger has no inspection of it", unit)
	}
	return list, err
}

// tell prints one inspection for a person; mark is what later showings say of a defect.
func tell(w io.Writer, i inspectionOf, mark func(id int) string) {
	id := i.Identity
	fmt.Fprintf(w, "%s  part %s%s  attempt %d  inspection %s: %s\n", id.Unit, id.Part, named(" revision ", id.Revision), id.Attempt, i.InspectionID, i.Verdict)
	fmt.Fprintf(w, "  captured %s, judged %s, %.0f ms after the last frame%s\n", whenOf(i.Captured), whenOf(i.Judged), i.LatencyMS, late(i.Late))
	fmt.Fprintf(w, "  line %s, station %s, purpose %s%s%s%s\n", id.Line, id.Station, id.Purpose,
		named(", lot ", id.Lot), named(", process ", id.Process), named(", surface ", id.Surface))
	e := i.Evidence
	fmt.Fprintf(w, "  inspected %s of the region, %d defects\n", percent(e.Coverage), len(e.Defects))
	for _, f := range e.Failures {
		fmt.Fprintf(w, "  failure: %s%s%s: %s\n", f.Reason, named(", view ", f.View), named(", stage ", f.Stage), f.Detail)
	}
	for _, v := range e.Views {
		tellView(w, v)
	}
	tellDefects(w, e.Defects, mark)
	tellRegistration(w, i.Registration)
	for _, j := range i.Judgements {
		tellJudgement(w, j)
	}
	for _, d := range i.Dispositions {
		fmt.Fprintf(w, "  %s  %s decided: %s (%s)\n", whenOf(d.At), d.Person, d.Disposition, d.Reason)
	}
	for _, s := range i.Suspicions {
		fmt.Fprintf(w, "  %s  suspect: master %s %s: %s\n", whenOf(s.At), s.Master, s.Cause, s.Why)
	}
	for _, o := range i.Outcomes {
		fmt.Fprintf(w, "  %s  the line put it into the %s bin%s%s\n", whenOf(o.At), o.Bin, unconfirmed(o.Confirmed), mismatch(i.Verdict, o.Bin))
	}
}

func tellView(w io.Writer, v pipeline.ViewEvidence) {
	fmt.Fprintf(w, "  view %s: %s inspected, background %.1f DN, noise %.2f DN, %d defects\n", v.Name, percent(v.Coverage.Share),
		v.Coverage.Background, v.Coverage.Noise, len(v.Defects))
	for _, p := range v.Proofs {
		switch {
		case !p.OK:
			fmt.Fprintf(w, "    not proven: %s: %s\n", p.Name, p.Reason)
		case p.Warning != "":
			fmt.Fprintf(w, "    warning: %s\n", p.Warning)
		case p.WarnHigh > 0:
			fmt.Fprintf(w, "    %s %.4g of what was calibrated (warning beyond %.4g to %.4g, hold beyond %.4g to %.4g)\n", p.Name, p.Value, p.WarnLow, p.WarnHigh, p.Low, p.High)
		}
	}
	for _, f := range v.Frames {
		if f.Stored != "" {
			fmt.Fprintf(w, "    frame %d is kept as %s\n", f.Header.Index, f.Stored)
		}
	}
}

// mostTold is how many defects are listed for a person; --json has all.
const mostTold = 20

func tellDefects(w io.Writer, defects []pipeline.Defect, mark func(id int) string) {
	for n, d := range defects {
		if n == mostTold {
			fmt.Fprintf(w, "  … and %d more defects; --json lists all\n", len(defects)-mostTold)
			return
		}
		fmt.Fprintf(w, "  defect %d: %s%s, %.1f × %.1f µm at u %.0f, v %.0f µm, %s%s%s\n", d.ID, d.Kind, named(" in ", d.Zone),
			d.LengthUM, d.WidthUM, d.UUM, d.VUM, prominence(d), named(", seen in ", strings.Join(d.SeenIn, " and ")), named(", ", mark(d.ID)))
	}
}

// prominence is how much a defect stands out: by its slope, or by its light.
func prominence(d pipeline.Defect) string {
	if d.SlopeMrad > 0 {
		return fmt.Sprintf("slope %.3g mrad", d.SlopeMrad)
	}
	return fmt.Sprintf("peak %.1f sigma", d.PeakSigma)
}

func tellJudgement(w io.Writer, j pipeline.Judgement) {
	fmt.Fprintf(w, "  %s  judged by %s%s: %s%s\n", whenOf(j.At), j.By, named(" ", j.Person), j.Verdict, named(", recipe ", j.Recipe))
	for _, r := range j.Reasons {
		fmt.Fprintf(w, "    %s: %s\n", r.Name, r.Text)
	}
	for _, stage := range slices.Sorted(maps.Keys(j.StageVersions)) {
		fmt.Fprintf(w, "    stage %s %s\n", stage, j.StageVersions[stage])
	}
}

// named is a word with what it is before it, or nothing.
func named(before, word string) string {
	if word == "" {
		return ""
	}
	return before + word
}

func late(is bool) string {
	if is {
		return ", late"
	}
	return ""
}

func unconfirmed(confirmed bool) string {
	if confirmed {
		return ""
	}
	return ", not confirmed"
}

func mismatch(verdict, bin pipeline.Verdict) string {
	if verdict == bin {
		return ""
	}
	return "; the verdict was " + string(verdict)
}
