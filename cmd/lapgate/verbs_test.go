package main

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// office is a server in memory with one unit, one recipe and fixed counts. asked is
// the last request that came.
type office struct {
	inspectpb.UnimplementedInspectionServiceServer
	inspectpb.UnimplementedYieldServiceServer
	inspectpb.UnimplementedRecipeServiceServer
	asked proto.Message
}

func (o *office) register(s *grpc.Server) {
	inspectpb.RegisterInspectionServiceServer(s, o)
	inspectpb.RegisterYieldServiceServer(s, o)
	inspectpb.RegisterRecipeServiceServer(s, o)
}

func officeAddress(t *testing.T) (*office, string) {
	o := &office{}
	return o, "unix://" + serveOn(t, o.register)
}

func at(minute int) *timestamppb.Timestamp {
	return timestamppb.New(time.Date(2026, 3, 1, 6, minute, 0, 0, time.UTC))
}

func showingRecord(id string, attempt int, verdict pipeline.Verdict, reasons ...string) *inspectpb.InspectionRecord {
	j := pipeline.Judgement{Verdict: verdict, By: pipeline.ByLine, At: at(attempt).AsTime()}
	for _, r := range reasons {
		j.Reasons = append(j.Reasons, pipeline.Reason{Name: r, Verdict: verdict, Text: r + " is broken"})
	}
	return &inspectpb.InspectionRecord{InspectionId: id, Verdict: inspectpb.FromVerdict(verdict), Captured: at(attempt), Judged: at(attempt), LatencyMs: 41,
		Identity: inspectpb.FromIdentity(pipeline.Identity{Part: "mirror-25", Unit: "U1", Line: "A", Station: "A1", Attempt: attempt, Purpose: pipeline.Production}),
		Evidence: inspectpb.FromEvidence(pipeline.Evidence{Coverage: 0.998, Defects: []pipeline.Defect{{ID: 1, Kind: pipeline.Dig, Zone: "clear", LengthUM: 31.5, WidthUM: 29.2}},
			Views: []pipeline.ViewEvidence{{Name: "ring", Proofs: []pipeline.Proof{{Name: "light", Reason: "lamp at 0.2 of nominal"}}}}}),
		Judgements: []*inspectpb.Judgement{inspectpb.FromJudgement(j)}}
}

func (o *office) GetUnit(_ context.Context, r *inspectpb.GetUnitRequest) (*inspectpb.GetUnitResponse, error) {
	o.asked = r
	if r.Unit != "U1" {
		return &inspectpb.GetUnitResponse{}, nil
	}
	first := showingRecord("11", 1, pipeline.Hold, "not proven: light")
	first.Dispositions = []*inspectpb.DispositionRecord{{Disposition: inspectpb.Disposition_DISPOSITION_CLEAN, Person: "Ada", Reason: "fingerprint", At: at(2)}}
	second := showingRecord("12", 2, pipeline.Accept)
	second.Outcomes = []*inspectpb.OutcomeRecord{{Bin: inspectpb.Verdict_VERDICT_REJECT, Confirmed: true, At: at(3)}}
	return &inspectpb.GetUnitResponse{Inspections: []*inspectpb.InspectionRecord{first, second}}, nil
}

func (o *office) ListHolds(_ context.Context, r *inspectpb.ListHoldsRequest) (*inspectpb.ListHoldsResponse, error) {
	o.asked = r
	if r.PageToken == "" {
		return &inspectpb.ListHoldsResponse{Holds: []*inspectpb.InspectionRecord{showingRecord("11", 1, pipeline.Hold, "late")}, NextPageToken: "2"}, nil
	}
	return &inspectpb.ListHoldsResponse{Holds: []*inspectpb.InspectionRecord{showingRecord("14", 1, pipeline.Hold, "coverage")}}, nil
}

func (o *office) DisposeHold(_ context.Context, r *inspectpb.DisposeHoldRequest) (*inspectpb.DisposeHoldResponse, error) {
	o.asked = r
	if r.InspectionId != "11" {
		return nil, inspectpb.ToStatus(pipeline.NotFound("inspection %s: no open hold", r.InspectionId))
	}
	return &inspectpb.DisposeHoldResponse{Inspection: showingRecord("11", 1, pipeline.Hold, "late")}, nil
}

