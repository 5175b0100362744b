package report

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"testing"

	"lapgate/server/volume"
	"lapgate/server/volume/plan"
)

// volumePlan has two processes, two depths, a threshold table and a ledger yield.
func volumePlan(t *testing.T) *plan.Plan {
	t.Helper()
	turned := plan.Process{Name: "turned", ToolingCost: 500, CostPerStart: []plan.PriceBreak{{FromStarts: 1, Cost: 40}},
		Yield:   plan.Yield{Ledger: &plan.LedgerFilter{Process: "turned", Gate: "every-unit"}},
		Sources: plan.Sources{Source: "a quotation <b>bold</b>"}}
	replicated := plan.Process{Name: "replicated", ToolingCost: 30000, CostPerStart: []plan.PriceBreak{{FromStarts: 1, Cost: 8}},
		Yield: plan.Yield{Beta: &plan.Beta{Alpha: 45, Beta: 5}}}
	all := plan.Inspection{Name: "every-unit", Kind: plan.Full, FalseReject: plan.Share{Count: &plan.Count{K: 2, N: 200}},
		Miss: plan.Share{Count: &plan.Count{K: 3, N: 60}}, Station: plan.Station{CycleTimeS: 9, Crew: 1}}
	p := &plan.Plan{Format: 1, Name: "mirror disc", Currency: "EUR",
		WorkingTime: plan.WorkingTime{HoursPerPeriod: 1700, PeriodsPerYear: 1, LabourCostPerHour: 40},
		Quantities:  plan.Quantities{From: 10, To: 100000, Points: 25, Exact: []float64{2600}},
		Uncertainty: plan.Uncertainty{Draws: 300, Seed: 4, Level: 0.9},
		Outcomes:    plan.Outcomes{EscapeCost: 90}, Processes: []plan.Process{turned, replicated},
		Inspections: []plan.Inspection{{Name: "none", Kind: plan.None}, all},
		Threshold: &plan.Threshold{File: "t.csv", Process: "turned", Inspection: "every-unit", Quantity: 2600, DrawingLimit: 16, Unit: "um",
			Rows: volumeThresholds()}}
	err := p.ResolveLedger(func(plan.LedgerFilter) (plan.Counts, error) {
		return plan.Counts{Started: 206, Accepted: 180, Rejected: 20, Held: 6}, nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func volumeThresholds() []plan.ThresholdRow {
	return []plan.ThresholdRow{
		{Setting: 12, Misses: 0, Nonconforming: 80, FalseRejects: 90, Conforming: 400},
		{Setting: 16, Misses: 3, Nonconforming: 80, FalseRejects: 14, Conforming: 400},
		{Setting: 20, Misses: 14, Nonconforming: 80, FalseRejects: 2, Conforming: 400},
	}
}

func volumeReport(t *testing.T) (string, *volume.Result) {
	t.Helper()
	p := volumePlan(t)
	r, err := volume.Evaluate(context.Background(), p, nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	var page bytes.Buffer
	if err := WriteVolume(&page, p, r); err != nil {
		t.Fatal(err)
	}
	return page.String(), r
}

// The page holds what a reader must find, and stands alone.
func TestVolumeReportHoldsItsFigures(t *testing.T) {
	page, r := volumeReport(t)
	wanted := []string{"turned/every-unit", "replicated/none", "180 accepted, 20 rejected, 6 held", "corrected for the gate every-unit",
		"A verdict is not a certificate", "estimates", "per good unit shipped", "At 2\u202f600 good units", "stays binding",
		"not stated", "the ledger", "a quotation &lt;b&gt;bold&lt;/b&gt;", "volume plan", "looser than the drawing"}
	others := 0
	for _, turn := range r.Turns() {
		wanted = append(wanted, groupThousands(turn.From))
	}
	for _, x := range r.Crossovers {
		if !x.WinnerTurn {
			wanted = append(wanted, "<td class=\"n\">"+groupThousands(x.Distribution.Low)+" to "+groupThousands(x.Distribution.High)+"</td>",
				"% of "+groupThousands(float64(x.Distribution.Draws)))
			others++
		}
	}
	wanted = append(wanted, fmt.Sprintf("<summary>%d further crossovers", others))
	for _, text := range wanted {
		if !strings.Contains(strings.ToLower(page), strings.ToLower(text)) {
			t.Errorf("the page lacks %q", text)
		}
	}
	for _, outside := range []string{"http://", "https://", "<script", "<link", "url("} {
		if at := strings.Index(strings.ReplaceAll(page, "http://www.w3.org", ""), outside); at >= 0 {
			t.Errorf("the page reaches outside itself: %s", outside)
		}
	}
	if len(r.Turns()) == 0 || others == 0 {
		t.Errorf("%d turns and %d other crossovers in the test's plan", len(r.Turns()), others)
	}
}

// Each picture is well-formed and has a line per combination drawn.
func TestVolumeReportPictures(t *testing.T) {
	page, _ := volumeReport(t)
	pictures := strings.Split(page, "<svg ")[1:]
	if len(pictures) != 4 { // overview, two processes, threshold
		t.Fatalf("%d pictures, want 4", len(pictures))
	}
	for _, picture := range pictures {
		text, _, _ := strings.Cut(picture, "</svg>")
		in := xml.NewDecoder(strings.NewReader("<svg " + text + "</svg>"))
		paths := 0
		for {
			token, err := in.Token()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			if start, ok := token.(xml.StartElement); ok && start.Name.Local == "path" {
				paths++
			}
		}
		if paths < 5 {
			t.Errorf("a picture of %d paths is empty", paths)
		}
	}
}

func TestVolumeBarsEndToEnd(t *testing.T) {
	page, r := volumeReport(t)
	if strings.Contains(page, "NaN") || strings.Contains(page, "ZgotmplZ") {
		t.Error("the page holds a value that is none")
	}
	for _, q := range r.Quantities {
		for _, c := range q.Cells {
			at := 0.0
			for _, bar := range volumeBars(c.Parts, float64(c.Cost)) {
				if math.Abs(bar.From-at) > 1e-9 {
					t.Fatalf("bar %s starts at %v, want %v", bar.Part, bar.From, at)
				}
				at += bar.Width
			}
			if at > 100+1e-9 || at < 99 {
				t.Errorf("bars end at %v %%", at)
			}
		}
	}
}

func TestThousandsAreGrouped(t *testing.T) {
	for v, want := range map[float64]string{7: "7", 1234: "1\u202f234", 1e6: "1\u202f000\u202f000", -52000: "-52\u202f000", -520: "-520"} {
		if got := groupThousands(v); got != want {
			t.Errorf("%v: got %q, want %q", v, got, want)
		}
	}
}
