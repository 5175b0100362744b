package ledger

import (
	"context"
	"slices"
	"testing"
	"time"

	"lapgate/pipeline"
)

// Three units: one rejected for a dig and a scratch, cleaned and accepted, whose dig was
// dust; one whose second showing could not be laid over its first; one shown once.
func TestCountsByPermanentDefects(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		dusty := mustRecord(t, s, disc("dusty", 1, pipeline.Reject, noon, "dig too large", "scratch too wide"))
		again := mustRecord(t, s, disc("dusty", 2, pipeline.Accept, noon.Add(time.Minute)))
		mustRecord(t, s, disc("unknown", 1, pipeline.Reject, noon, "dig too large"))
		unknown := mustRecord(t, s, disc("unknown", 2, pipeline.Accept, noon.Add(time.Minute)))
		mustRecord(t, s, disc("once", 1, pipeline.Accept, noon))
		wait, err := s.Unregistered(ctx)
		if err != nil || len(wait) != 2 {
			t.Fatalf("waiting: %+v, %v", wait, err)
		}
		c, err := s.Counts(ctx, Question{})
		if err != nil || c[0].Permanent != (Tally{Accept: 1, Reject: 2}) {
			t.Fatalf("before: %+v, %v", c, err)
		}
		r := Registration{Previous: dusty.ID, Against: dusty.ID, PreviousAttempt: 1, Known: true, RotationDeg: 120.5, ShiftUUM: -3, RMSUM: 1.5,
			Pairs: []DefectPair{{1, 2, 0.75}}, Removable: []int{2}, Arrived: []int{1}, Verdict: pipeline.Accept, At: noon}
		if err := s.PutRegistration(ctx, again.ID, r); err != nil {
			t.Fatal(err)
		}
		if err := s.PutRegistration(ctx, unknown.ID, Registration{Previous: 1, Verdict: pipeline.Reject, Reasons: []string{"dig too large"}}); err != nil {
			t.Fatal(err)
		}
		c, err = s.Counts(ctx, Question{GroupBy: []Dimension{ByLot}})
		if err != nil || len(c) != 1 || c[0].Permanent != (Tally{Accept: 2, Reject: 1}) || c[0].First != (Tally{Accept: 1, Reject: 2}) {
			t.Errorf("after: %+v, %v", c, err)
		}
		reasons, err := s.Reasons(ctx, Question{})
		if err != nil || len(reasons) != 2 || reasons[0].First != 2 || reasons[0].Removable != 1 || reasons[1].First != 1 || reasons[1].Removable != 1 {
			t.Errorf("reasons: %+v, %v", reasons, err)
		}
		// The one against a showing that is not the one before is to be made again.
		if wait, err = s.Unregistered(ctx); err != nil || len(wait) != 1 || wait[0].Unit != "unknown" {
			t.Errorf("waiting: %+v, %v", wait, err)
		}
		story, err := s.Unit(ctx, "disc-25", "dusty")
		if err != nil || len(story) != 2 || story[0].Registration != nil || story[1].Registration == nil {
			t.Fatalf("story: %+v, %v", story, err)
		}
		if g := story[1].Registration; g.Previous != dusty.ID || g.Against != dusty.ID || g.RotationDeg != 120.5 || !slices.Equal(g.Pairs, r.Pairs) ||
			!slices.Equal(g.Removable, r.Removable) || g.Verdict != pipeline.Accept || len(g.Reasons) != 0 || !g.At.Equal(noon) {
			t.Errorf("registration: %+v", g)
		}
		wantKind(t, s.PutRegistration(ctx, again.ID, Registration{}), pipeline.InvalidKind)
		wantKind(t, s.PutRegistration(ctx, 12345, r), pipeline.NotFoundKind)
	})
}

// An attempt that comes late pushes itself between two that were held against each other.
func TestALateAttemptIsHeldAgainstToo(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		first := mustRecord(t, s, disc("u", 1, pipeline.Reject, noon))
		third := mustRecord(t, s, disc("u", 3, pipeline.Accept, noon.Add(2*time.Minute)))
		if err := s.PutRegistration(ctx, third.ID, Registration{Previous: first.ID, Verdict: pipeline.Accept}); err != nil {
			t.Fatal(err)
		}
		if wait, err := s.Unregistered(ctx); err != nil || len(wait) != 0 {
			t.Fatalf("waiting: %+v, %v", wait, err)
		}
		mustRecord(t, s, disc("u", 2, pipeline.Hold, noon.Add(time.Minute)))
		if wait, err := s.Unregistered(ctx); err != nil || len(wait) != 1 {
			t.Errorf("waiting: %+v, %v", wait, err)
		}
		list, err := s.Attempts(ctx, first.Identity)
		if err != nil || len(list) != 3 || list[1].Attempt != 2 || list[2].Registration == nil || len(list[0].Evidence.Defects) != 2 {
			t.Errorf("attempts: %+v, %v", list, err)
		}
	})
}