func (o *office) ReportOutcome(_ context.Context, r *inspectpb.ReportOutcomeRequest) (*inspectpb.ReportOutcomeResponse, error) {
	o.asked = r
	return &inspectpb.ReportOutcomeResponse{Matches: r.Bin == inspectpb.Verdict_VERDICT_ACCEPT}, nil
}

func (o *office) ListMismatches(_ context.Context, r *inspectpb.ListMismatchesRequest) (*inspectpb.ListMismatchesResponse, error) {
	o.asked = r
	if r.PageToken == "" {
		return &inspectpb.ListMismatchesResponse{Inspections: []*inspectpb.InspectionRecord{showingRecord("12", 2, pipeline.Accept)}, NextPageToken: "2"}, nil
	}
	return &inspectpb.ListMismatchesResponse{Inspections: []*inspectpb.InspectionRecord{showingRecord("15", 3, pipeline.Reject)}}, nil
}

func rate(k, n int32) *inspectpb.Rate {
	if n == 0 {
		return &inspectpb.Rate{ClopperPearson: &inspectpb.Interval{High: 1}, Wilson: &inspectpb.Interval{High: 1}}
	}
	return &inspectpb.Rate{K: k, N: n, Value: float64(k) / float64(n), ClopperPearson: &inspectpb.Interval{Low: 0.8, High: 0.95}, Wilson: &inspectpb.Interval{Low: 0.81, High: 0.94}}
}

func (o *office) GetSummary(_ context.Context, r *inspectpb.GetSummaryRequest) (*inspectpb.GetSummaryResponse, error) {
	o.asked = r
	y := &inspectpb.Yield{Group: map[string]string{"line": "A"}, Units: 10, Inspections: 11, Accepted: 9, Rejected: 1, Held: 1, OpenHolds: 1,
		FirstPass: rate(9, 10), FinalIfHoldsFail: rate(9, 10), FinalIfHoldsPass: rate(10, 10)}
	empty := &inspectpb.Yield{Group: map[string]string{"line": "B"}, FirstPass: rate(0, 0), FinalIfHoldsFail: rate(0, 0), FinalIfHoldsPass: rate(0, 0)}
	return &inspectpb.GetSummaryResponse{Total: y, Groups: []*inspectpb.Yield{y, empty}}, nil
}

func (o *office) GetSeries(_ context.Context, r *inspectpb.GetSeriesRequest) (*inspectpb.GetSeriesResponse, error) {
	o.asked = r
	return &inspectpb.GetSeriesResponse{Points: []*inspectpb.SeriesPoint{{Start: at(0), Inspections: 10, Accepted: 9, Rejected: 1, AcceptRate: rate(9, 10)}}}, nil
}

func (o *office) GetPareto(_ context.Context, r *inspectpb.GetParetoRequest) (*inspectpb.GetParetoResponse, error) {
	o.asked = r
	return &inspectpb.GetParetoResponse{Inspections: 10, Rows: []*inspectpb.ParetoRow{{Reason: "digs, all zones", Verdict: inspectpb.Verdict_VERDICT_REJECT, First: 3, Any: 4, Share: 0.75, CumulativeShare: 0.75}}}, nil
}

func (o *office) Watch(r *inspectpb.WatchRequest, s grpc.ServerStreamingServer[inspectpb.WatchResponse]) error {
	row := &inspectpb.UnitRow{InspectionId: "11", Verdict: inspectpb.Verdict_VERDICT_REJECT, Reasons: []string{"digs"}, Judged: at(5), Coverage: 1,
		Identity: inspectpb.FromIdentity(pipeline.Identity{Part: "mirror-25", Unit: "U1", Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production})}
	return errors.Join(s.Send(&inspectpb.WatchResponse{Unit: row}), s.Send(&inspectpb.WatchResponse{Unit: row, Missed: 3}))
}

func (o *office) ListRecipes(context.Context, *inspectpb.ListRecipesRequest) (*inspectpb.ListRecipesResponse, error) {
	return &inspectpb.ListRecipesResponse{Recipes: []*inspectpb.RecipeInForce{{Part: "mirror-25", Hash: "sha256:ab", File: "mirror-25.yaml", Views: []string{"ring", "bar"}, Since: at(0)}},
		Problems: []*inspectpb.Problem{{File: "mirror-40.yaml", Line: 3, Column: 7, Message: "unknown key"}}}, nil
}

