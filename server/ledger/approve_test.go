package ledger

import (
	"context"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
)

func TestApprovalsNeedASecondPersonAndARecipe(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		if err := s.PutRecipe(ctx, Recipe{Part: "disc-25", File: "disc-25.yaml", Text: "format: 1"}); err != nil {
			t.Fatal(err)
		}
		known, err := s.Recipes(ctx, "disc-25")
		if err != nil {
			t.Fatal(err)
		}
		good := Approval{Hash: known[0].Hash, Author: "Q. Engineer", Approver: "A. Pprover", Reason: "tighter dig limit", Effective: EffectiveNow, At: noon}
		for want, change := range map[string]func(*Approval){
			"second person": func(a *Approval) { a.Approver = " q.  ENGINEER" }, "author": func(a *Approval) { a.Author = "" },
			"person": func(a *Approval) { a.Approver = " " }, "reason": func(a *Approval) { a.Reason = "" }, "effective": func(a *Approval) { a.Effective = "soon" },
		} {
			a := good
			change(&a)
			_, err := s.Approve(ctx, a)
			wantKind(t, err, pipeline.InvalidKind)
			if !strings.Contains(err.Error(), want) {
				t.Errorf("error %q does not speak of %s", err, want)
			}
		}
		unknown := good
		unknown.Hash = "sha256:00"
		_, err = s.Approve(ctx, unknown)
		wantKind(t, err, pipeline.NotFoundKind)
		next := good
		next.Effective, next.At = EffectiveNextLot, noon.Add(time.Hour)
		for _, a := range []Approval{good, good, next} {
			if got, err := s.Approve(ctx, a); err != nil || got != a {
				t.Fatal(got, err)
			}
		}
		list, err := s.Approvals(ctx, "disc-25")
		if err != nil || len(list) != 2 || list[0].Approval != good || list[1].Approval != next || list[0].Recipe.Text != "format: 1" {
			t.Errorf("got %+v, %v", list, err)
		}
		if list, err = s.Approvals(ctx, "disc-40"); err != nil || len(list) != 0 {
			t.Errorf("another part: %+v, %v", list, err)
		}
	})
}

func TestLotBegan(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		first := mustRecord(t, s, disc("1", 1, pipeline.Accept, noon.Add(time.Hour)))
		mustRecord(t, s, disc("2", 1, pipeline.Accept, noon.Add(2*time.Hour)))
		if at, err := s.LotBegan(ctx, "disc-25", "L7", "A", "final"); err != nil || !at.Equal(first.Judged) {
			t.Errorf("got %v, %v, want %v", at, err, first.Judged)
		}
		for _, other := range [][2]string{{"L8", "A"}, {"L7", "B"}} {
			if at, err := s.LotBegan(ctx, "disc-25", other[0], other[1], "final"); err != nil || !at.IsZero() {
				t.Errorf("%v: got %v, %v, want none", other, at, err)
			}
		}
	})
}

func TestLatenciesByStation(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		for i, ms := range []float64{30, 10, 20, 5} {
			in := disc(string(rune('a'+i)), 1, pipeline.Accept, noon)
			in.LatencyMS = ms
			if i == 3 {
				in.Line = "B"
			}
			mustRecord(t, s, in)
		}
		got, err := s.Latencies(context.Background(), Filter{})
		if err != nil || len(got) != 2 || got[0].Line != "A" || len(got[0].MS) != 3 || got[0].MS[0] != 10 || got[0].MS[2] != 30 || got[1].MS[0] != 5 {
			t.Errorf("got %+v, %v", got, err)
		}
	})
}
