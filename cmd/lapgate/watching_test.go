package main

import (
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

func (f *floor) ListAlarms(_ context.Context, r *inspectpb.ListAlarmsRequest) (*inspectpb.ListAlarmsResponse, error) {
	f.asked = r
	out := &inspectpb.ListAlarmsResponse{Alarms: []*inspectpb.Alarm{{Line: "A", Station: "A1", View: "ring", Name: "dirt or hot pixel", XPx: 812.25, YPx: 40.5,
		Units: []string{"D1", "D2"}, Raised: at(5), Text: "view ring: 5 successive units"}}}
	if !r.OpenOnly {
		out.Alarms = append(out.Alarms, &inspectpb.Alarm{Line: "B", Station: "B1", Raised: at(1), Cleared: at(2)})
	}
	return out, nil
}

func (f *floor) ListDrift(_ context.Context, r *inspectpb.ListDriftRequest) (*inspectpb.ListDriftResponse, error) {
	f.asked = r
	return &inspectpb.ListDriftResponse{Readings: []*inspectpb.Drift{{Line: "A", Station: "A1", View: "ring", Name: "light", State: "warning", PerHour: -0.0125, Units: 64,
		Unit: "D9", At: at(9), Text: "at this pace it meets the hold at 0.85", Latest: &inspectpb.Proof{Name: "light", Value: 0.9625, Low: 0.85, High: 1.15, WarnLow: 0.95, WarnHigh: 1.05, Ok: true}}}}, nil
}

func (f *floor) GetDefectMap(_ context.Context, r *inspectpb.GetDefectMapRequest) (*inspectpb.GetDefectMapResponse, error) {
	f.asked = r
	if r.Coordinates == inspectpb.Coordinates_COORDINATES_PART {
		return nil, inspectpb.ToStatus(pipeline.NotFound("map: the angle of all 3 units is unknown"))
	}
	if r.Filter.Part == "" {
		return nil, inspectpb.ToStatus(pipeline.Invalid("part: not given"))
	}
	return &inspectpb.GetDefectMapResponse{Unit: "um", Units: 4, Points: []*inspectpb.MapPoint{{Unit: "D1", Kind: "dig", Zone: "clear", X: 1000, Y: -500, SizeUm: 80,
		Verdict: inspectpb.Verdict_VERDICT_ACCEPT}}, Zones: []*inspectpb.MapZone{{Name: "clear", OuterDiameter: 23000}}}, nil
}

func TestStationsAreWatched(t *testing.T) {
	f, address := floorAddress(t)
	t.Setenv(serverEnv, address)
	t.Setenv("TZ", "UTC")
	for args, want := range map[string][]string{
		"alarms": {"dirt or hot pixel", "812.2", "40.5", "D1 D2", "open"}, "alarms --all": {"B1"},
		"drift": {"0.9625", "0.95–1.05", "0.85–1.15", "warning", "-0.0125", "at this pace it meets the hold at 0.85"},
	} {
		code, out, messages := call(t, strings.Fields(args)...)
		for _, w := range want {
			if code != 0 || !strings.Contains(out, w) {
				t.Errorf("%s: status %d, %s, no %q in\n%s", args, code, messages, w, out)
			}
		}
	}
	if code, out, _ := call(t, "alarms", "--json"); code != 0 || !json.Valid([]byte(out)) || strings.Contains(out, "B1") || !f.asked.(*inspectpb.ListAlarmsRequest).OpenOnly {
		t.Errorf("open ones alone: %d\n%s", code, out)
	}
	if code, out, _ := call(t, "drift", "--json", "--line", "A"); code != 0 || !json.Valid([]byte(out)) || f.asked.(*inspectpb.ListDriftRequest).Line != "A" {
		t.Errorf("drift: %d\n%s", code, out)
	}
}

func TestMapVerb(t *testing.T) {
	_, address := floorAddress(t)
	t.Setenv(serverEnv, address)
	dir := t.TempDir()
	for _, name := range []string{"map.svg", "map.html"} {
		path := filepath.Join(dir, name)
		code, out, messages := call(t, "map", "--part", "disc-25", "--coordinates", "station", "--lot", "L7", "--out", path)
		if code != 0 || !strings.Contains(out, "clear  dig") || !strings.Contains(out, "(4 units; 0 left out") {
			t.Errorf("%s: status %d, %s\n%s", name, code, messages, out)
		}
		text, err := os.ReadFile(path)
		if err != nil || !strings.Contains(string(text), "Defects of disc-25, lot L7") || !strings.Contains(string(text), "<svg") {
			t.Errorf("%s: %v\n%.200s", name, err, text)
		}
	}
	code, out, _ := call(t, "map", "--part", "disc-25", "--coordinates", "station", "--json")
	var doc struct {
		Unit   string
		Units  int
		Points []struct{ X, Y float64 }
	}
	if err := json.Unmarshal([]byte(out), &doc); code != 0 || err != nil || doc.Unit != "um" || doc.Units != 4 || len(doc.Points) != 1 || doc.Points[0].Y != -500 {
		t.Errorf("json: %d, %v\n%s", code, err, out)
	}
	for args, want := range map[string]int{"map --part disc-25 --coordinates part": exitFailure, "map --part disc-25": exitUsage, "map --coordinates station": exitUsage,
		"map --part disc-25 --coordinates station --out m.png": exitUsage} {
		if code, _, messages := call(t, strings.Fields(args)...); code != want || messages == "" {
			t.Errorf("%s: status %d, want %d: %s", args, code, want, messages)
		}
	}
}

// A unit's story says what a later showing proved of its defects.
func TestUnitTellsWhatIsRemovable(t *testing.T) {
	first, second := showingRecord("11", 1, pipeline.Reject), showingRecord("12", 2, pipeline.Accept)
	id := first.Evidence.Defects[0].Id
	second.Registration = &inspectpb.Registration{PreviousInspectionId: "11", PreviousAttempt: 1, Known: true, RotationDeg: 123.5, Removable: []int32{id},
		PermanentVerdict: inspectpb.Verdict_VERDICT_ACCEPT}
	list, err := newInspections([]*inspectpb.InspectionRecord{first, second})
	if err != nil {
		t.Fatal(err)
	}
	var out strings.Builder
	for _, i := range list {
		tell(&out, i, func(id int) string { return markOf(list, i, id) })
	}
	for _, w := range []string{"peak", ", removable\n", "against attempt 1: turned by 123.50°", "1 are gone or moved [1]", "by its permanent defects alone: accept\n"} {
		if !strings.Contains(out.String(), w) {
			t.Errorf("no %q in\n%s", w, out.String())
		}
	}
}
