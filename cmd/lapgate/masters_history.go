package main

import (
	"context"
	"fmt"
	"os"
	"slices"
	"time"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/report"
)

// checkOf is one showing of a master.
type checkOf struct {
	InspectionID string            `json:"inspection_id"`
	At           time.Time         `json:"at"`
	Part         string            `json:"part"`
	Surface      string            `json:"surface"`
	Line         string            `json:"line"`
	Station      string            `json:"station"`
	Master       string            `json:"master"`
	View         string            `json:"view"`
	Kind         string            `json:"kind"`
	Expected     pipeline.Verdict  `json:"expected"`
	Verdict      pipeline.Verdict  `json:"verdict"`
	Result       string            `json:"result"`
	Why          string            `json:"why"`
	Measure      string            `json:"measure"`
	Value        *float64          `json:"value"` // null = its defect was not found
	AtLeast      *float64          `json:"at_least"`
	AtMost       *float64          `json:"at_most"`
	Recipe       string            `json:"recipe"`
	Conditions   map[string]string `json:"conditions"`
}

func newCheck(c *inspectpb.MasterCheck) (checkOf, error) {
	out := checkOf{InspectionID: c.GetInspectionId(), At: c.GetAt().AsTime(), Part: c.GetPart(), Surface: c.GetSurface(), Line: c.GetLine(),
		Station: c.GetStation(), Master: c.GetMaster(), View: c.GetView(), Kind: c.GetKind(), Why: c.GetWhy(), Measure: c.GetMeasure(),
		Value: c.Value, AtLeast: c.Low, AtMost: c.High, Recipe: c.GetRecipe(), Conditions: c.GetConditions()}
	var err error
	if out.Expected, err = inspectpb.ToVerdict(c.GetExpected()); err != nil {
		return out, err
	}
	if out.Verdict, err = inspectpb.ToVerdict(c.GetVerdict()); err != nil {
		return out, err
	}
	out.Result, err = inspectpb.ToCheckResult(c.GetResult())
	return out, err
}

// history lists the showings of one master, and draws them where that is asked for.
func (f *mastersFlags) history(ctx context.Context, client inspectpb.MasterServiceClient, master string) (display, error) {
	from, err := parseTime("from", f.from)
	if err != nil {
		return display{}, inspectpb.ToStatus(err)
	}
	r, err := client.ListChecks(ctx, &inspectpb.ListChecksRequest{Part: f.part, Line: f.line, Station: f.station, Master: master,
		From: inspectpb.FromTime(from), PageSize: f.most})
	if err != nil {
		return display{}, err
	}
	list := []checkOf{}
	for _, c := range r.GetChecks() {
		one, err := newCheck(c)
		if err != nil {
			return display{}, err
		}
		list = append(list, one)
	}
	if f.chart != "" {
		if err := drawMaster(f.chart, list); err != nil {
			return display{}, inspectpb.ToStatus(err)
		}
	}
	return historyDisplay(list), nil
}

func historyDisplay(list []checkOf) display {
	d := display{document: map[string]any{"checks": list},
		head: []string{"at", "line", "station", "part", "expected", "verdict", "result", "measure", "value", "at_least", "at_most", "why", "inspection_id"}}
	for _, c := range list {
		rest := []string{c.Line, c.Station, c.Part, string(c.Expected), string(c.Verdict), c.Result, c.Measure, numberOrNone(c.Value),
			numberOrNone(c.AtLeast), numberOrNone(c.AtMost), c.Why, c.InspectionID}
		d.rows = append(d.rows, join([]string{c.At.Format(time.RFC3339)}, rest))
		d.forEye = append(d.forEye, join([]string{whenOf(c.At)}, rest))
	}
	return d.withEyeHead([]string{"judged", "line", "station", "part", "expected", "verdict", "result", "measure", "value", "at least", "at most", "why", "inspection"})
}

func numberOrNone(v *float64) string {
	if v == nil {
		return ""
	}
	return fmt.Sprintf("%.6g", *v)
}

// drawMaster writes the chart; showings at several stations or of several measures would
// not make one line.
func drawMaster(path string, newestFirst []checkOf) error {
	var showings []report.MasterShowing
	for _, c := range slices.Backward(newestFirst) {
		if first := newestFirst[0]; c.Line != first.Line || c.Station != first.Station || c.Part != first.Part || c.Measure != first.Measure {
			return pipeline.Invalid("chart: the showings are of %s at line %s, station %s and of %s at line %s, station %s; choose with --part, --line, --station or --from",
				c.Measure, c.Line, c.Station, first.Measure, first.Line, first.Station)
		}
		showings = append(showings, report.MasterShowing{At: c.At.Local(), Value: c.Value, Low: c.AtLeast, High: c.AtMost, Result: c.Result})
	}
	if len(newestFirst) == 0 {
		return pipeline.Invalid("chart: the ledger has no showing of this master")
	}
	last := newestFirst[0]
	if last.Measure == "" {
		return pipeline.Invalid("chart: master %s has no defect to measure; it must be accepted", last.Master)
	}
	svg, err := report.DrawMaster(fmt.Sprintf("%s on line %s, station %s", last.Master, last.Line, last.Station), last.Measure, showings)
	if err != nil {
		return err
	}
	return os.WriteFile(path, svg, 0o644)
}
