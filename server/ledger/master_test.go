package ledger

import (
	"context"
	"fmt"
	"reflect"
	"slices"
	"testing"
	"time"

	"lapgate/pipeline"
)

// shown is a showing of a master whose check came out as given.
func shown(master string, attempt int, at time.Time, result CheckResult) Inspection {
	in := disc(master, attempt, pipeline.Reject, at)
	in.Purpose = pipeline.Master
	value, low := 210.5, 190.0
	in.Check = &MasterCheck{View: "ring", Kind: pipeline.Dig, Expected: pipeline.Reject, Result: result, Why: "master " + master + ": " + string(result),
		Measure: "diameter_um", Value: &value, Low: &low, Conditions: map[string]string{"calibration of view ring": "sha256:dd"}}
	return in
}

// marked lists the units that are suspect for a master, in order.
func marked(t *testing.T, s *Store, master string) []string {
	t.Helper()
	list, next, err := s.Suspects(context.Background(), Filter{}, Page{})
	if err != nil || next != "" {
		t.Fatal(next, err)
	}
	var out []string
	for _, one := range list {
		if one.Master == master {
			out = append(out, one.Unit)
		}
	}
	slices.Sort(out)
	return out
}

func wantUnits(t *testing.T, s *Store, master string, want ...string) {
	t.Helper()
	if got := marked(t, s, master); !slices.Equal(got, want) {
		t.Errorf("suspect for master %s: %v, want %v", master, got, want)
	}
}

func TestAFailingMasterMarksExactlyTheUnitsSinceItsLastPass(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		minute := func(n int) time.Time { return noon.Add(time.Duration(n) * time.Minute) }
		mustRecord(t, s, shown("M1", 1, minute(0), CheckPass))
		mustRecord(t, s, disc("before", 1, pipeline.Accept, minute(1)))
		mustRecord(t, s, shown("M1", 2, minute(2), CheckPass))
		mustRecord(t, s, shown("M2", 1, minute(2), CheckPass))
		for i, v := range []pipeline.Verdict{pipeline.Accept, pipeline.Reject, pipeline.Hold} {
			mustRecord(t, s, disc(fmt.Sprintf("after%d", i), 1, v, minute(3+i)))
		}
		for name, change := range map[string]func(*Inspection){
			"line B": func(in *Inspection) { in.Line = "B" }, "station 2": func(in *Inspection) { in.Station = "second" },
			"part": func(in *Inspection) { in.Part = "disc-40" }, "surface": func(in *Inspection) { in.Surface = "back" },
			"study": func(in *Inspection) { in.Purpose = pipeline.Study }, "setup": func(in *Inspection) { in.Purpose = pipeline.Setup },
		} {
			in := disc("elsewhere", 1, pipeline.Accept, minute(4))
			change(&in)
			in.Digest += name
			mustRecord(t, s, in)
		}
		recheck := disc("again", 1, pipeline.Accept, minute(5))
		recheck.Purpose = pipeline.Recheck
		mustRecord(t, s, recheck)
		mustRecord(t, s, shown("M1", 3, minute(6), CheckVoid))
		wantUnits(t, s, "M1")
		failed := mustRecord(t, s, shown("M1", 4, minute(7), CheckFail))
		wantUnits(t, s, "M1", "after0", "after1", "after2", "again")
		wantUnits(t, s, "M2")

		mustRecord(t, s, shown("M1", 5, minute(8), CheckPass))
		mustRecord(t, s, disc("later", 1, pipeline.Accept, minute(9)))
		wantUnits(t, s, "M1", "after0", "after1", "after2", "again") // a pass erases nothing
		mustRecord(t, s, shown("M1", 6, minute(10), CheckFail))
		wantUnits(t, s, "M1", "after0", "after1", "after2", "again", "later")

		if _, fresh, err := s.Record(context.Background(), failed); fresh || err != nil { // a resend
			t.Errorf("fresh %v, %v", fresh, err)
		}
		story, err := s.Unit(context.Background(), "disc-25", "after1")
		if err != nil || len(story[0].Suspicions) != 1 || story[0].Suspicions[0].Why != "master M1: fail" {
			t.Errorf("story %+v, %v; want the suspicion", story[0].Suspicions, err)
		}
	})
}

