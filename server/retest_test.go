package server_test

import (
	"context"
	"math"
	"slices"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/stagetest"
	"lapgate/proto/inspectpb"
)

// renderedRecipe judges the small rendered disc under its ring light.
const renderedRecipe = `format: 1
part: disc
min_coverage: 0.9
view_timeout_ms: 20000
views:
  - name: ring
    light: ring
    stages:
      - {type: proof, patch_x_px: 6, patch_y_px: 6, patch_width_px: 32, patch_height_px: 32}
      - {type: region, shape: found_circle, diameter_mm: 6, diameter_tolerance_mm: 0.2, polarity: rim, rim_mm: 0.25}
      - {type: flatfield}
      - {type: darkfield, grid_px: 32}
      - {type: blobs}
unit: [{type: merge}, {type: classify}]
limits:
  - {name: defect too large, each: diameter_um, at_most: 180, unit: um}
  - {name: too much area, value: "sum(defects.map(d, d.area_um2))", at_most: 60000, unit: um2}
`

// inspectRendered shows a rendered unit and returns its verdict.
func (r *rig) inspectRendered(scene *stagetest.Rendered, u render.Unit) *inspectpb.UnitVerdict {
	r.t.Helper()
	views, _, err := scene.Shoot(u)
	must(r.t, err)
	req := &inspectpb.InspectUnitRequest{}
	for _, v := range views {
		if v.Name != "ring" {
			continue
		}
		req.Frames = append(req.Frames, &inspectpb.Frame{Header: inspectpb.FromFrameHeader(v.Frames[0].Header), Data: v.Frames[0].Raw.Data})
	}
	resp, err := r.InspectUnit(context.Background(), req)
	must(r.t, err)
	return resp.Verdict
}

// on puts an object onto a unit by its place on the part.
func on(u *render.Unit, o render.Object) {
	sin, cos := math.Sincos(u.PartAngleDeg * math.Pi / 180)
	o.UUM, o.VUM = cos*o.PartUUM-sin*o.PartVUM, sin*o.PartUUM+cos*o.PartVUM
	o.AngleDeg -= u.PartAngleDeg
	u.Add(o)
}

func spot(kind pipeline.Kind, u, v, diameter float64) render.Object {
	return render.Object{Kind: kind, PartUUM: u, PartVUM: v, DiameterUM: diameter, BrightnessDN: 90}
}

// dusty is a unit with three digs, four particles and a fibre, and what a second showing,
// laid down anew after an air-blow, has of it: two particles and the fibre are gone, two
// particles lie elsewhere.
func dusty(scene *stagetest.Rendered, i int) (before, after render.Unit) {
	digs := []render.Object{spot(pipeline.Dig, 900, 300, 80), spot(pipeline.Dig, -1300, 900, 110), spot(pipeline.Dig, 200, -1700, 95)}
	before, after = scene.Showing(i, 1), scene.Showing(i, 2)
	for _, u := range []*render.Unit{&before, &after} {
		for _, d := range digs {
			on(u, d)
		}
	}
	for _, p := range []render.Object{spot(pipeline.Particle, -400, -900, 220), spot(pipeline.Particle, 1500, -1100, 120), spot(pipeline.Particle, -1900, -500, 130),
		spot(pipeline.Particle, 700, 1900, 100), {Kind: pipeline.Fibre, PartUUM: -300, PartVUM: 600, WidthUM: 40, LengthUM: 700, BendPerMM: 0.8, BrightnessDN: 90}} {
		on(&before, p)
	}
	on(&after, spot(pipeline.Particle, 300, 1200, 120))
	on(&after, spot(pipeline.Particle, -900, -1500, 130))
	return before, after
}

// shownAt returns the defect of an inspection that lies where an object of the unit was drawn.
func shownAt(t *testing.T, in *inspectpb.InspectionRecord, o render.Object) int32 {
	t.Helper()
	for _, d := range in.Evidence.Defects {
		if math.Hypot(d.Place.UUm-o.UUM, d.Place.VUm-o.VUM) < 60 {
			return d.Id
		}
	}
	t.Fatalf("attempt %d: no defect at (%.0f, %.0f) where a %s was drawn", in.Identity.Attempt, o.UUM, o.VUM, o.Kind)
	return 0
}