func (o *office) GetRecipe(_ context.Context, r *inspectpb.GetRecipeRequest) (*inspectpb.GetRecipeResponse, error) {
	if r.Hash != "sha256:ab" {
		return nil, inspectpb.ToStatus(pipeline.NotFound("hash: no recipe %s", r.Hash))
	}
	return &inspectpb.GetRecipeResponse{Hash: r.Hash, Text: "part: mirror-25\n"}, nil
}

// call runs the program against the office.
func call(t *testing.T, args ...string) (code int, stdout, stderr string) {
	t.Helper()
	var out, messages bytes.Buffer
	code = run(t.Context(), args, nil, &out, &messages)
	return code, out.String(), messages.String()
}

func TestVerbsForAPerson(t *testing.T) {
	t.Setenv("TZ", "UTC")
	_, address := officeAddress(t)
	t.Setenv(serverEnv, address)
	for _, c := range []struct {
		args string
		want []string
	}{
		{"yield --by line", []string{"first pass", "90.00 % (80.0–95.0)", "(all)", "\nB      0 "}},
		{"yield --series 60m", []string{"accept rate", "90.00 %"}},
		{"yield --pareto", []string{"digs, all zones", "75.00 %"}},
		{"unit U1", []string{"inspection 11: hold", "not proven: light: lamp at 0.2 of nominal", "Ada decided: clean (fingerprint)", "defect 1: dig in clear, 31.5 × 29.2 µm",
			"the line put it into the reject bin; the verdict was accept"}},
		{"holds", []string{"11", "14", "coverage"}},
		{"dispose 11 accept --person Ada --reason clean", []string{"inspection 11 of unit U1: accept by Ada"}},
		{"outcome U1 --bin reject", []string{"unit U1, attempt 2: reject bin; the verdict was accept"}},
		{"outcome --mismatches", []string{"12", "15"}},
		{"recipes", []string{"mirror-25.yaml", "ring bar", "not loaded: mirror-40.yaml:3:7: unknown key"}},
		{"recipes --hash sha256:ab", []string{"part: mirror-25\n"}},
	} {
		code, out, messages := call(t, strings.Fields(c.args)...)
		if code != 0 || messages != "" {
			t.Errorf("%s: status %d, %s", c.args, code, messages)
		}
		for _, w := range c.want {
			if !strings.Contains(out, w) {
				t.Errorf("%s: no %q in\n%s", c.args, w, out)
			}
		}
	}
}

func TestEveryVerbPrintsOneDocument(t *testing.T) {
	_, address := officeAddress(t)
	for args, path := range map[string]string{
		"yield --by line":    "groups.0.first_pass.clopper_pearson.1=0.95",
		"yield":              "groups.1.first_pass.value=<nil>",
		"yield --series 15m": "points.0.accept_rate.k=9",
		"yield --pareto":     "rows.0.verdict=reject",
		"unit U1":            "inspections.1.outcomes.0.bin=reject",
		"holds":              "holds.1.inspection_id=14",
		"dispose 11 clean --person Ada --reason x": "verdict=hold",
		"outcome U1 --bin accept --confirmed":      "matches=true",
		"outcome --mismatches":                     "mismatches.0.attempt=2",
		"recipes":                                  "recipes.0.views.1=bar",
		"recipes --hash sha256:ab":                 "text=part: mirror-25\n",
	} {
		code, out, messages := call(t, append(strings.Fields(args), "--json", "--server", address)...)
		var doc any
		if err := json.Unmarshal([]byte(out), &doc); err != nil || code != 0 {
			t.Errorf("%s: status %d, %v, %s", args, code, err, messages)
			continue
		}
		key, want, _ := strings.Cut(path, "=")
		if got := fmt.Sprint(dig(doc, strings.Split(key, "."))); got != want {
			t.Errorf("%s: %s is %q, want %q in\n%s", args, key, got, want, out)
		}
	}
}

// dig follows keys and indices through a document.
func dig(doc any, path []string) any {
	for _, p := range path {
		switch d := doc.(type) {
		case map[string]any:
			doc = d[p]
		case []any:
			var i int
			if _, err := fmt.Sscan(p, &i); err != nil || i >= len(d) {
				return "nothing at " + p
			}
			doc = d[i]
		}
	}
	return doc
}

func TestYieldCSV(t *testing.T) {
	_, address := officeAddress(t)
	for _, args := range []string{"yield --by line", "yield --series 15m", "yield --pareto"} {
		code, out, _ := call(t, append(strings.Fields(args), "--csv", "--server", address)...)
		rows, err := csv.NewReader(strings.NewReader(out)).ReadAll() // refuses rows of unequal length
		if code != 0 || err != nil || len(rows) < 2 {
			t.Errorf("%s: status %d, %v\n%s", args, code, err, out)
		}
	}
}

