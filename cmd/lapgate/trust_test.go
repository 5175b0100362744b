package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// floor is a server in memory with one station that holds, a master that failed and a
// recipe that waits. asked is the last request that came.
type floor struct {
	inspectpb.UnimplementedInspectionServiceServer
	inspectpb.UnimplementedYieldServiceServer
	inspectpb.UnimplementedRecipeServiceServer
	inspectpb.UnimplementedMasterServiceServer
	asked proto.Message
}

func floorAddress(t *testing.T) (*floor, string) {
	f := &floor{}
	return f, "unix://" + serveOn(t, func(s *grpc.Server) {
		inspectpb.RegisterInspectionServiceServer(s, f)
		inspectpb.RegisterYieldServiceServer(s, f)
		inspectpb.RegisterRecipeServiceServer(s, f)
		inspectpb.RegisterMasterServiceServer(s, f)
	})
}

func (f *floor) GetUnit(context.Context, *inspectpb.GetUnitRequest) (*inspectpb.GetUnitResponse, error) {
	r := showingRecord("11", 1, pipeline.Accept)
	r.Suspicions = []*inspectpb.Suspicion{{Master: "M-DIG", Cause: "failed", Why: "view ring found no dig", At: at(9)}}
	return &inspectpb.GetUnitResponse{Inspections: []*inspectpb.InspectionRecord{r}}, nil
}

func (f *floor) ListStations(context.Context, *inspectpb.ListStationsRequest) (*inspectpb.ListStationsResponse, error) {
	return &inspectpb.ListStationsResponse{ServerTime: at(10), Stations: []*inspectpb.Station{
		{Line: "A", Station: "A1", Heartbeat: at(9), State: inspectpb.StationState_STATION_STATE_HOLDING, Because: []string{"master failed: M-DIG"}},
		{Line: "B", Station: "B1", Inspection: at(8), State: inspectpb.StationState_STATION_STATE_OK}}}, nil
}

func (f *floor) GetLatency(_ context.Context, r *inspectpb.GetLatencyRequest) (*inspectpb.GetLatencyResponse, error) {
	f.asked = r
	return &inspectpb.GetLatencyResponse{Stations: []*inspectpb.Latency{{Line: "A", Station: "A1", N: 900, P50Ms: 31.25, P90Ms: 40, P99Ms: 60, MaxMs: 81}}}, nil
}

func (f *floor) ListMasters(_ context.Context, r *inspectpb.ListMastersRequest) (*inspectpb.ListMastersResponse, error) {
	f.asked = r
	return &inspectpb.ListMastersResponse{Masters: []*inspectpb.MasterState{
		{Part: "mirror-25", Line: "A", Station: "A1", Master: "M-DIG", Expect: inspectpb.Verdict_VERDICT_REJECT, Reason: "master failed", Text: "master M-DIG failed at noon", LastFail: at(9)},
		{Part: "mirror-25", Line: "A", Station: "A1", Master: "M-CLEAN", Expect: inspectpb.Verdict_VERDICT_ACCEPT, Due: at(30), LastPass: at(1), Warning: "on its way to 9"}}}, nil
}

func (f *floor) ListChecks(_ context.Context, r *inspectpb.ListChecksRequest) (*inspectpb.ListChecksResponse, error) {
	f.asked = r
	value, low := 212.5, 190.0
	check := func(minute int, line string, result inspectpb.CheckResult, v *float64) *inspectpb.MasterCheck {
		return &inspectpb.MasterCheck{InspectionId: "7", Master: r.Master, Line: line, Station: "A1", Part: "mirror-25", View: "ring", Kind: "dig", Measure: "diameter_um",
			Expected: inspectpb.Verdict_VERDICT_REJECT, Verdict: inspectpb.Verdict_VERDICT_REJECT, Result: result, Why: "because", Value: v, Low: &low, At: at(minute)}
	}
	list := []*inspectpb.MasterCheck{check(9, "A", inspectpb.CheckResult_CHECK_RESULT_FAIL, nil), check(1, "A", inspectpb.CheckResult_CHECK_RESULT_PASS, &value)}
	if r.Master == "M-BOTH" {
		list = append(list, check(0, "B", inspectpb.CheckResult_CHECK_RESULT_PASS, &value))
	}
	return &inspectpb.ListChecksResponse{Checks: list}, nil
}

func (f *floor) ListSuspects(_ context.Context, r *inspectpb.ListSuspectsRequest) (*inspectpb.ListSuspectsResponse, error) {
	f.asked = r
	s := &inspectpb.Suspect{InspectionId: "11", Identity: showingRecord("11", 1, pipeline.Accept).Identity, Verdict: inspectpb.Verdict_VERDICT_ACCEPT,
		Judged: at(5), Master: "M-DIG", Cause: "failed", Why: "view ring found no dig", At: at(9)}
	if r.PageToken == "" {
		return &inspectpb.ListSuspectsResponse{Suspects: []*inspectpb.Suspect{s}, NextPageToken: "1"}, nil
	}
	return &inspectpb.ListSuspectsResponse{Suspects: []*inspectpb.Suspect{s, s}}, nil
}

func (f *floor) NoteChange(_ context.Context, r *inspectpb.NoteChangeRequest) (*inspectpb.NoteChangeResponse, error) {
	f.asked = r
	return &inspectpb.NoteChangeResponse{}, nil
}

func (f *floor) ListRecipes(context.Context, *inspectpb.ListRecipesRequest) (*inspectpb.ListRecipesResponse, error) {
	return &inspectpb.ListRecipesResponse{
		Recipes: []*inspectpb.RecipeInForce{{Part: "mirror-25", Hash: "sha256:ab", File: "mirror-25.yaml", Since: at(0),
			Approval: &inspectpb.Approval{Hash: "sha256:ab", Author: "Ada", Approver: "Ben", Effective: inspectpb.Effective_EFFECTIVE_NOW}}},
		Waiting: []*inspectpb.RecipeWaiting{{Part: "mirror-25", Hash: "sha256:cd", File: "mirror-25.yaml", Since: at(3)}}, Development: true}, nil
}

