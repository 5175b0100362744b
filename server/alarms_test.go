package server_test

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
	"lapgate/plugins/stagetest"
	"lapgate/proto/inspectpb"
	"lapgate/server/alarm"
)

// Lamp, lens, camera height and read-out window leave the calibration: first a warning that
// the unit's story, the station and its drift show while units are accepted, then a hold.
func TestDriftFromFrameToWarningToHold(t *testing.T) {
	s := stagetest.SmallScene()
	steps := []struct {
		kind          string
		value         float64
		proof, stands string
	}{
		{"", 0, pipeline.ProofLight, "steady"},
		{render.SpoilLamp, 0.91, pipeline.ProofLight, "warning"}, {render.SpoilLamp, 0.8, pipeline.ProofLight, "hold"},
		{render.SpoilDefocus, 2, pipeline.ProofFocus, "warning"}, {render.SpoilDefocus, 3.5, pipeline.ProofFocus, "hold"},
		{render.SpoilDiameter, 6.03, pipeline.ProofScale, "warning"}, {render.SpoilDiameter, 6.07, pipeline.ProofScale, "hold"},
		{render.SpoilShift, 2, pipeline.ProofPattern, "hold"},
	}
	for i, step := range steps {
		if step.kind != "" {
			s.Spoilers = append(s.Spoilers, render.Spoiler{Unit: i, Kind: step.kind, Value: step.value})
		}
	}
	scene := stagetest.Render(t, s)
	r := newRig(t, rigOptions{recipe: renderedRecipe, calibrations: scene.Calibrations})
	for i, step := range steps {
		u := scene.Unit(i)
		v := r.inspectRendered(scene, u)
		want := map[string]inspectpb.Verdict{"steady": accept, "warning": accept, "hold": hold}[step.stands]
		if v.Judgement.Verdict != want || want == hold && !strings.Contains(fmt.Sprint(v.Judgement.Reasons), "not proven: "+step.proof) {
			t.Errorf("%s %v: %v, want %v for %s", step.kind, step.value, v.Judgement, want, step.proof)
		}
		r.wantStands(u.Identity.Unit, step.proof, step.stands)
	}
	again := newRig(t, rigOptions{recipe: renderedRecipe, calibrations: scene.Calibrations, dsn: r.dsn}) // after a start the ledger tells
	drift, err := again.ListDrift(context.Background(), &inspectpb.ListDriftRequest{Line: "A", Station: "A1"})
	must(t, err)
	if len(drift.Readings) < 2 || drift.Readings[0].Units < 2 {
		t.Errorf("after a start: %v", drift.Readings)
	}
}

// wantStands looks at a reading in the unit's story, in the drift of its station and in the
// listing of stations.
func (r *rig) wantStands(unit, proof, state string) {
	r.t.Helper()
	story, err := r.GetUnit(context.Background(), &inspectpb.GetUnitRequest{Unit: unit})
	must(r.t, err)
	found := false
	for _, p := range story.Inspections[0].Evidence.Views[0].Proofs {
		if p.Name == proof {
			found = true
			if got := inspectpb.ToProof(p); got.State() != state || got.WarnHigh <= 1 || got.High < got.WarnHigh {
				r.t.Errorf("unit %s: %+v is %s, want %s", unit, got, got.State(), state)
			}
		}
	}
	drift, err := r.ListDrift(context.Background(), &inspectpb.ListDriftRequest{Line: "A"})
	must(r.t, err)
	stands := ""
	for _, d := range drift.Readings {
		if d.Name == proof && d.Unit == unit {
			stands = d.State
		}
	}
	if !found || stands != state {
		r.t.Errorf("unit %s, %s: in the story %v, the drift says %q, want %q", unit, proof, found, stands, state)
	}
	list, err := r.ListStations(context.Background(), &inspectpb.ListStationsRequest{})
	must(r.t, err)
	if warned := strings.Contains(strings.Join(list.Stations[0].Warnings, "; "), proof+" is "); warned != (state != "steady") {
		r.t.Errorf("unit %s: the station's warnings are %q", unit, list.Stations[0].Warnings)
	}
}