// A unit that came out of order is since the pass when either of its times says so.
func TestSuspectsWhoseOrderIsUncertain(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		in := disc("overtook", 1, pipeline.Accept, noon.Add(time.Minute)) // captured after the pass, judged before
		in.Judged = noon.Add(-time.Second)
		mustRecord(t, s, in)
		mustRecord(t, s, shown("M1", 1, noon, CheckPass))
		waited := disc("waited", 1, pipeline.Accept, noon.Add(-time.Hour)) // captured before the pass, judged after
		waited.Judged = noon.Add(time.Hour)
		mustRecord(t, s, waited)
		n, err := s.MarkSuspects(context.Background(), PlaceOf(in.Identity), Suspicion{Master: "M1", Cause: CauseOverdue, Why: "was due"})
		if err != nil || n != 2 {
			t.Errorf("%d marked, %v; want both", n, err)
		}
		wantUnits(t, s, "M1", "overtook", "waited")
	})
}

// Where a master never passed, only the units judged by the recipe that names it are meant.
func TestSuspectsOfAMasterThatNeverPassed(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		old := disc("old", 1, pipeline.Accept, noon)
		old.Judgement.Recipe = "sha256:00"
		mustRecord(t, s, old)
		mustRecord(t, s, disc("new", 1, pipeline.Hold, noon))
		mustRecord(t, s, shown("M1", 1, noon.Add(time.Minute), CheckFail))
		wantUnits(t, s, "M1", "new")
	})
}

func TestChecksComeBackWhole(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		in := mustRecord(t, s, shown("M1", 1, noon, CheckPass))
		want := in.Check.of(in)
		got, err := s.LastCheck(ctx, PlaceOf(in.Identity), "M1", CheckPass, "")
		if err != nil || !reflect.DeepEqual(got, want) {
			t.Errorf("got %+v, %v\nwant %+v", got, err, want)
		}
		missing := shown("M1", 2, noon.Add(time.Hour), CheckFail)
		missing.Check.Value, missing.Check.Low = nil, nil // the defect was not found
		mustRecord(t, s, missing)
		list, err := s.Checks(ctx, CheckFilter{Master: "M1", Line: "A"}, 0)
		if err != nil || len(list) != 2 || list[0].Value != nil || !reflect.DeepEqual(list[1], want) {
			t.Errorf("history %+v, %v", list, err)
		}
		if list, err = s.Checks(ctx, CheckFilter{From: noon.Add(time.Minute)}, 1); err != nil || len(list) != 1 || list[0].Result != CheckFail {
			t.Errorf("from a minute past noon: %+v, %v", list, err)
		}
		_, err = s.LastCheck(ctx, PlaceOf(in.Identity), "M9", CheckPass, "")
		wantKind(t, err, pipeline.NotFoundKind)
		_, err = s.LastCheck(ctx, PlaceOf(in.Identity), "M1", CheckPass, "sha256:00")
		wantKind(t, err, pipeline.NotFoundKind)
	})
}

func TestSuspectsArePaged(t *testing.T) {
	s := openAt(t, t.TempDir()+"/ledger.db")
	for i := range 5 {
		mustRecord(t, s, disc(fmt.Sprint(i), 1, pipeline.Accept, noon.Add(time.Duration(i)*time.Second)))
	}
	mustRecord(t, s, shown("M1", 1, noon.Add(time.Minute), CheckFail))
	var seen []string
	for page := (Page{Limit: 2}); ; {
		list, next, err := s.Suspects(context.Background(), Filter{Line: "A"}, page)
		if err != nil {
			t.Fatal(err)
		}
		for _, one := range list {
			seen = append(seen, one.Unit)
		}
		if page.After = next; next == "" {
			break
		}
	}
	if !slices.Equal(seen, []string{"0", "1", "2", "3", "4"}) {
		t.Errorf("got %v", seen)
	}
}

func TestChangesOfAStation(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		_, err := s.LastChange(ctx, "A", "final")
		wantKind(t, err, pipeline.NotFoundKind)
		wantKind(t, s.Change(ctx, StationChange{Line: "A", Station: "final", What: "floor", Person: "O. Perator", Reason: "x"}), pipeline.InvalidKind)
		wantKind(t, s.Change(ctx, StationChange{Line: "A", Station: "final", What: "lamp", Reason: "x"}), pipeline.InvalidKind)
		for i, what := range []string{"lens", "lamp"} {
			if err := s.Change(ctx, StationChange{Line: "A", Station: "final", What: what, Person: "O. Perator", Reason: "worn", At: noon.Add(time.Duration(i) * time.Hour)}); err != nil {
				t.Fatal(err)
			}
		}
		if c, err := s.LastChange(ctx, "A", "final"); err != nil || c.What != "lamp" || !c.At.Equal(noon.Add(time.Hour)) {
			t.Errorf("got %+v, %v", c, err)
		}
	})
}