func (f *floor) ApproveRecipe(_ context.Context, r *inspectpb.ApproveRecipeRequest) (*inspectpb.ApproveRecipeResponse, error) {
	f.asked = r
	if r.Approval.Author == r.Approval.Approver {
		return nil, inspectpb.ToStatus(pipeline.Invalid("person: want a second person"))
	}
	return &inspectpb.ApproveRecipeResponse{Approval: r.Approval}, nil
}

func (f *floor) ListApprovals(context.Context, *inspectpb.ListApprovalsRequest) (*inspectpb.ListApprovalsResponse, error) {
	return &inspectpb.ListApprovalsResponse{Approvals: []*inspectpb.ApprovalRecord{{Part: "mirror-25", File: "mirror-25.yaml",
		Approval: &inspectpb.Approval{Hash: "sha256:ab", Author: "Ada", Approver: "Ben", Reason: "drawing B", Effective: inspectpb.Effective_EFFECTIVE_NEXT_LOT, At: at(2)}}}}, nil
}

const approveArgs = "approve sha256:cd --author Ada --person Ben --reason x --effective next-lot"

func TestTrustForAPerson(t *testing.T) {
	t.Setenv("TZ", "UTC")
	_, address := floorAddress(t)
	t.Setenv(serverEnv, address)
	for args, want := range map[string][]string{
		"unit U1":     {"suspect: master M-DIG failed: view ring found no dig"},
		"stations":    {"1m0s ago", "holding", "master failed: M-DIG", "B     B1       -"},
		"latency":     {"900", "31.2", "81.0"},
		"masters":     {"master failed: master M-DIG failed at noon", "now", "ok; warning: on its way to 9"},
		"masters M-X": {"212.5", "fail", "because"},
		"suspects":    {"M-DIG", "view ring found no dig"},
		"recipes":     {"approved by", "Ben", "waiting for approval: mirror-25.yaml", "lapgate approve sha256:cd", "runs for development"},
		"approvals":   {"next_lot", "Ada", "Ben", "drawing B"},
		approveArgs:   {"recipe sha256:cd: approved by Ben, written by Ada, effective next-lot"},
		"change lamp --line A --station A1 --person Ada --reason worn": {"lamp changed; show its masters"},
	} {
		code, out, messages := call(t, strings.Fields(args)...)
		if code != 0 || messages != "" {
			t.Errorf("%s: status %d, %s", args, code, messages)
		}
		for _, w := range want {
			if !strings.Contains(out, w) {
				t.Errorf("%s: no %q in\n%s", args, w, out)
			}
		}
	}
}

func TestTrustForAProgram(t *testing.T) {
	f, address := floorAddress(t)
	for args, path := range map[string]string{
		"unit U1":              "inspections.0.suspicions.0.master=M-DIG",
		"stations":             "stations.0.because.0=master failed: M-DIG",
		"stations ":            "stations.1.heartbeat=<nil>",
		"latency --line A":     "stations.0.p99_ms=60",
		"masters --line A":     "masters.1.due=2026-03-01T06:30:00Z",
		"masters M-X --most 9": "checks.0.value=<nil>",
		"masters M-X":          "checks.1.at_least=190",
		"suspects":             "suspects.2.unit=U1",
		"recipes":              "waiting.0.hash=sha256:cd",
		"recipes ":             "recipes.0.approval.approver=Ben",
		"approvals":            "approvals.0.effective=next_lot",
		approveArgs:            "effective=next_lot",
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
	for _, args := range []string{"stations", "latency", "masters", "masters M-X", "suspects", "approvals"} {
		code, out, _ := call(t, append(strings.Fields(args), "--csv", "--server", address)...)
		rows, err := csv.NewReader(strings.NewReader(out)).ReadAll() // refuses rows of unequal length
		if code != 0 || err != nil || len(rows) < 2 {
			t.Errorf("%s: status %d, %v\n%s", args, code, err, out)
		}
	}
	call(t, "change", "lens", "--line", "A", "--station", "A1", "--person", "Ada", "--reason", "dust", "--server", address)
	if r, ok := f.asked.(*inspectpb.NoteChangeRequest); !ok || r.What != "lens" || r.Person != "Ada" || r.Station != "A1" {
		t.Errorf("asked %v", f.asked)
	}
}

func TestChartOfAMaster(t *testing.T) {
	_, address := floorAddress(t)
	t.Setenv(serverEnv, address)
	path := filepath.Join(t.TempDir(), "m.svg")
	if code, _, messages := call(t, "masters", "M-X", "--chart", path); code != 0 {
		t.Fatalf("status %d, %s", code, messages)
	}
	if b, err := os.ReadFile(path); err != nil || !strings.Contains(string(b), "<svg") || !strings.Contains(string(b), "M-X on line A, station A1") {
		t.Errorf("the picture: %v\n%.300s", err, b)
	}
	for args, want := range map[string]string{
		"masters --chart " + path:        "want the id of a master",
		"masters M-BOTH --chart " + path: "choose with --part, --line",
		"approve sha256:cd --author Ada --person Ada --reason x --effective now": "second person",
		"approve sha256:cd --author Ada --person Ben --reason x":                 `effective: got ""`,
	} {
		if code, _, messages := call(t, strings.Fields(args)...); code != exitUsage || !strings.Contains(messages, want) {
			t.Errorf("%s: status %d, %s; want status 2 with %q", args, code, messages, want)
		}
	}
}