// Dust is told from damage by a second showing, and both yields are exact.
func TestDustIsToldFromDamageAndBothYieldsAreShown(t *testing.T) {
	scene := stagetest.Render(t, stagetest.SmallScene())
	r := newRig(t, rigOptions{recipe: renderedRecipe, calibrations: scene.Calibrations})
	before, after := dusty(scene, 0)
	for _, u := range []render.Unit{before, after} {
		if v := r.inspectRendered(scene, u); len(v.Failures) > 0 || len(v.Defects) != len(u.Objects) {
			t.Fatalf("attempt %d: %d defects and %v, want %d", u.Identity.Attempt, len(v.Defects), v.Judgement, len(u.Objects))
		}
	}
	wantVerdictOf := func(u render.Unit, want inspectpb.Verdict) {
		t.Helper()
		if v := r.inspectRendered(scene, u); v.Judgement.Verdict != want {
			t.Errorf("unit %s attempt %d: %v, want %v", u.Identity.Unit, u.Identity.Attempt, v.Judgement, want)
		}
	}
	damaged, again := dusty(scene, 1) // a dig that is too large stays
	on(&damaged, spot(pipeline.Dig, 1800, 900, 300))
	on(&again, spot(pipeline.Dig, 1800, 900, 300))
	wantVerdictOf(damaged, reject)
	wantVerdictOf(again, reject)
	one, two := scene.Showing(2, 1), scene.Showing(2, 2) // one defect each: how they lie to each other cannot be told
	on(&one, spot(pipeline.Particle, 1000, 0, 230))
	on(&two, spot(pipeline.Dig, 1000, 0, 100))
	wantVerdictOf(one, reject)
	wantVerdictOf(two, accept)
	wantVerdictOf(scene.Unit(3), accept)

	story, err := r.GetUnit(context.Background(), &inspectpb.GetUnitRequest{Unit: before.Identity.Unit})
	must(t, err)
	first, g := story.Inspections[0], story.Inspections[1].Registration
	if g == nil || !g.Known || g.PreviousAttempt != 1 || g.PreviousInspectionId != first.InspectionId || g.PermanentVerdict != accept || len(g.PermanentReasons) != 0 {
		t.Fatalf("registration %v", g)
	}
	if off := math.Remainder(g.RotationDeg-(after.PartAngleDeg-before.PartAngleDeg), 360); math.Abs(off) > 0.3 || g.RmsUm > 15 {
		t.Errorf("turned by %.2f° too much, pairs %.1f µm apart", off, g.RmsUm)
	}
	for _, o := range before.Objects {
		id := shownAt(t, first, o)
		stays := slices.ContainsFunc(g.Pairs, func(p *inspectpb.DefectPair) bool { return p.Previous == id })
		if want := o.Kind == pipeline.Dig; stays != want || slices.Contains(g.Removable, id) == want {
			t.Errorf("%s at (%.0f, %.0f): permanent %v, want %v", o.Kind, o.PartUUM, o.PartVUM, stays, want)
		}
	}
	if len(g.Arrived) != 2 {
		t.Errorf("arrived %v, want the two particles that moved", g.Arrived)
	}
	wantYields(t, r)
}

// wantYields: of four units one was accepted as first shown; by permanent defects the dusty
// one is too, the damaged and the unknown one are not.
func wantYields(t *testing.T, r *rig) {
	t.Helper()
	sum, err := r.yield.GetSummary(context.Background(), &inspectpb.GetSummaryRequest{})
	must(t, err)
	if y := sum.Total; y.FirstPass.K != 1 || y.FirstPass.N != 4 || y.Permanent.K != 2 || y.Permanent.N != 4 || y.PassByRetest.K != 2 || y.PassByRetest.N != 3 || math.Abs(y.AttemptsPerUnit-7./4) > 1e-12 {
		t.Errorf("yield %v", y)
	} else if c := y.Permanent.ClopperPearson; math.Abs(c.Low-0.06759) > 1e-4 || math.Abs(c.High-0.93241) > 1e-4 { // binom.test(2, 4) of R; value from memory
		t.Errorf("interval %v", c)
	}
	pareto, err := r.yield.GetPareto(context.Background(), &inspectpb.GetParetoRequest{})
	must(t, err)
	got := map[string][2]int32{}
	for _, row := range pareto.Rows {
		got[row.Reason] = [2]int32{row.FirstAttempts, row.Removable}
	}
	if got["defect too large"] != [2]int32{3, 1} {
		t.Errorf("Pareto: %v, want defect too large on 3 first attempts, removable on 1", got)
	}
}
