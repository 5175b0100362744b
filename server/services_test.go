package server_test

import (
	"context"
	"fmt"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
)

// A surface full of dots is cut at 2 000 defects and never accepted, a saturated one
// neither.
func TestTooMuchToSeeIsNotAccepted(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for _, view := range []string{"ring", "bar"} {
		dots := raster.NewRaw(raster.Mono8, 480, 480)
		for i := range dots.Data {
			dots.Data[i] = byte(20 + (i*7919)%5)
		}
		for y := 4; y < 480; y += 9 {
			for x := 4; x < 480; x += 9 {
				dots.Data[y*480+x] = 200
			}
		}
		l.show(header("dots", view, dots), dots)
		white := frame(3, 0)
		for i := range white.Data[:side*40] {
			white.Data[i] = 255
		}
		l.show(header("white", view, white), white)
	}
	l.finish()
	wantVerdict(t, l, "dots", hold, "truncated")
	// The edge of the white half is a defect too large; that it may reject, never accept.
	wantVerdict(t, l, "white", reject, "saturated")
}

func (r *rig) feed(units int, line string) {
	l := r.line()
	for i := range units {
		for j, view := range []string{"ring", "bar"} {
			diameter := 0.0
			if i%4 == 1 {
				diameter = 8
			}
			raw := frame(uint64(i*10+j), diameter)
			h := header(fmt.Sprintf("%s-%02d", line, i), view, raw)
			h.Line = line
			if i%4 != 2 || view == "ring" { // every fourth unit lacks a view
				l.show(h, raw)
			}
		}
	}
	l.finish()
}

func TestYield(t *testing.T) {
	r := newRig(t, rigOptions{})
	r.feed(8, "A")
	r.feed(4, "B")
	ctx := context.Background()
	sum, err := r.yield.GetSummary(ctx, &inspectpb.GetSummaryRequest{GroupBy: []string{"line"}})
	must(t, err)
	if y := sum.Total; y.Units != 12 || y.Accepted != 6 || y.Rejected != 3 || y.Held != 3 || y.OpenHolds != 3 || y.FirstPass.K != 6 || y.FirstPass.N != 12 {
		t.Errorf("total %v, want 12 units: 6 accepted, 3 rejected, 3 held and open", y)
	}
	// Clopper–Pearson 95 % of 6 of 12: 0.2109 to 0.7891 (value from memory).
	if i := sum.Total.FirstPass.ClopperPearson; i.Low < 0.2108 || i.Low > 0.2110 || i.High < 0.7890 || i.High > 0.7892 {
		t.Errorf("interval %v, want 0.2109 to 0.7891", i)
	}
	if k := sum.Total.FinalIfHoldsPass.K; k != 9 {
		t.Errorf("%d units good if all holds pass, want 9", k)
	}
	if len(sum.Groups) != 2 || sum.Groups[0].Group["line"] != "A" || sum.Groups[0].Units != 8 {
		t.Errorf("groups %v, want A with 8 units and B", sum.Groups)
	}
	pareto, err := r.yield.GetPareto(ctx, &inspectpb.GetParetoRequest{})
	must(t, err)
	if len(pareto.Rows) != 2 || pareto.Rows[1].CumulativeShare != 1 || pareto.Inspections != 12 {
		t.Errorf("Pareto %v, want two reasons that add up to 1", pareto)
	}
	series, err := r.yield.GetSeries(ctx, &inspectpb.GetSeriesRequest{BucketMinutes: 15})
	must(t, err)
	n := int32(0)
	for _, p := range series.Points {
		n += p.Inspections
	}
	if n != 12 {
		t.Errorf("the series holds %d inspections, want 12", n)
	}
}

func TestUnitsFilterAndPage(t *testing.T) {
	r := newRig(t, rigOptions{})
	r.feed(8, "A")
	ctx := context.Background()
	page, err := r.yield.ListUnits(ctx, &inspectpb.ListUnitsRequest{PageSize: 5})
	must(t, err)
	rest, err := r.yield.ListUnits(ctx, &inspectpb.ListUnitsRequest{PageSize: 5, PageToken: page.NextPageToken})
	must(t, err)
	seen := map[string]bool{}
	for _, u := range append(page.Units, rest.Units...) {
		seen[u.Identity.Unit] = true
	}
	if len(page.Units) != 5 || len(seen) != 8 || rest.NextPageToken != "" {
		t.Errorf("pages of %d and %d units, %d different, then %q; want 5 and 3, 8 different", len(page.Units), len(rest.Units), len(seen), rest.NextPageToken)
	}
	rejects, err := r.yield.ListUnits(ctx, &inspectpb.ListUnitsRequest{Verdict: reject})
	must(t, err)
	named, err := r.yield.ListUnits(ctx, &inspectpb.ListUnitsRequest{Reason: "missing view"})
	must(t, err)
	if len(rejects.Units) != 2 || len(named.Units) != 2 || named.Units[0].Verdict != hold {
		t.Errorf("%d rejects and %d with a missing view, want 2 and 2", len(rejects.Units), len(named.Units))
	}
	for name, req := range map[string]*inspectpb.GetSeriesRequest{"bucket_minutes": {BucketMinutes: 20}, "purpose": {BucketMinutes: 15, Filter: &inspectpb.Filter{Purpose: 99}}} {
		if _, err := r.yield.GetSeries(ctx, req); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: error %v, want InvalidArgument that names it", name, err)
		}
	}
}