// dirt draws on a frame what does not turn with the part.
func dirt(raw raster.Raw, x, y, radius int) {
	for dy := -radius; dy <= radius; dy++ {
		for dx := -radius; dx <= radius; dx++ {
			if dx*dx+dy*dy <= radius*radius {
				raw.Data[(y+dy)*raw.Stride+x+dx] = 120
			}
		}
	}
}

// inspectDirty shows a unit through a camera with dirt at a place.
func (r *rig) inspectDirty(scene *stagetest.Rendered, u render.Unit, x, y, radius int) *inspectpb.UnitVerdict {
	r.t.Helper()
	f, err := scene.Frame(&u, "ring")
	must(r.t, err)
	dirt(f.Raw, x, y, radius)
	f.Header.CRC32C = pipeline.Checksum(f.Raw.Data)
	resp, err := r.InspectUnit(context.Background(), &inspectpb.InspectUnitRequest{Frames: []*inspectpb.Frame{{Header: inspectpb.FromFrameHeader(f.Header), Data: f.Raw.Data}}})
	must(r.t, err)
	return resp.Verdict
}

// A spot on the lens and a hot pixel, over parts that lie turned and have digs of their own:
// the alarm comes at the fifth unit, across a start of the server, and is told to those who
// watch; units are held where the settings say so; five clean ones clear it.
func TestDirtOnTheCameraRaisesAnAlarm(t *testing.T) {
	s := stagetest.SmallScene()
	s.Processes[0].Populations = []render.Population{{Kind: pipeline.Dig, PerUnit: 4, SizeUM: render.Distribution{Shape: render.ShapeUniform, Min: 60, Max: 110}, BrightnessDN: render.Distribution{Value: 80}}}
	scene := stagetest.Render(t, s)
	for name, radius := range map[string]int{"lens": 2, "hot pixel": 0} {
		t.Run(name, func(t *testing.T) {
			o := rigOptions{recipe: renderedRecipe, calibrations: scene.Calibrations, dsn: filepath.Join(t.TempDir(), "ledger.db"),
				alarms: alarm.Settings{Units: 5, TolerancePx: 3, Hold: true}}
			r := newRig(t, o)
			for i := range 3 {
				r.inspectDirty(scene, scene.Unit(i), 230, 150, radius)
			}
			r = newRig(t, o)
			watch, err := r.yield.Watch(context.Background(), &inspectpb.WatchRequest{})
			must(t, err)
			_, err = watch.Header()
			must(t, err)
			for i := 3; i < 6; i++ {
				open, err := r.ListAlarms(context.Background(), &inspectpb.ListAlarmsRequest{OpenOnly: true})
				must(t, err)
				if want := max(0, i-4); len(open.Alarms) != want {
					t.Fatalf("before unit %d: %v, want %d", i+1, open.Alarms, want)
				}
				v := r.inspectDirty(scene, scene.Unit(i), 230, 150, radius)
				if held := strings.Contains(fmt.Sprint(v.Judgement.Reasons), pipeline.ReasonDirt); held != (i == 5) {
					t.Errorf("unit %d: %v", i+1, v.Judgement)
				}
			}
			for i := 3; i < 6; i++ {
				event, err := watch.Recv()
				must(t, err)
				if len(event.Alarms) != 0 != (i == 4) {
					t.Errorf("event of unit %d: %v", i+1, event.Alarms)
				}
			}
			list, err := r.ListStations(context.Background(), &inspectpb.ListStationsRequest{})
			must(t, err)
			if a := list.Stations[0].Alarms; len(a) != 1 || !strings.Contains(a[0], "dirt or hot pixel: view ring: 5 successive units") || !strings.Contains(a[0], "T001, T002, T003, T004, T005") {
				t.Errorf("station: %q", a)
			}
			for i := 6; i < 11; i++ {
				r.inspectRendered(scene, scene.Unit(i))
			}
			all, err := r.ListAlarms(context.Background(), &inspectpb.ListAlarmsRequest{})
			must(t, err)
			if len(all.Alarms) != 1 || all.Alarms[0].Cleared == nil || all.Alarms[0].XPx < 227 || all.Alarms[0].XPx > 233 {
				t.Errorf("after five clean units: %v", all.Alarms)
			}
		})
	}
}
