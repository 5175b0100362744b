package alarm

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

// bench is a watch over a real ledger.
type bench struct {
	*Watch
	t     *testing.T
	clock time.Time
}

func newBench(t *testing.T, dsn string) *bench {
	t.Helper()
	store, err := ledger.Open(context.Background(), dsn)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { store.Close() })
	b := &bench{t: t, clock: noon}
	b.Watch = &Watch{Settings: Settings{Units: 5, TolerancePx: 3, Hold: true}, Ledger: store, Now: func() time.Time { return b.clock },
		Log: slog.New(slog.NewTextHandler(io.Discard, nil))}
	store.Now = b.Now
	return b
}

// show records a unit with defects at these places and light of this share; it returns
// whether the gate held it.
func (b *bench) show(unit string, light float64, places ...pipeline.Point) (held bool) {
	b.t.Helper()
	b.clock = b.clock.Add(time.Minute)
	id := pipeline.Identity{Part: "disc-25", Lot: "L1", Unit: unit, Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production}
	holds, leave, err := b.Enter(context.Background(), id, nil, nil)
	if err != nil {
		b.t.Fatal(err)
	}
	defer leave()
	v := pipeline.ViewEvidence{Name: "ring", UMPerPx: 25, Calibration: "sha256:cc", Region: pipeline.RegionEvidence{CentreX: 800, CentreY: 600, RadiusPx: 500,
		Zones: []pipeline.ZoneEvidence{{Name: "clear", OuterDiameterMM: 23}}},
		Proofs: []pipeline.Proof{{Name: pipeline.ProofLight, Value: light, Low: 0.85, High: 1.15, WarnLow: 0.95, WarnHigh: 1.05, OK: light >= 0.85}}}
	for i, p := range places {
		v.Defects = append(v.Defects, pipeline.Defect{ID: i + 1, Kind: pipeline.Dig, View: "ring", Place: pipeline.Place{XPx: p.X, YPx: p.Y}})
	}
	in, _, err := b.Ledger.Record(context.Background(), ledger.Inspection{Identity: id, Digest: unit, Captured: b.clock, Judged: b.clock,
		Evidence: pipeline.Evidence{Views: []pipeline.ViewEvidence{v}, Coverage: 1}, Judgement: pipeline.Judgement{Verdict: pipeline.Accept}})
	if err != nil {
		b.t.Fatal(err)
	}
	b.Recorded(in)
	return len(holds) > 0
}

func (b *bench) alarms(open bool) []ledger.Alarm {
	b.t.Helper()
	list, err := b.Ledger.Alarms(context.Background(), ledger.AlarmFilter{OpenOnly: open}, 0)
	if err != nil {
		b.t.Fatal(err)
	}
	return list
}

// randomPlaces are n places evenly over the region.
func randomPlaces(r *rand.Rand, n int) []pipeline.Point {
	var out []pipeline.Point
	for range n {
		azimuth, radius := 2*math.Pi*r.Float64(), 460*math.Sqrt(r.Float64())
		out = append(out, pipeline.Point{X: 800 + radius*math.Cos(azimuth), Y: 600 + radius*math.Sin(azimuth)})
	}
	return out
}

func TestRandomDigsRaiseNoAlarm(t *testing.T) {
	b := newBench(t, filepath.Join(t.TempDir(), "ledger.db"))
	r := rand.New(rand.NewPCG(5, 5))
	for i := range 200 {
		b.show(fmt.Sprintf("U%03d", i), 1, randomPlaces(r, 12)...)
	}
	if list := b.alarms(false); len(list) != 0 {
		t.Errorf("alarms %+v", list)
	}
}

