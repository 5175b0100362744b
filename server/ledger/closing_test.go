package ledger

import (
	"context"
	"fmt"
	"testing"
	"time"

	"lapgate/pipeline"
)

var byAnna = Disposition{Decision: DecideAccept, Person: "A. Inspector", Reason: "dust, gone after wiping", At: noon.Add(time.Hour)}

func TestDisposeClosesAnOpenHoldOnce(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		in := mustRecord(t, s, disc("0001", 1, pipeline.Hold, noon, "coverage"))
		if err := s.Dispose(ctx, in.ID, byAnna); err != nil {
			t.Fatal(err)
		}
		if err := s.Dispose(ctx, in.ID, byAnna); err != nil {
			t.Errorf("the same again: %v", err)
		}
		other := byAnna
		other.Decision = DecideReject
		wantKind(t, s.Dispose(ctx, in.ID, other), pipeline.InvalidKind)
		story, err := s.Unit(ctx, "disc-25", "0001")
		if err != nil || len(story) != 1 {
			t.Fatal(err)
		}
		j := story[0].Judgements
		if story[0].Judgement.Verdict != pipeline.Hold || len(j) != 2 || j[0].By != pipeline.ByLine ||
			j[1].By != pipeline.ByPerson || j[1].Person != byAnna.Person || j[1].Verdict != pipeline.Accept || *story[0].Disposition != byAnna {
			t.Errorf("story %+v", story[0])
		}
	})
}

func TestDisposeRefusesWhatIsNoOpenHold(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		rejected := mustRecord(t, s, disc("0001", 1, pipeline.Reject, noon))
		wantKind(t, s.Dispose(ctx, rejected.ID, byAnna), pipeline.InvalidKind)
		held := mustRecord(t, s, disc("0002", 1, pipeline.Hold, noon))
		mustRecord(t, s, disc("0002", 2, pipeline.Accept, noon.Add(time.Minute)))
		wantKind(t, s.Dispose(ctx, held.ID, byAnna), pipeline.InvalidKind)
		wantKind(t, s.Dispose(ctx, 12345, byAnna), pipeline.NotFoundKind)
		open := mustRecord(t, s, disc("0003", 1, pipeline.Hold, noon))
		wantKind(t, s.Dispose(ctx, open.ID, Disposition{Decision: "scrap", Person: "x", Reason: "y"}), pipeline.InvalidKind)
		wantKind(t, s.Dispose(ctx, open.ID, Disposition{Decision: DecideClean, Person: " ", Reason: "y"}), pipeline.InvalidKind)
		if rowsIn(t, s, "dispositions") != 0 || rowsIn(t, s, "judgements") != 4 {
			t.Error("something was written")
		}
		holds, err := s.OpenHolds(ctx, Filter{}, Page{})
		if err != nil || len(holds.List) != 1 || holds.List[0].Unit != "0003" {
			t.Errorf("open holds %+v, %v", holds, err)
		}
	})
}

func TestOutcomesAndMismatches(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		for i, c := range []struct {
			verdict   pipeline.Verdict
			bins      []pipeline.Verdict
			confirmed bool
		}{
			{pipeline.Accept, []pipeline.Verdict{pipeline.Accept}, true},
			{pipeline.Reject, []pipeline.Verdict{pipeline.Accept}, true}, // an escape
			{pipeline.Hold, []pipeline.Verdict{pipeline.Reject}, true},
			{pipeline.Hold, []pipeline.Verdict{pipeline.Accept}, true},                    // an escape
			{pipeline.Accept, []pipeline.Verdict{pipeline.Accept}, false},                 // nobody saw it arrive
			{pipeline.Accept, []pipeline.Verdict{pipeline.Reject, pipeline.Accept}, true}, // corrected
			{pipeline.Accept, nil, true},                                                  // nothing reported
		} {
			in := mustRecord(t, s, disc(fmt.Sprint(i), 1, c.verdict, noon))
			for k, bin := range c.bins {
				o := Outcome{Bin: bin, Confirmed: c.confirmed, At: noon.Add(time.Duration(k+1) * time.Second)}
				for range 2 { // a resend changes nothing
					if err := s.Outcome(ctx, in.Identity, o); err != nil {
						t.Fatal(err)
					}
				}
			}
		}
		if n := rowsIn(t, s, "outcomes"); n != 7 {
			t.Errorf("%d outcomes, want 7", n)
		}
		got, err := s.Mismatches(ctx, Filter{}, Page{})
		units := ""
		for i := len(got.List) - 1; i >= 0; i-- {
			units += got.List[i].Unit
		}
		if err != nil || len(got.List) != 3 {
			t.Errorf("mismatches %q, %v", units, err)
		}
		for _, sh := range got.List {
			if sh.Unit != "1" && sh.Unit != "3" && sh.Unit != "4" {
				t.Errorf("unit %s is no mismatch", sh.Unit)
			}
		}
		c, err := s.Counts(ctx, Question{})
		if err != nil || c[0].Binned != (Tally{Accept: 5, Reject: 1}) || c[0].FirstBinned != c[0].Binned {
			t.Errorf("counts %+v, %v", c, err)
		}
		wantKind(t, s.Outcome(ctx, disc("none", 1, "", noon).Identity, Outcome{Bin: pipeline.Accept, At: noon}), pipeline.NotFoundKind)
	})
}

func TestJudgementsOfOthersAreAddedBesideTheLines(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		a := mustRecord(t, s, disc("0001", 1, pipeline.Reject, noon))
		mustRecord(t, s, disc("0002", 1, pipeline.Reject, noon))
		j := pipeline.Judgement{Verdict: pipeline.Accept, By: pipeline.ByRejudge, Recipe: "sha256:new"}
		if err := s.Judge(ctx, a.ID, j); err != nil {
			t.Fatal(err)
		}
		left, err := s.Showings(ctx, Filter{NotJudgedBy: "sha256:new"}, Page{})
		if err != nil || len(left.List) != 1 || left.List[0].Unit != "0002" {
			t.Errorf("left to judge: %+v, %v", left, err)
		}
		if got, err := s.Find(ctx, a.Identity); err != nil || got.Judgement.Verdict != pipeline.Reject {
			t.Errorf("the line's verdict is now %s, %v", got.Judgement.Verdict, err)
		}
		wantKind(t, s.Judge(ctx, 99, j), pipeline.NotFoundKind)
		j.By = pipeline.ByPerson
		wantKind(t, s.Judge(ctx, a.ID, j), pipeline.InvalidKind)
	})
}
