package main

import (
	"context"
	"fmt"
	"os"
	"regexp"

	"lapgate/proto/inspectpb"
)

// planQuantities are the quantities at which the demo prints what a good unit costs.
var planQuantities = []float64{10, 1000, 1_000_000}

// gateFigures are the two lines of the demo plan that say how often the gate errs; the
// demo puts its own counts in their place.
var gateFigures = regexp.MustCompile(`(?m)^    false_reject: .*\n    miss: .*\n`)

// withMeasuredGate returns the plan with the gate's errors taken from a study file.
func withMeasuredGate(plan []byte) ([]byte, error) {
	if n := len(gateFigures.FindAllIndex(plan, -1)); n != 1 {
		return nil, fmt.Errorf("the demo plan has %d places for the gate's errors, want 1", n)
	}
	return gateFigures.ReplaceAll(plan, []byte("    study: {file: gate_study.yaml, defect_sizes: [{size_um: 200, share: 1}]}\n")), nil
}

// gateStudy is what the demo's truth says of its own gate. A hold is no error of the
// gate; units held are left out.
func (f demoFigures) gateStudy() string {
	return fmt.Sprintf(`# Written by the demo from the truth that its frames were drawn from.
format: 1
name: the demo's gate against its known truth
note: Units of every kind of broken limit together, under the size of the drawing's dig limit; held units are left out.
sensitivity: [{size_um: 200, found: %d, shown: %d}]
false_calls: {called: %d, shown: %d}
`, f.gate.found, f.gate.bad, f.gate.falselyRejected, f.gate.good)
}

// gateCounts are all units with a verdict of accept or reject, those near a limit too.
type gateCounts struct{ found, bad, falselyRejected, good int }

// plan works out the demo plan with the yields of the demo's ledger and the errors that
// its truth shows, prints the cheapest way at three quantities, and writes the report.
func (d *demo) plan(f demoFigures) error {
	name := d.path("configs/demo/volume.yaml")
	text, err := os.ReadFile(name)
	if err != nil {
		return err
	}
	if text, err = withMeasuredGate(text); err != nil {
		return err
	}
	thresholds, err := os.ReadFile(d.path("configs/demo/volume_threshold.csv"))
	if err != nil {
		return err
	}
	study := f.gateStudy()
	if err := os.WriteFile(d.path("configs/demo/gate_study.yaml"), []byte(study), 0o644); err != nil {
		return err
	}
	if err := os.WriteFile(name, text, 0o644); err != nil {
		return err
	}
	if err := d.printPlan(string(text), map[string]string{"gate_study.yaml": study, "volume_threshold.csv": string(thresholds)}); err != nil {
		return err
	}
	return d.runClient([]string{"volume", name, "--server", d.server.address(), "--report", d.path("plan.html")}, nil)
}

func (d *demo) printPlan(text string, files map[string]string) error {
	conn, err := d.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	resp, err := inspectpb.NewVolumeServiceClient(conn).EvaluatePlan(context.Background(),
		&inspectpb.EvaluatePlanRequest{Plan: text, Files: files, Quantities: planQuantities})
	if err != nil {
		return err
	}
	fmt.Fprintf(d.out, "\nwhat a disc costs, %s, in %s, with the yields of this ledger (prices and lives are invented)\n", resp.Basis, resp.Currency)
	for _, q := range resp.Quantities {
		for _, want := range planQuantities {
			if q.GoodUnits != want {
				continue
			}
			c, cell := resp.Combinations[q.Cheapest], q.Cells[q.Cheapest]
			fmt.Fprintf(d.out, "  %9.0f units  %8.2f  (%.2f to %.2f)  %s, inspected: %s; cheapest in %.0f %% of draws\n",
				q.GoodUnits, cell.GetCost(), cell.GetLow(), cell.GetHigh(), c.Process, c.Inspection, 100*cell.ChanceCheapest)
		}
	}
	return nil
}