// Dirt among random digs is an alarm at the fifth unit, also across a start; units are then
// held; five clean ones clear it.
func TestDirtAcrossAStart(t *testing.T) {
	dsn := filepath.Join(t.TempDir(), "ledger.db")
	b := newBench(t, dsn)
	r := rand.New(rand.NewPCG(6, 6))
	dirty := func(i int) []pipeline.Point {
		return append(randomPlaces(r, 6), pipeline.Point{X: 700 + r.Float64() - 0.5, Y: 500 + r.Float64() - 0.5})
	}
	for i := range 3 {
		b.show(fmt.Sprintf("U%d", i), 1, dirty(i)...)
	}
	clock := b.clock
	b = newBench(t, dsn)
	b.clock = clock

	b.show("U3", 1, dirty(3)...)
	if list := b.alarms(true); len(list) != 0 {
		t.Fatalf("four units: %+v", list)
	}
	if b.show("U4", 1, dirty(4)...) {
		t.Error("the fifth unit was held before the alarm")
	}
	list := b.alarms(true)
	if len(list) != 1 || strings.Join(list[0].Units, " ") != "U0 U1 U2 U3 U4" || math.Hypot(list[0].XPx-700, list[0].YPx-500) > 1 || list[0].View != "ring" || list[0].Name != pipeline.ReasonDirt {
		t.Fatalf("five units: %+v", list)
	}
	if by := b.By(list[0].RaisedBy); len(by) != 1 || !by[0].Open() {
		t.Errorf("event: %+v", by)
	}
	for i := range 5 {
		if !b.show(fmt.Sprintf("C%d", i), 1, randomPlaces(r, 6)...) {
			t.Errorf("clean unit %d was not held", i)
		}
	}
	if list := b.alarms(true); len(list) != 0 {
		t.Errorf("still open: %+v", list)
	}
	if b.show("C5", 1) {
		t.Error("held after the alarm was cleared")
	}
	if all := b.alarms(false); len(all) != 1 || all[0].ClearedBy == 0 {
		t.Errorf("history: %+v", all)
	}
}

// A showing that proves nothing, and a unit that does not cover the place, neither count
// for an alarm nor against one.
func TestWhatSaysNothingIsLeftOut(t *testing.T) {
	b := newBench(t, filepath.Join(t.TempDir(), "ledger.db"))
	dirt, outside := pipeline.Point{X: 700, Y: 500}, pipeline.Point{X: 10, Y: 10}
	for i := range 4 {
		b.show(fmt.Sprintf("U%d", i), 1, dirt, outside)
		b.show(fmt.Sprintf("dark%d", i), 0.1)
	}
	if list := b.alarms(true); len(list) != 0 {
		t.Fatalf("four units: %+v", list)
	}
	b.show("U4", 1, dirt)
	if list := b.alarms(true); len(list) != 1 {
		t.Errorf("five units with dark ones between: %+v", list)
	}
}

// The lamp loses 0.2 % at each unit with 0.5 % of scatter: long before a unit is warned of by
// itself, the line says when it will hold. One that only scatters is steady.
func TestSlowDriftIsWarnedOfBeforeTheHold(t *testing.T) {
	b := newBench(t, filepath.Join(t.TempDir(), "ledger.db"))
	r := rand.New(rand.NewPCG(7, 7))
	warnedAt := 0.
	for i := range 100 {
		share := 1 - 0.002*float64(i)
		b.show(fmt.Sprintf("U%03d", i), share+0.005*r.NormFloat64())
		list, err := b.Drifts(context.Background(), "A", "A1")
		if err != nil || len(list) != 1 {
			t.Fatal(list, err)
		}
		if d := list[0]; d.State == "warning" && strings.Contains(d.Text, "at this pace it meets the hold at 0.85") {
			warnedAt = share
			if want := -0.002 * 60; math.Abs(d.PerHour-want) > 0.2*math.Abs(want) {
				t.Errorf("slope %.4f in an hour, want %.4f", d.PerHour, want)
			}
			break
		}
	}
	if warnedAt < 0.9 || warnedAt > 0.97 {
		t.Errorf("warned at %.3f of the light, want before the hold at 0.85 and not by chance", warnedAt)
	}
	steady := newBench(t, filepath.Join(t.TempDir(), "ledger.db"))
	for i := range 100 {
		steady.show(fmt.Sprintf("U%03d", i), 1+0.02*(2*r.Float64()-1))
	}
	if list, err := steady.Drifts(context.Background(), "A", "A1"); err != nil || list[0].State != "steady" || list[0].Units != 100 {
		t.Errorf("steady lamp: %+v, %v", list, err)
	}
}
