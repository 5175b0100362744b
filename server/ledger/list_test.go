package ledger

import (
	"context"
	"crypto/sha256"
	"fmt"
	"testing"
	"time"

	"lapgate/pipeline"
)

func TestPagesHoldEveryShowingOnceNewestFirst(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		for i := range 25 { // five at each moment, so that time alone does not order them
			mustRecord(t, s, disc(fmt.Sprintf("%02d", i), 1, pipeline.Accept, noon.Add(time.Duration(i/5)*time.Second)))
		}
		seen := map[string]bool{}
		last := noon.Add(time.Hour)
		p := Page{Limit: 7}
		for pages := 1; ; pages++ {
			got, err := s.Showings(ctx, Filter{Part: "disc-25"}, p)
			if err != nil {
				t.Fatal(err)
			}
			for _, sh := range got.List {
				if seen[sh.Unit] || sh.Counted.After(last) {
					t.Errorf("unit %s twice or out of order", sh.Unit)
				}
				seen[sh.Unit], last = true, sh.Counted
			}
			if p.After = got.Next; p.After == "" {
				if pages != 4 {
					t.Errorf("%d pages, want 4", pages)
				}
				break
			}
		}
		if len(seen) != 25 {
			t.Errorf("%d units, want 25", len(seen))
		}
		_, err := s.Showings(ctx, Filter{}, Page{After: "x"})
		wantKind(t, err, pipeline.InvalidKind)
	})
}

func TestFiltersAndShards(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		for i := range 20 {
			in := disc(fmt.Sprint(i), 1, pipeline.Reject, noon.Add(time.Duration(i)*time.Minute), "dig size", "scratch width")
			in.Lot, in.Purpose = []string{"L7", "L8"}[i%2], []pipeline.Purpose{pipeline.Production, pipeline.Study}[i/10]
			mustRecord(t, s, in)
		}
		mustRecord(t, s, disc("0", 2, pipeline.Accept, noon.Add(time.Hour)))
		for _, c := range []struct {
			name string
			f    Filter
			want int
		}{
			{"production", Filter{}, 11}, {"study", Filter{Purpose: pipeline.Study}, 10}, {"any", Filter{AnyPurpose: true}, 21},
			{"lot", Filter{Lot: "L8"}, 5}, {"unit", Filter{Unit: "0"}, 2}, {"verdict", Filter{Verdict: pipeline.Accept}, 1},
			{"time", Filter{From: noon.Add(time.Minute), To: noon.Add(3 * time.Minute)}, 2}, {"recipe", Filter{Recipe: "sha256:zz"}, 0},
		} {
			got, err := s.Showings(ctx, c.f, Page{})
			if err != nil || len(got.List) != c.want {
				t.Errorf("%s: %d showings, want %d, %v", c.name, len(got.List), c.want, err)
			}
		}
		units, err := s.Units(ctx, Filter{}, Page{})
		if err != nil || len(units.List) != 10 || units.List[0].Attempt != 2 || len(units.List[1].Judgement.Reasons) != 2 {
			t.Errorf("units: %+v, %v", units, err)
		}
		all := 0
		for i := range 3 {
			got, err := s.Showings(ctx, Filter{AnyPurpose: true, Shard: i, Shards: 3}, Page{})
			if err != nil {
				t.Fatal(err)
			}
			all += len(got.List)
		}
		if all != 21 {
			t.Errorf("three shards hold %d showings, want 21", all)
		}
		_, err = s.Showings(ctx, Filter{Shard: 3, Shards: 3}, Page{})
		wantKind(t, err, pipeline.InvalidKind)
	})
}

func TestUnitTellsEverythingInOrder(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		mustRecord(t, s, disc("0001", 2, pipeline.Accept, noon.Add(time.Hour)))
		mustRecord(t, s, disc("0001", 1, pipeline.Hold, noon))
		other := disc("0001", 1, pipeline.Accept, noon)
		other.Part = "disc-50"
		mustRecord(t, s, other)
		story, err := s.Unit(ctx, "disc-25", "0001")
		if err != nil || len(story) != 2 || story[0].Attempt != 1 || story[1].Attempt != 2 || len(story[0].Evidence.Views) != 1 {
			t.Errorf("%+v, %v", story, err)
		}
		if story, err = s.Unit(ctx, "", "0001"); err != nil || len(story) != 3 {
			t.Errorf("any part: %d showings, %v", len(story), err)
		}
		_, err = s.Unit(ctx, "", "0002")
		wantKind(t, err, pipeline.NotFoundKind)
	})
}

func TestUnitIDsAndAttemptsAreGivenOnce(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		mustRecord(t, s, disc("u00000002", 1, pipeline.Accept, noon)) // a serial that looks like ours
		for _, want := range []string{"u00000001", "u00000003"} {
			if got, err := s.NextUnitID(ctx, "disc-25"); err != nil || got != want {
				t.Errorf("got %s, %v, want %s", got, err, want)
			}
		}
		id := disc("0001", 0, "", noon).Identity
		next := func(want int) {
			t.Helper()
			if got, err := s.NextAttempt(ctx, id); err != nil || got != want {
				t.Errorf("attempt %d, %v, want %d", got, err, want)
			}
		}
		next(1)
		next(2) // the first is under way
		mustRecord(t, s, disc("0001", 1, pipeline.Hold, noon))
		next(3)
		id.Line = "B"
		next(4) // a retest on another line is a further attempt
		mustRecord(t, s, disc("0001", 7, pipeline.Hold, noon))
		next(8)
		id.Station = "incoming"
		next(1)
		if n := rowsIn(t, s, "attempts_issued"); n != 2 {
			t.Errorf("%d rows of attempts, want 2", n)
		}
	})
}

func TestRecipesAndCalibrationsAreKeptByHash(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		text := "part: disc-25\n"
		hash := fmt.Sprintf("sha256:%x", sha256.Sum256([]byte(text)))
		r := Recipe{Hash: hash, Part: "disc-25", File: "disc.yaml", Text: text}
		for range 2 {
			if err := s.PutRecipe(ctx, r); err != nil {
				t.Fatal(err)
			}
		}
		if got, err := s.Recipe(ctx, hash); err != nil || got.Text != text || got.File != "disc.yaml" {
			t.Errorf("%+v, %v", got, err)
		}
		if all, err := s.Recipes(ctx, "disc-25"); err != nil || len(all) != 1 {
			t.Errorf("%+v, %v", all, err)
		}
		r.Text += "x"
		wantKind(t, s.PutRecipe(ctx, r), pipeline.InvalidKind)
		_, err := s.Recipe(ctx, "sha256:none")
		wantKind(t, err, pipeline.NotFoundKind)
		if err := s.PutCalibration(ctx, Calibration{Hash: "sha256:dd", Light: "ring", Text: "format: 1\n"}); err != nil {
			t.Fatal(err)
		}
		if c, err := s.Calibration(ctx, "sha256:dd"); err != nil || c.Light != "ring" || c.Text != "format: 1\n" {
			t.Errorf("%+v, %v", c, err)
		}
		_, err = s.Calibration(ctx, "sha256:none")
		wantKind(t, err, pipeline.NotFoundKind)
	})
}
