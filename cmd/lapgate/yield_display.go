package main

import (
	"encoding/csv"
	"fmt"
	"io"
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// display is an answer in the forms in which it can be printed: a document, and a
// table whose head names the columns in the document's words.
type display struct {
	document any
	head     []string
	rows     [][]string // for a program: bare numbers
	forEye   [][]string // for a person, the head first
	after    []string   // sentences below the table, for a person
}

func (d display) write(w io.Writer, asJSON, asCSV bool) error {
	switch {
	case asJSON:
		return writeJSON(w, d.document)
	case asCSV:
		c := csv.NewWriter(w)
		if err := c.Write(d.head); err != nil {
			return err
		}
		return c.WriteAll(d.rows)
	}
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	for _, r := range d.forEye {
		fmt.Fprintln(t, strings.Join(r, "\t"))
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, line := range d.after {
		fmt.Fprintln(w, line)
	}
	return nil
}

// rateOf is k of n; value and bounds are missing where n is 0.
type rateOf struct {
	K              int32       `json:"k"`
	N              int32       `json:"n"`
	Value          *float64    `json:"value"`
	ClopperPearson *[2]float64 `json:"clopper_pearson"` // 95 %, two-sided
	Wilson         *[2]float64 `json:"wilson"`
}

func newRate(r *inspectpb.Rate) rateOf {
	out := rateOf{K: r.GetK(), N: r.GetN()}
	if out.N > 0 {
		value := r.GetValue()
		out.Value = &value
		out.ClopperPearson = &[2]float64{r.GetClopperPearson().GetLow(), r.GetClopperPearson().GetHigh()}
		out.Wilson = &[2]float64{r.GetWilson().GetLow(), r.GetWilson().GetHigh()}
	}
	return out
}

// forEye writes "97.00 % (94.2–98.7)", with the Clopper–Pearson bounds.
func (r rateOf) forEye() string {
	if r.Value == nil {
		return "-"
	}
	return fmt.Sprintf("%s (%.1f–%.1f)", percent(*r.Value), 100*r.ClopperPearson[0], 100*r.ClopperPearson[1])
}

func (r rateOf) cells() []string {
	if r.Value == nil {
		return []string{"", "", ""}
	}
	return []string{real64(*r.Value), real64(r.ClopperPearson[0]), real64(r.ClopperPearson[1])}
}

// yieldOf is counts and rates of a group.
type yieldOf struct {
	Group            map[string]string `json:"group"`
	Units            int32             `json:"units"`
	Inspections      int32             `json:"inspections"`
	Accepted         int32             `json:"accepted"`
	Rejected         int32             `json:"rejected"`
	Held             int32             `json:"held"`
	OpenHolds        int32             `json:"open_holds"`
	FirstRejected    int32             `json:"first_rejected"` // at the first attempt
	FirstHeld        int32             `json:"first_held"`
	FirstPass        rateOf            `json:"first_pass"`
	FinalIfHoldsFail rateOf            `json:"final_if_holds_fail"`
	FinalIfHoldsPass rateOf            `json:"final_if_holds_pass"`
	AttemptsPerUnit  float64           `json:"attempts_per_unit"`
	PassByRetest     rateOf            `json:"pass_by_retest"` // of those held or rejected at first
	Permanent        rateOf            `json:"permanent"`      // first pass by the permanent defects alone
}

func newYield(y *inspectpb.Yield) yieldOf {
	group := y.GetGroup()
	if group == nil {
		group = map[string]string{}
	}
	return yieldOf{Group: group, Units: y.GetUnits(), Inspections: y.GetInspections(), Accepted: y.GetAccepted(), Rejected: y.GetRejected(),
		Held: y.GetHeld(), OpenHolds: y.GetOpenHolds(), FirstRejected: y.GetFirstRejected(), FirstHeld: y.GetFirstHeld(), FirstPass: newRate(y.GetFirstPass()),
		FinalIfHoldsFail: newRate(y.GetFinalIfHoldsFail()), FinalIfHoldsPass: newRate(y.GetFinalIfHoldsPass()),
		AttemptsPerUnit: y.GetAttemptsPerUnit(), PassByRetest: newRate(y.GetPassByRetest()), Permanent: newRate(y.GetPermanent())}
}

func summaryDisplay(r *inspectpb.GetSummaryResponse, by []string) display {
	total := newYield(r.GetTotal())
	groups := make([]yieldOf, 0, len(r.GetGroups()))
	for _, g := range r.GetGroups() {
		groups = append(groups, newYield(g))
	}
	d := display{document: map[string]any{"total": total, "groups": groups}}
	d.head = append(append([]string{}, by...), "units", "inspections", "accepted", "rejected", "held", "open_holds",
		"first_pass", "first_pass_low", "first_pass_high", "final_if_holds_fail", "final_if_holds_pass", "attempts_per_unit", "pass_by_retest",
		"permanent", "permanent_low", "permanent_high")
	eyeHead := append(append([]string{}, by...), "units", "inspections", "accepted", "rejected", "held", "open", "first pass", "by permanent defects", "final, holds bad", "final, holds good", "attempts per unit", "passed by retest")
	list := append(groups, total)
	for i, y := range list {
		keys := groupCells(y, by, i == len(list)-1)
		counts := numbers(y.Units, y.Inspections, y.Accepted, y.Rejected, y.Held, y.OpenHolds)
		d.rows = append(d.rows, join(keys, counts, y.FirstPass.cells(), y.FinalIfHoldsFail.cells()[:1], y.FinalIfHoldsPass.cells()[:1], []string{real64(y.AttemptsPerUnit)}, y.PassByRetest.cells()[:1],
			y.Permanent.cells()))
		d.forEye = append(d.forEye, join(keys, counts, []string{y.FirstPass.forEye(), y.Permanent.forEye(), y.FinalIfHoldsFail.forEye(), y.FinalIfHoldsPass.forEye(),
			fmt.Sprintf("%.3f", y.AttemptsPerUnit), y.PassByRetest.forEye()}))
	}
	return d.withEyeHead(eyeHead)
}

// withEyeHead puts a head of its own over the table for a person.
func (d display) withEyeHead(head []string) display {
	d.forEye = append([][]string{head}, d.forEye...)
	return d
}

func groupCells(y yieldOf, by []string, isTotal bool) []string {
	var out []string
	for _, key := range by {
		if isTotal {
			out = append(out, "(all)")
			continue
		}
		out = append(out, y.Group[key])
	}
	return out
}

type seriesPoint struct {
	Start       time.Time `json:"start"`
	Inspections int32     `json:"inspections"`
	Accepted    int32     `json:"accepted"`
	Rejected    int32     `json:"rejected"`
	Held        int32     `json:"held"`
	AcceptRate  rateOf    `json:"accept_rate"`
}

func seriesDisplay(r *inspectpb.GetSeriesResponse) display {
	points := []seriesPoint{}
	d := display{head: []string{"start", "inspections", "accepted", "rejected", "held", "accept_rate", "accept_rate_low", "accept_rate_high"}}
	eyeHead := []string{"start", "inspections", "accepted", "rejected", "held", "accept rate"}
	for _, p := range r.GetPoints() {
		s := seriesPoint{p.GetStart().AsTime(), p.GetInspections(), p.GetAccepted(), p.GetRejected(), p.GetHeld(), newRate(p.GetAcceptRate())}
		points = append(points, s)
		counts := numbers(s.Inspections, s.Accepted, s.Rejected, s.Held)
		d.rows = append(d.rows, join([]string{s.Start.Format(time.RFC3339)}, counts, s.AcceptRate.cells()))
		d.forEye = append(d.forEye, join([]string{whenOf(s.Start)}, counts, []string{s.AcceptRate.forEye()}))
	}
	d.document = map[string]any{"points": points}
	return d.withEyeHead(eyeHead)
}

type paretoRow struct {
	Reason          string           `json:"reason"`
	Verdict         pipeline.Verdict `json:"verdict"`
	First           int32            `json:"first"`
	Any             int32            `json:"any"`
	Share           float64          `json:"share"`
	CumulativeShare float64          `json:"cumulative_share"`
	FirstAttempts   int32            `json:"first_attempts"` // with this reason
	Removable       int32            `json:"removable"`      // of those: gone with the removable defects
}

func paretoDisplay(r *inspectpb.GetParetoResponse) display {
	rows := []paretoRow{}
	d := display{head: []string{"reason", "verdict", "first", "any", "share", "cumulative_share", "first_attempts", "removable"}}
	for _, p := range r.GetRows() {
		verdict, _ := inspectpb.ToVerdict(p.GetVerdict()) // a reason of both kinds has none
		row := paretoRow{p.GetReason(), verdict, p.GetFirst(), p.GetAny(), p.GetShare(), p.GetCumulativeShare(), p.GetFirstAttempts(), p.GetRemovable()}
		rows = append(rows, row)
		start := join([]string{row.Reason, string(row.Verdict)}, numbers(row.First, row.Any))
		d.rows = append(d.rows, join(start, []string{real64(row.Share), real64(row.CumulativeShare)}, numbers(row.FirstAttempts, row.Removable)))
		d.forEye = append(d.forEye, join(start, []string{percent(row.Share), percent(row.CumulativeShare), fmt.Sprintf("%d of %d", row.Removable, row.FirstAttempts)}))
	}
	d.document = map[string]any{"inspections": r.GetInspections(), "rows": rows}
	return d.withEyeHead([]string{"reason", "verdict", "first", "any", "share", "cumulative", "removable, of first attempts"})
}

func numbers(list ...int32) []string {
	out := make([]string, len(list))
	for i, n := range list {
		out[i] = strconv.Itoa(int(n))
	}
	return out
}

func real64(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

func join(parts ...[]string) []string {
	var out []string
	for _, p := range parts {
		out = append(out, p...)
	}
	return out
}
