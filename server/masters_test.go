package server_test

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// masterRecipe names a clean master and one with a dig, due every four hours.
const masterRecipe = recipeText + `masters:
  - {unit: M-CLEAN, expect: accept, every_minutes: 240}
  - {unit: M-DIG, expect: reject, view: ring, kind: dig, at_least: 65, every_minutes: 240, grace_minutes: 5}
`

func newShift(t *testing.T) *rig {
	return newRig(t, rigOptions{recipe: masterRecipe, clock: &clock{at: time.Now().UTC().Truncate(time.Hour)}})
}

// show sends one unit and returns its verdict with its reasons as text.
func (r *rig) show(unit string, attempt int, purpose pipeline.Purpose, diameter float64, change ...func(*pipeline.FrameHeader)) (inspectpb.Verdict, string) {
	r.t.Helper()
	l := r.line()
	r.clock.advance(time.Minute)
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(r.shown*10+i), diameter)
		h := header(unit, view, raw)
		h.Attempt, h.Purpose, h.Captured = attempt, purpose, r.clock.now()
		for _, f := range change {
			f(&h)
		}
		l.show(h, raw)
	}
	r.shown++
	l.finish()
	if len(l.refused) > 0 {
		return inspectpb.Verdict_VERDICT_UNSPECIFIED, l.refused[0].Message
	}
	v, reasons := l.verdict(unit)
	return v, strings.Join(reasons, "; ")
}

func (r *rig) want(verdict inspectpb.Verdict, reason string) func(inspectpb.Verdict, string) {
	r.t.Helper()
	return func(got inspectpb.Verdict, reasons string) {
		r.t.Helper()
		if got != verdict || !strings.Contains(reasons, reason) {
			r.t.Errorf("%v because of %q, want %v with %q", got, reasons, verdict, reason)
		}
	}
}

// passMasters shows both masters, which pass.
func (r *rig) passMasters() {
	r.t.Helper()
	r.round++
	r.want(accept, "")(r.show("M-CLEAN", r.round, pipeline.Master, 0))
	r.want(reject, "dig too large")(r.show("M-DIG", r.round, pipeline.Master, 8))
}

func (r *rig) suspects(master string) []string {
	r.t.Helper()
	resp, err := r.masters.ListSuspects(context.Background(), &inspectpb.ListSuspectsRequest{})
	must(r.t, err)
	var out []string
	for _, s := range resp.Suspects {
		if s.Master == master {
			out = append(out, s.Identity.Unit)
		}
	}
	return out
}

// A failing master marks exactly the right units suspect: those of its part shown on its
// line and station since its last pass; no later pass takes that back.
func TestAFailingMasterMarksExactlyTheRightUnits(t *testing.T) {
	r := newShift(t)
	otherLine := func(h *pipeline.FrameHeader) { h.Line = "B" }
	r.passMasters()
	r.want(accept, "")(r.show("old", 1, pipeline.Production, 0))
	r.passMasters()
	r.want(accept, "")(r.show("M-CLEAN", 1, pipeline.Master, 0, otherLine))
	r.want(reject, "")(r.show("M-DIG", 1, pipeline.Master, 8, otherLine))
	r.want(accept, "")(r.show("u1", 1, pipeline.Production, 0))
	r.want(accept, "")(r.show("b1", 1, pipeline.Production, 0, otherLine))
	r.want(reject, "dig too large")(r.show("u2", 1, pipeline.Production, 8))
	r.want(accept, "")(r.show("s1", 1, pipeline.Study, 0))
	if got := r.suspects("M-DIG"); len(got) != 0 {
		t.Errorf("suspect before anything failed: %v", got)
	}
	r.want(accept, "")(r.show("M-DIG", 8, pipeline.Master, 0)) // its dig is not seen any more
	if got := r.suspects("M-DIG"); !slices.Equal(got, []string{"u1", "u2"}) {
		t.Errorf("suspect: %v, want u1 and u2", got)
	}
	r.want(hold, "master failed: master M-DIG failed at")(r.show("u3", 1, pipeline.Production, 0))
	r.want(hold, "master failed")(r.show("u4", 1, pipeline.Production, 8)) // rejects hold as well
	r.want(accept, "")(r.show("s2", 1, pipeline.Study, 0))
	r.want(accept, "")(r.show("b2", 1, pipeline.Production, 0, otherLine))
	r.want(reject, "")(r.show("M-DIG", 9, pipeline.Master, 8))
	r.want(accept, "")(r.show("u5", 1, pipeline.Production, 0))
	if got := r.suspects("M-DIG"); !slices.Equal(got, []string{"u1", "u2"}) {
		t.Errorf("suspect after the pass: %v, want u1 and u2 still", got)
	}
	if got := r.suspects("M-CLEAN"); len(got) != 0 {
		t.Errorf("suspect for the other master: %v", got)
	}
	story, err := r.GetUnit(context.Background(), &inspectpb.GetUnitRequest{Unit: "u1"})
	must(t, err)
	if s := story.Inspections[0].Suspicions; len(s) != 1 || s[0].Cause != "failed" || !strings.Contains(s[0].Why, "the verdict is accept, expected was reject") {
		t.Errorf("story of u1 %v, want the suspicion", s)
	}
}

