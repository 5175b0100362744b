package ledger

import (
	"context"
	"encoding/json"
	"errors"
	"math"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
)

func TestRecordThenFindReturnsTheSame(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		stored := mustRecord(t, s, disc("0001", 1, pipeline.Reject, noon, "dig size"))
		got, err := s.Find(context.Background(), stored.Identity)
		if err != nil {
			t.Fatal(err)
		}
		a, _ := json.Marshal(stored)
		b, _ := json.Marshal(got)
		if string(a) != string(b) {
			t.Errorf("stored\n%s\nfound\n%s", a, b)
		}
		if got.Evidence.Views[0].Frames[0].Stored != "disc-25/L7/0001" || len(got.Evidence.Defects) != 2 {
			t.Errorf("evidence lost: %+v", got.Evidence)
		}
	})
}

func TestResendReturnsTheStoredVerdictAndWritesNothing(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		first := mustRecord(t, s, disc("0001", 1, pipeline.Reject, noon))
		again := disc("0001", 1, pipeline.Accept, noon) // judged otherwise this time
		stored, fresh, err := s.Record(context.Background(), again)
		if err != nil || fresh || stored.Judgement.Verdict != pipeline.Reject || stored.ID != first.ID {
			t.Errorf("got %v, fresh %v, error %v", stored.Judgement.Verdict, fresh, err)
		}
		for _, table := range []string{"inspections", "views", "evidence", "judgements"} {
			if n := rowsIn(t, s, table); n != 1 {
				t.Errorf("%s: %d rows, want 1", table, n)
			}
		}
	})
}

func TestOtherFramesUnderTheSameIdentityConflict(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		mustRecord(t, s, disc("0001", 1, pipeline.Accept, noon))
		other := disc("0001", 1, pipeline.Accept, noon.Add(8*time.Hour))
		other.Digest = "another"
		_, _, err := s.Record(context.Background(), other)
		wantKind(t, err, pipeline.Conflict)
		if !strings.Contains(err.Error(), "identity conflict") || rowsIn(t, s, "inspections") != 1 {
			t.Error(err)
		}
		other.Lot = "L8" // another lot may count its units from 1 again
		mustRecord(t, s, other)
	})
}

func TestRecordRefusesWhatCannotBeTrue(t *testing.T) {
	s := openAt(t, t.TempDir()+"/l.db")
	for name, spoil := range map[string]func(*Inspection){
		"odd id":          func(in *Inspection) { in.Unit = "../x" },
		"no digest":       func(in *Inspection) { in.Digest = "" },
		"no capture time": func(in *Inspection) { in.Captured = time.Time{} },
		"no verdict":      func(in *Inspection) { in.Judgement.Verdict = "pass" },
		"late accept":     func(in *Inspection) { in.Late = true },
		"not the line":    func(in *Inspection) { in.Judgement.By = pipeline.ByPerson },
		"unknown format":  func(in *Inspection) { in.Evidence.Views[0].Frames[0].Header.Format = 0 },
		"not a number":    func(in *Inspection) { in.Evidence.Defects[0].SNR = math.NaN() },
	} {
		in := disc("0001", 1, pipeline.Accept, noon)
		spoil(&in)
		_, _, err := s.Record(context.Background(), in)
		if pipeline.KindOf(err) != pipeline.InvalidKind || err == nil {
			t.Errorf("%s: got %v", name, err)
		}
	}
	if rowsIn(t, s, "inspections") != 0 {
		t.Error("something was written")
	}
}

func TestAClockThatIsOff(t *testing.T) {
	s := openAt(t, t.TempDir()+"/l.db")
	for _, c := range []struct {
		unit    string
		ahead   time.Duration
		clock   Clock
		counted time.Duration
	}{
		{"1", 0, ClockFine, 0}, {"2", 5 * time.Minute, ClockFine, 5 * time.Minute}, {"3", 6 * time.Minute, ClockAhead, 0},
		{"4", -2 * 24 * time.Hour, ClockFine, -2 * 24 * time.Hour}, {"5", -4 * 24 * time.Hour, ClockBehind, -4 * 24 * time.Hour},
	} {
		in := disc(c.unit, 1, pipeline.Accept, noon.Add(c.ahead))
		in.Judged = noon
		got := mustRecord(t, s, in)
		if got.Clock != c.clock || !got.Counted.Equal(noon.Add(c.counted)) {
			t.Errorf("%s ahead: clock %q, counted %s", c.ahead, got.Clock, got.Counted)
		}
	}
}

func TestFindByRequestAndByDigest(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		in := mustRecord(t, s, disc("u00000001", 2, pipeline.Hold, noon))
		if got, err := s.FindRequest(ctx, "A", "final", "r-u00000001"); err != nil || got.ID != in.ID {
			t.Errorf("request: %v, %v", got.ID, err)
		}
		if got, err := s.FindDigest(ctx, in.Identity, in.Digest); err != nil || got.ID != in.ID {
			t.Errorf("digest: %v, %v", got.ID, err)
		}
		_, err := s.FindRequest(ctx, "B", "final", "r-u00000001")
		wantKind(t, err, pipeline.NotFoundKind)
		_, err = s.FindRequest(ctx, "A", "final", "")
		wantKind(t, err, pipeline.NotFoundKind)
		_, err = s.FindDigest(ctx, in.Identity, "other")
		wantKind(t, err, pipeline.NotFoundKind)
	})
}

// Eight clients send the same showing and one of their own each, all at once.
func TestManyWritersAtOnce(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		var wg sync.WaitGroup
		var mu sync.Mutex
		fresh, ids, failures := 0, map[string]bool{}, []error{}
		for i := range 8 {
			wg.Add(1)
			go func() {
				defer wg.Done()
				unit, err := s.NextUnitID(ctx, "disc-25")
				_, own, err2 := s.Record(ctx, disc(unit, 1, pipeline.Accept, noon.Add(time.Duration(i)*time.Minute)))
				_, one, err3 := s.Record(ctx, disc("shared", 1, pipeline.Hold, noon))
				_, err4 := s.Counts(ctx, Question{})
				mu.Lock()
				defer mu.Unlock()
				ids[unit] = true
				if one {
					fresh++
				}
				if err := errors.Join(err, err2, err3, err4); err != nil || !own {
					failures = append(failures, err)
				}
			}()
		}
		wg.Wait()
		if fresh != 1 || len(ids) != 8 || len(failures) != 0 || rowsIn(t, s, "inspections") != 9 {
			t.Errorf("fresh %d, ids %d, failures %v", fresh, len(ids), failures)
		}
		c, err := s.Counts(ctx, Question{})
		if err != nil || len(c) != 1 || c[0].Showings != (Tally{Accept: 8, Hold: 1}) {
			t.Errorf("counts %+v, %v", c, err)
		}
	})
}