// Only production counts in yield.
func TestOtherPurposesDoNotCount(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(i), 0)
		h := header("m", view, raw)
		h.Purpose = pipeline.Master
		l.show(h, raw)
	}
	l.finish()
	wantVerdict(t, l, "m", accept, "")
	sum, err := r.yield.GetSummary(context.Background(), &inspectpb.GetSummaryRequest{})
	must(t, err)
	if sum.Total.Units != 0 {
		t.Errorf("%d units count, want none", sum.Total.Units)
	}
}

// A held unit, closed by a person: the machine's verdict stays, final yield moves.
func TestHoldsEnd(t *testing.T) {
	r := newRig(t, rigOptions{})
	r.feed(4, "A")
	ctx := context.Background()
	holds, err := r.ListHolds(ctx, &inspectpb.ListHoldsRequest{})
	must(t, err)
	if len(holds.Holds) != 1 {
		t.Fatalf("%d open holds, want 1", len(holds.Holds))
	}
	req := &inspectpb.DisposeHoldRequest{InspectionId: holds.Holds[0].InspectionId, Disposition: inspectpb.Disposition_DISPOSITION_ACCEPT}
	if _, err := r.DisposeHold(ctx, req); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "person") {
		t.Errorf("nobody's decision: %v, want InvalidArgument that names person", err)
	}
	req.Person, req.Reason = "Q. Engineer", "looked at it under the microscope"
	closed, err := r.DisposeHold(ctx, req)
	must(t, err)
	if in := closed.Inspection; in.Verdict != hold || len(in.Judgements) != 2 || in.Judgements[1].Person != "Q. Engineer" {
		t.Errorf("closed hold %v, want the line's hold and the person's accept", in)
	}
	holds, err = r.ListHolds(ctx, &inspectpb.ListHoldsRequest{})
	must(t, err)
	sum, err := r.yield.GetSummary(ctx, &inspectpb.GetSummaryRequest{})
	must(t, err)
	if y := sum.Total; len(holds.Holds) != 0 || y.OpenHolds != 0 || y.FirstPass.K != 2 || y.FinalIfHoldsFail.K != 3 {
		t.Errorf("%d open holds; yield %v, want 2 first-pass and 3 final of 4", len(holds.Holds), y)
	}
	story, err := r.GetUnit(ctx, &inspectpb.GetUnitRequest{Unit: closed.Inspection.Identity.Unit})
	must(t, err)
	if len(story.Inspections) != 1 || len(story.Inspections[0].Dispositions) != 1 {
		t.Errorf("story %v, want one inspection with its disposition", story)
	}
}

func TestOutcomesAndMismatches(t *testing.T) {
	r := newRig(t, rigOptions{})
	r.feed(2, "A") // A-00 accept, A-01 reject
	ctx := context.Background()
	report := func(unit string, bin inspectpb.Verdict) bool {
		h := header(unit, "ring", frame(1, 0))
		resp, err := r.ReportOutcome(ctx, &inspectpb.ReportOutcomeRequest{Identity: inspectpb.FromIdentity(h.Identity), Bin: bin, Confirmed: true, At: timestamppb.Now()})
		must(t, err)
		return resp.Matches
	}
	if !report("A-00", accept) || report("A-01", accept) {
		t.Error("want A-00 to match and A-01, rejected and put in the accept bin, not to")
	}
	list, err := r.ListMismatches(ctx, &inspectpb.ListMismatchesRequest{})
	must(t, err)
	if len(list.Inspections) != 1 || list.Inspections[0].Identity.Unit != "A-01" {
		t.Errorf("mismatches %v, want A-01", list.Inspections)
	}
}

func TestWatch(t *testing.T) {
	r := newRig(t, rigOptions{})
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	w, err := r.yield.Watch(ctx, &inspectpb.WatchRequest{Filter: &inspectpb.Filter{Line: "B"}})
	must(t, err)
	_, err = w.Header() // the call has to arrive first
	must(t, err)
	r.feed(2, "A")
	r.feed(2, "B")
	for range 2 {
		ev, err := w.Recv()
		must(t, err)
		if ev.Unit.Identity.Line != "B" {
			t.Errorf("watched line B and saw %v", ev.Unit.Identity)
		}
	}
}

func TestRecipeService(t *testing.T) {
	r := newRig(t, rigOptions{})
	ctx := context.Background()
	list, err := r.recipes.ListRecipes(ctx, &inspectpb.ListRecipesRequest{})
	must(t, err)
	if len(list.Recipes) != 1 || list.Recipes[0].Part != "disc" {
		t.Fatalf("recipes %v, want one of part disc", list.Recipes)
	}
	text, err := r.recipes.GetRecipe(ctx, &inspectpb.GetRecipeRequest{Hash: list.Recipes[0].Hash})
	if err != nil || text.Text != recipeText {
		t.Errorf("text %q (%v)", text.GetText(), err)
	}
	bad := strings.Replace(recipeText, "min_coverage", "min_covrage", 1)
	v, err := r.recipes.ValidateRecipe(ctx, &inspectpb.ValidateRecipeRequest{File: "new.yaml", Text: bad})
	must(t, err)
	if len(v.Problems) == 0 || v.Problems[0].Line != 4 || !strings.Contains(v.Problems[0].Message, "min_covrage") {
		t.Errorf("problems %v, want line 4 to be named", v.Problems)
	}
	good, err := r.recipes.ValidateRecipe(ctx, &inspectpb.ValidateRecipeRequest{File: "new.yaml", Text: recipeText})
	if err != nil || len(good.Problems) != 0 {
		t.Errorf("a good recipe has problems %v (%v)", good.GetProblems(), err)
	}
}