// Every unit is either held or marked, however the showing of the failing master falls
// between the units that are being judged.
func TestNoUnitSlipsBetweenAFailingMasterAndItsMarks(t *testing.T) {
	r := newShift(t)
	r.passMasters()
	l := r.line()
	var units []string
	for i := range 40 {
		unit := "c" + string(rune('a'+i%26)) + string(rune('a'+i/26))
		diameter, purpose := 0.0, pipeline.Production
		if i == 20 {
			unit, purpose = "M-DIG", pipeline.Master
		} else {
			units = append(units, unit)
		}
		for j, view := range []string{"ring", "bar"} {
			raw := frame(uint64(i*10+j), diameter)
			h := header(unit, view, raw)
			h.Purpose, h.Captured, h.Attempt = purpose, r.clock.now(), 1
			if purpose == pipeline.Master {
				h.Attempt = 2
			}
			l.show(h, raw)
		}
	}
	l.finish()
	marked := r.suspects("M-DIG")
	held := 0
	for _, u := range units {
		v, _ := l.verdict(u)
		if (v == hold) == slices.Contains(marked, u) {
			t.Errorf("unit %s: %v, suspect %v; want it held or suspect", u, v, slices.Contains(marked, u))
		}
		if v == hold {
			held++
		}
	}
	if held == len(units) || len(marked) == len(units) {
		t.Logf("%d held and %d marked: the master came first or last", held, len(marked))
	}
}

// Due by the clock: within the grace nothing happens, beyond it the station holds and the
// units since the last pass are suspect.
func TestAnOverdueMasterHoldsTheStation(t *testing.T) {
	r := newShift(t)
	r.want(hold, "master overdue: master M-CLEAN is due: it never passed here")(r.show("u0", 1, pipeline.Production, 0))
	r.passMasters()
	r.want(accept, "")(r.show("u1", 1, pipeline.Production, 0))
	r.clock.advance(3 * time.Hour)
	r.want(accept, "")(r.show("u2", 1, pipeline.Production, 0))
	if got := r.suspects("M-DIG"); len(got) != 0 {
		t.Errorf("suspect %v, want none", got)
	}
	r.clock.advance(time.Hour)
	r.want(hold, "master overdue: master M-CLEAN was due at")(r.show("u3", 1, pipeline.Production, 0)) // no grace
	if got := r.suspects("M-CLEAN"); !slices.Equal(got, []string{"u1", "u2"}) {
		t.Errorf("suspect for M-CLEAN: %v, want u1 and u2", got)
	}
	if got := r.suspects("M-DIG"); len(got) != 0 {
		t.Errorf("suspect for M-DIG, which is within its grace: %v", got)
	}
	r.clock.advance(10 * time.Minute)
	r.want(hold, "master M-DIG was due at")(r.show("u4", 1, pipeline.Production, 0))
	if got := r.suspects("M-DIG"); !slices.Equal(got, []string{"u1", "u2", "u3"}) {
		t.Errorf("suspect for M-DIG: %v, want u1, u2 and u3", got)
	}
	r.passMasters()
	r.want(accept, "")(r.show("u5", 1, pipeline.Production, 0))
	r.want(hold, "master shown as a unit: unit M-CLEAN is a master")(r.show("M-CLEAN", 1, pipeline.Production, 0))
}

