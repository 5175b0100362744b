package main

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/server/volume"
)

const (
	demoPlan   = "../../configs/demo/volume.yaml"
	demoCounts = "testdata/volume_counts.yaml"
)

// fewer is the demo plan with fewer draws, beside the files it names.
func fewer(t *testing.T) string {
	t.Helper()
	text, err := os.ReadFile(demoPlan)
	if err != nil {
		t.Fatal(err)
	}
	return writePlan(t, strings.Replace(string(text), "draws: 10000", "draws: 200", 1))
}

func writePlan(t *testing.T, text string) string {
	t.Helper()
	table, err := os.ReadFile("../../configs/demo/volume_threshold.csv")
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "plan.yaml")
	if err := os.WriteFile(filepath.Join(filepath.Dir(path), "volume_threshold.csv"), table, 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func runVolume(t *testing.T, args ...string) (string, error) {
	t.Helper()
	var out bytes.Buffer
	c := volumeCommand()
	c.SilenceErrors, c.SilenceUsage = true, true
	c.SetOut(&out)
	c.SetErr(&out)
	c.SetArgs(args)
	err := c.ExecuteContext(context.Background())
	return out.String(), err
}

func TestVolumeTableOfTheDemo(t *testing.T) {
	page := filepath.Join(t.TempDir(), "plan.html")
	out, err := runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--quantity", "777", "--report", page)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"At 2 600 good units", "At 777 good units", "412 accepted, 58 rejected, 6 held", "Crossovers",
		"the least-cost setting lies in", "looser than the drawing's 200", "Cautions", "EUR per good unit shipped", "All-or-none",
		"Crossovers of other combinations", "by delta", "of 200"} {
		if !strings.Contains(out, want) {
			t.Errorf("the table lacks %q", want)
		}
	}
	if html, err := os.ReadFile(page); err != nil || !bytes.Contains(html, []byte("</html>")) {
		t.Errorf("no whole report: %v", err)
	}
}

// The JSON is one document whose yields are the counts', corrected by hand
// here: 1 - (58/470 - 3/400)/(1 - 4/120 - 3/400).
func TestVolumeJSONUsesTheCorrectedLedgerYield(t *testing.T) {
	out, err := runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--json")
	if err != nil {
		t.Fatal(err)
	}
	var result struct {
		Yields []struct{ Used, Low, High float64 }
	}
	if err := json.Unmarshal([]byte(out), &result); err != nil {
		t.Fatal(err)
	}
	want := 1 - (58./470-3./400)/(1-4./120-3./400)
	got := result.Yields[0]
	if d := got.Used - want; d > 1e-12 || d < -1e-12 || !(got.Low < want && want < got.High) {
		t.Errorf("got %+v, want %v", got, want)
	}
}

func TestVolumeCSVHasALinePerCell(t *testing.T) {
	out, err := runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--csv")
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(strings.NewReader(out)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if (len(rows)-1)%12 != 0 || len(rows) < 12*60 || rows[0][3] != "cost" {
		t.Errorf("%d lines", len(rows))
	}
}

// One line per crossover of the JSON, each with its distribution.
func TestVolumeCSVOfCrossovers(t *testing.T) {
	out, err := runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--csv-crossovers")
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(strings.NewReader(out)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if out, err = runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--json"); err != nil {
		t.Fatal(err)
	}
	var result volume.Result
	if err := json.Unmarshal([]byte(out), &result); err != nil {
		t.Fatal(err)
	}
	if len(rows) != len(result.Crossovers)+1 || len(rows) < 100 {
		t.Fatalf("%d lines of CSV, %d crossovers of JSON", len(rows), len(result.Crossovers))
	}
	for i, x := range result.Crossovers {
		below, row := result.Combinations[x.Below()], rows[i+1]
		if row[0] != number(x.Quantity) || row[2] != below.Process || row[3] != below.Inspection ||
			row[8] != "200" || row[9] != number(x.Distribution.Share) || row[11] != number(x.Distribution.Median) {
			t.Fatalf("line %d: %v, crossover %+v, distribution %+v", i+2, row, x, x.Distribution)
		}
	}
}

func TestVolumeSolve(t *testing.T) {
	out, err := runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--solve", "processes.replicated.yield",
		"--between", "pitch-polished/every-unit", "--between", "replicated/every-unit", "--quantity", "2600")
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(out, "cost the same at 2 600 good units") || !strings.Contains(out, "where both cost") {
		t.Errorf("got %s", out)
	}
}

// Mistakes come with line and column, and are input errors.
func TestVolumePlansWithMistakes(t *testing.T) {
	text, err := os.ReadFile(demoPlan)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ old, new, want string }{
		{"tooling_life_starts: 4000", "tooling_life_starts: -4", "plan.yaml:41:26: processes[0].tooling_life_starts: found -4; allowed: 0 or more"},
		{"{count: {k: 41, n: 60}}", "{value: 1.2}", "plan.yaml:34:22: reworks[0].success.value: found 1.2; allowed: 0 to 1"},
		{"then: scrap", "then: repolish", "comes back to itself"},
		{"currency: EUR", "", "currency"},
		{"    same_errors_as: every-unit\n", "    study: {file: none.yaml, defect_sizes: [{size_um: 20, share: 1}]}\n", "inspections[1].study.file: study \"none.yaml\""},
		{"escape_cost: 160", "escape_costs: 160", "escape_costs"},
	} {
		broken := strings.Replace(string(text), c.old, c.new, 1)
		if broken == string(text) {
			t.Fatalf("the demo plan has no %q", c.old)
		}
		_, err := runVolume(t, writePlan(t, broken), "--ledger-counts", demoCounts)
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "plan.yaml:") {
			t.Errorf("got %v\nwant %s", err, c.want)
		}
	}
}

func TestVolumeExitCodes(t *testing.T) {
	_, err := runVolume(t, writePlan(t, "format: 1\nname: empty\n"))
	if err == nil || exitCode(err) != exitUsage {
		t.Errorf("an empty plan gives %v", err)
	}
	_, err = runVolume(t, fewer(t), "--server", "127.0.0.1:1")
	if err == nil || exitCode(err) != exitFailure {
		t.Errorf("a server that is not there gives %v", err)
	}
	_, err = runVolume(t, fewer(t), "--ledger-counts", demoCounts, "--quantity", "-3")
	if err == nil || exitCode(err) != exitUsage {
		t.Errorf("a negative quantity gives %v", err)
	}
}
