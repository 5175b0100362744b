package server_test

import (
	"context"
	"encoding/json"
	"math"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/configs"
	"lapgate/proto/inspectpb"
)

// simplePlan has two processes; the yield of one is the ledger's.
const simplePlan = `format: 1
name: two ways
currency: EUR
working_time: {hours_per_period: 1700, periods_per_year: 1, labour_cost_per_hour: 40}
demand: {units_per_period: 100000}
quantities: {from: 10, to: 10000, points: 7}
uncertainty: {draws: 200, seed: 1, level: 0.9}
outcomes: {price: 100, escape_cost: 50}
processes:
  - name: turned
    tooling_cost: 1000
    cost_per_start: [{from_starts: 1, cost: 20}]
    yield: {ledger: {part: disc, process: turned, gate: all}}
  - name: moulded
    tooling_cost: 20000
    cost_per_start: [{from_starts: 1, cost: 2}]
    yield: {value: 0.9}
inspections:
  - name: none
    kind: none
  - name: all
    kind: full
    false_reject: {count: {k: 1, n: 100}}
    miss: {count: {k: 3, n: 60}}
    station: {price: 10000, life_years: 5, cycle_time_s: 2, crew: 0, charge: by_use}
`

// The demo plan with yields from the server's own ledger: the process that the fed units
// were made by has the counts that were fed, corrected for the gate.
func TestVolumePlanTakesYieldsFromTheLedger(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i, diameter := range []float64{0, 0, 0, 8} {
		for j, view := range []string{"ring", "bar"} {
			raw := frame(uint64(i*10+j), diameter)
			h := header("p"+string(rune('0'+i)), view, raw)
			h.Process = "turned"
			l.show(h, raw)
		}
	}
	l.finish()
	req := &inspectpb.EvaluatePlanRequest{Plan: simplePlan, Quantities: []float64{100}}
	resp, err := r.volume.EvaluatePlan(context.Background(), req)
	must(t, err)
	var result struct {
		Yields []struct {
			Process        string
			Measured, Used float64
			Low, High      float64
		}
	}
	must(t, json.Unmarshal([]byte(resp.ResultJson), &result))
	if len(result.Yields) != 2 || result.Yields[0].Process != "turned" {
		t.Fatalf("yields %+v, want turned and moulded", result.Yields)
	}
	y, corrected := result.Yields[0], 1-(0.25-0.01)/(1-0.05-0.01) // Rogan and Gladen 1978
	if math.Abs(y.Measured-0.75) > 1e-12 || math.Abs(y.Used-corrected) > 1e-12 || !(y.Low < y.Used && y.Used < y.High) {
		t.Errorf("%+v, want 3 of 4 measured and %g used, inside its interval", y, corrected)
	}
	if len(resp.Combinations) < 2 || len(resp.Quantities) == 0 || len(resp.Quantities[0].Cells) != len(resp.Combinations) {
		t.Errorf("%d combinations, %d quantities", len(resp.Combinations), len(resp.Quantities))
	}
}

func TestVolumePlanSaysWhereItIsWrong(t *testing.T) {
	r := newRig(t, rigOptions{})
	bad := strings.Replace(simplePlan, "tooling", "toling", 1)
	_, err := r.volume.EvaluatePlan(context.Background(), &inspectpb.EvaluatePlanRequest{Plan: bad})
	if status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "plan:") || !strings.Contains(err.Error(), "toling") {
		t.Errorf("error %v, want InvalidArgument with the place", err)
	}
}

func TestDemoPlanIsReadable(t *testing.T) {
	text, err := configs.Demo.ReadFile("demo/volume.yaml")
	must(t, err)
	rows, err := configs.Demo.ReadFile("demo/volume_threshold.csv")
	must(t, err)
	r := newRig(t, rigOptions{})
	_, err = r.volume.EvaluatePlan(context.Background(), &inspectpb.EvaluatePlanRequest{Plan: string(text), Files: map[string]string{"volume_threshold.csv": string(rows)}})
	// The rig's ledger has no disc-25: the demo plan's yields have nothing to stand on.
	if status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "ledger") {
		t.Errorf("error %v, want InvalidArgument that speaks of the ledger", err)
	}
}