// Restart, another recipe and a changed lamp make masters due; the units before are not
// suspect for it.
func TestChangesMakeMastersDue(t *testing.T) {
	r := newShift(t)
	ctx := context.Background()
	lamp := func(id string) func(*pipeline.FrameHeader) {
		return func(h *pipeline.FrameHeader) { h.Tags = map[string]string{"lamp": id} }
	}
	r.want(accept, "")(r.show("M-CLEAN", 50, pipeline.Master, 0, lamp("L1")))
	r.want(reject, "")(r.show("M-DIG", 50, pipeline.Master, 8, lamp("L1")))
	r.want(accept, "")(r.show("u1", 1, pipeline.Production, 0, lamp("L1")))
	r.want(hold, "the lamp of view bar is L2 and was L1")(r.show("u2", 1, pipeline.Production, 0, lamp("L2")))
	change := &inspectpb.NoteChangeRequest{Line: "A", Station: "A1", What: "bulb", Person: "O. Perator", Reason: "flickers"}
	if _, err := r.masters.NoteChange(ctx, change); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "lamp") {
		t.Errorf("a change of a bulb: %v, want InvalidArgument that lists lamp", err)
	}
	change.What = "lamp"
	_, err := r.masters.NoteChange(ctx, change)
	must(t, err)
	r.want(hold, "the lamp was changed at")(r.show("u3", 1, pipeline.Production, 0, lamp("L1")))
	r.passMasters()
	r.want(accept, "")(r.show("u4", 1, pipeline.Production, 0))
	r.save(strings.Replace(masterRecipe, "at_most: 60", "at_most: 59", 1))
	r.want(hold, "the recipe is another")(r.show("u5", 1, pipeline.Production, 0))
	r.passMasters()
	r.want(accept, "")(r.show("u6", 1, pipeline.Production, 0))
	r.serve(rigOptions{maxBytes: 64 << 20, clock: r.clock}) // starts anew on the same ledger
	r.want(hold, "the server started at")(r.show("u7", 1, pipeline.Production, 0))
	r.passMasters()
	r.want(accept, "")(r.show("u8", 1, pipeline.Production, 0))
	if all, _, err := r.ledger.Suspects(ctx, ledger.Filter{}, ledger.Page{}); err != nil || len(all) != 0 {
		t.Errorf("%d suspects (%v), want none", len(all), err)
	}
}

// A master whose frames do not all come proves nothing either way.
func TestAMasterThatDidNotArrive(t *testing.T) {
	r := newShift(t)
	r.passMasters()
	l := r.line()
	raw := frame(7, 8)
	h := header("M-DIG", "ring", raw)
	h.Purpose, h.Attempt, h.Captured = pipeline.Master, 77, r.clock.now()
	l.show(h, raw)
	l.finish()
	wantVerdict(t, l, "M-DIG", reject, "missing view") // what ring saw is enough for that
	r.want(accept, "")(r.show("u1", 1, pipeline.Production, 0))
	checks, err := r.masters.ListChecks(context.Background(), &inspectpb.ListChecksRequest{Master: "M-DIG"})
	must(t, err)
	if len(checks.Checks) != 2 || checks.Checks[0].Result != inspectpb.CheckResult_CHECK_RESULT_VOID || checks.Checks[1].Result != inspectpb.CheckResult_CHECK_RESULT_PASS {
		t.Fatalf("checks %v, want a void one after the pass", checks.Checks)
	}
	// The disc of 8 px at 10 µm/px: 80 µm, at half height within one pixel.
	if c := checks.Checks[1]; c.GetValue() < 70 || c.GetValue() > 90 || c.GetLow() != 65 || c.High != nil || c.Conditions["calibration of view ring"] != "none" {
		t.Errorf("check %v, want a diameter of 70 to 90 µm, at least 65", c)
	}
}