func TestFiltersReachTheServer(t *testing.T) {
	o, address := officeAddress(t)
	code, _, messages := call(t, "yield", "--server", address, "--part", "mirror-25", "--lot", "L1", "--purpose", "study",
		"--from", "2026-03-01T06:15:00+05:30", "--to", "2026-03-02T00:00:00Z", "--by", "line,station")
	if code != 0 {
		t.Fatal(messages)
	}
	r := o.asked.(*inspectpb.GetSummaryRequest)
	if r.Filter.Part != "mirror-25" || r.Filter.Lot != "L1" || r.Filter.Purpose != inspectpb.Purpose_PURPOSE_STUDY ||
		!r.Filter.From.AsTime().Equal(time.Date(2026, 3, 1, 0, 45, 0, 0, time.UTC)) || strings.Join(r.GroupBy, " ") != "line station" {
		t.Errorf("asked %v", r)
	}
	if code, _, messages = call(t, "outcome", "U1", "--server", address, "--attempt", "1", "--bin", "hold", "--confirmed"); code != 0 {
		t.Fatal(messages)
	}
	if r := o.asked.(*inspectpb.ReportOutcomeRequest); r.Identity.Attempt != 1 || r.Bin != inspectpb.Verdict_VERDICT_HOLD || !r.Confirmed || r.At == nil {
		t.Errorf("asked %v", r)
	}
}

func TestWatchShowsWhatCame(t *testing.T) {
	_, address := officeAddress(t)
	code, out, messages := call(t, "watch", "--server", address)
	if code != exitFailure || !strings.Contains(messages, "the server ended the stream") {
		t.Errorf("status %d, %s", code, messages)
	}
	if strings.Count(out, "reject") != 2 || !strings.Contains(out, "(3 inspections missed)") {
		t.Errorf("got %s", out)
	}
}

func TestExitCodes(t *testing.T) {
	_, address := officeAddress(t)
	t.Setenv(serverEnv, address)
	for _, c := range []struct {
		args string
		code int
		want string
	}{
		{"--version", 0, ""},
		{"--help", 0, ""},
		{"yeild", exitUsage, "unknown command"},
		{"yield --lines A", exitUsage, "unknown flag"},
		{"yield --purpose test", exitUsage, "want one of [production"},
		{"yield --from yesterday", exitUsage, "want a time such as"},
		{"yield --from 2026-03-02 --to 2026-03-01", exitUsage, "want a time after --from"},
		{"yield --series 20m", exitUsage, "want a multiple of 15m"},
		{"yield --json --csv", exitUsage, "none of the others can be"},
		{"unit", exitUsage, "accepts 1 arg"},
		{"unit U9", exitFailure, "no inspection of it"},
		{"dispose 11 scrap --person Ada --reason x", exitUsage, "want one of [accept"},
		{"dispose 11 accept", exitUsage, "want both"},
		{"dispose 99 accept --person Ada --reason x", exitFailure, "no open hold"},
		{"outcome U1", exitUsage, "want accept, reject or hold"},
		{"outcome U1 --bin hold --attempt 7", exitFailure, "no attempt 7"},
		{"recipes --hash x", exitFailure, "no recipe x"},
		{"feed no-such-folder", exitUsage, "no such file"},
		{"feed --in-flight 0 .", exitUsage, "want at least 1"},
		{"feed --pattern {serial} .", exitUsage, "want one of"},
		{"feed --watch a b", exitUsage, "want one"},
		{"feed --reject-cmd no-such-program version.go --spool none", exitUsage, "reject-cmd"},
		{"yield --server unix:///no/such/socket", exitFailure, "no such file"},
		{"yield --server 127.0.0.1:1", exitFailure, "start `lapgated serve`"},
	} {
		code, _, messages := call(t, strings.Fields(c.args)...)
		if code != c.code || !strings.Contains(messages, c.want) {
			t.Errorf("lapgate %s: status %d, want %d with %q\n%s", c.args, code, c.code, c.want, messages)
		}
	}
}

func TestVersionNamesTheCommit(t *testing.T) {
	_, out, _ := call(t, "--version")
	if !strings.HasPrefix(out, "lapgate ") || !strings.Contains(out, " commit ") {
		t.Errorf("got %q", out)
	}
}