func TestStandingOfMastersAndStations(t *testing.T) {
	r := newShift(t)
	ctx := context.Background()
	beat := func() *inspectpb.HeartbeatResponse {
		h, err := r.Heartbeat(ctx, &inspectpb.HeartbeatRequest{Line: "A", Station: "A1"})
		must(t, err)
		return h
	}
	r.passMasters()
	if h := beat(); h.State != inspectpb.StationState_STATION_STATE_OK || len(h.Because) != 0 || h.ServerTime == nil {
		t.Errorf("heartbeat %v, want ok", h)
	}
	r.want(reject, "")(r.show("M-CLEAN", 99, pipeline.Master, 8))
	if h := beat(); h.State != inspectpb.StationState_STATION_STATE_HOLDING || len(h.Because) != 1 || !strings.Contains(h.Because[0], "master failed: master M-CLEAN") {
		t.Errorf("heartbeat %v, want holding because of M-CLEAN", h)
	}
	list, err := r.ListStations(ctx, &inspectpb.ListStationsRequest{})
	must(t, err)
	if len(list.Stations) != 1 || list.Stations[0].State != inspectpb.StationState_STATION_STATE_HOLDING || list.Stations[0].Heartbeat == nil || list.Stations[0].Inspection == nil {
		t.Errorf("stations %v, want A/A1 holding, heard and seen", list.Stations)
	}
	m, err := r.masters.ListMasters(ctx, &inspectpb.ListMastersRequest{Line: "A"})
	must(t, err)
	if len(m.Masters) != 2 || m.Masters[0].Reason != pipeline.ReasonMaster || m.Masters[1].Reason != "" || m.Masters[1].Due == nil || m.Masters[1].LastPass == nil {
		t.Errorf("masters %v, want M-CLEAN failed and M-DIG due later", m.Masters)
	}
	if _, err := r.Heartbeat(ctx, &inspectpb.HeartbeatRequest{Line: "A"}); status.Code(err) != codes.InvalidArgument {
		t.Errorf("a heartbeat without station: %v, want InvalidArgument", err)
	}
}

// A lamp that fades by 2 % a shift: the peak of the master's dig falls with it, measured
// by the real stages. The warning comes before the first missed master.
func TestAFadingLampIsWarnedOfBeforeTheFirstMissedMaster(t *testing.T) {
	recipe := strings.Replace(masterRecipe, "at_least: 65,", "measure: peak_sigma, at_least: LEAST,", 1)
	// First at no bound, to see where the peak starts; then with one at 75 % of it.
	r := newRig(t, rigOptions{recipe: strings.Replace(recipe, "LEAST", "0", 1), clock: &clock{at: time.Now().UTC().Truncate(time.Hour)}})
	fade := func(r *rig, shift int) {
		t.Helper()
		l := r.line()
		r.clock.advance(8 * time.Hour)
		for i, view := range []string{"ring", "bar"} {
			raw := dimmed(uint64(shift*10+i), 11, 0.4*math.Pow(0.98, float64(shift)))
			h := header("M-DIG", view, raw)
			h.Attempt, h.Purpose, h.Captured = shift+1, pipeline.Master, r.clock.now()
			l.show(h, raw)
		}
		l.finish()
	}
	history := func(r *rig) []*inspectpb.MasterCheck {
		t.Helper()
		c, err := r.masters.ListChecks(context.Background(), &inspectpb.ListChecksRequest{Master: "M-DIG"})
		must(t, err)
		return c.Checks
	}
	fade(r, 0)
	first := history(r)[0].GetValue()
	if first < 10 {
		t.Fatalf("the dig starts at %.1f sigma, want one that is well seen", first)
	}
	r = newRig(t, rigOptions{recipe: strings.Replace(recipe, "LEAST", fmt.Sprintf("%.2f", 0.75*first), 1), clock: &clock{at: time.Now().UTC().Truncate(time.Hour)}})
	warned, missed := -1, -1
	for shift := 0; shift < 40 && missed < 0; shift++ {
		fade(r, shift)
		if history(r)[0].Result == inspectpb.CheckResult_CHECK_RESULT_FAIL {
			missed = shift
			break
		}
		m, err := r.masters.ListMasters(context.Background(), &inspectpb.ListMastersRequest{})
		must(t, err)
		for _, one := range m.Masters {
			if one.Master == "M-DIG" && one.Warning != "" && warned < 0 {
				warned = shift
				t.Logf("shift %d: %s", shift, one.Warning)
			}
		}
	}
	if missed < 8 || warned < 3 || warned >= missed {
		t.Errorf("warned in shift %d, first missed in shift %d; want the warning before, and not within the first showings", warned, missed)
	}
	t.Logf("warned in shift %d, first missed in shift %d", warned, missed)
}

// dimmed is frame with the disc's light at a share.
func dimmed(seed uint64, diameter, share float64) raster.Raw {
	raw, dark := frame(seed, diameter), frame(seed, 0)
	for i := range raw.Data {
		raw.Data[i] = dark.Data[i] + byte(math.Round(share*float64(int(raw.Data[i])-int(dark.Data[i]))))
	}
	return raw
}
