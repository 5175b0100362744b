package ledger

import (
	"context"
	"fmt"
	"math/rand/v2"
	"reflect"
	"sort"
	"testing"
	"time"

	"lapgate/pipeline"
)

// told is a showing as the test told it to the ledger; the slow recount works on these
// and not on anything the ledger stored.
type told struct {
	Inspection
	decision Decision
	bin      pipeline.Verdict
	reasons  []string
}

// production plays days of a shop: retests on either line, late spools in any order,
// masters between, dispositions and outcomes.
func production(t *testing.T, s *Store, r *rand.Rand, n int) []*told {
	t.Helper()
	ctx := context.Background()
	var all []*told
	verdicts := []pipeline.Verdict{pipeline.Accept, pipeline.Accept, pipeline.Reject, pipeline.Hold}
	for range n {
		v := verdicts[r.IntN(len(verdicts))]
		var reasons []string
		if v != pipeline.Accept {
			reasons = [][]string{{"dig size"}, {"dig size", "scratch width", "dig size"}, {"coverage"}, {}}[r.IntN(4)]
		}
		in := disc(fmt.Sprintf("%03d", r.IntN(n/2)), 1+r.IntN(3), v, noon.Add(time.Duration(r.IntN(7200))*time.Second), reasons...)
		in.Line, in.Lot = []string{"A", "B"}[r.IntN(2)], []string{"L7", "L8"}[r.IntN(2)]
		in.Process = []string{"turned", "pitch"}[r.IntN(2)]
		if r.IntN(10) == 0 {
			in.Purpose = pipeline.Master
		}
		stored, fresh, err := s.Record(ctx, in)
		if pipeline.KindOf(err) == pipeline.Conflict || err == nil && !fresh {
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		x := &told{Inspection: stored, reasons: reasons}
		all = append(all, x)
		follow(t, s, r, x)
		if r.IntN(20) == 0 { // a dashboard that asks meanwhile
			if _, err := s.Counts(ctx, Question{Every: time.Hour}); err != nil {
				t.Fatal(err)
			}
		}
	}
	return all
}

func follow(t *testing.T, s *Store, r *rand.Rand, x *told) {
	t.Helper()
	ctx := context.Background()
	if r.IntN(3) > 0 {
		x.bin = []pipeline.Verdict{pipeline.Accept, pipeline.Reject}[r.IntN(2)]
		if err := s.Outcome(ctx, x.Identity, Outcome{Bin: x.bin, Confirmed: true, At: noon}); err != nil {
			t.Fatal(err)
		}
	}
	d := []Decision{DecideAccept, DecideReject, DecideClean, DecideRework, ""}[r.IntN(5)]
	if d == "" || x.Judgement.Verdict != pipeline.Hold {
		return
	}
	switch err := s.Dispose(ctx, x.ID, Disposition{Decision: d, Person: "A. Inspector", Reason: "seen"}); {
	case err == nil:
		x.decision = d
	case pipeline.KindOf(err) != pipeline.InvalidKind: // overtaken by a later attempt
		t.Fatal(err)
	}
}

// recount answers {group by line, every half hour} and the reasons by brute force.
func recount(all []*told) (counts map[string]Counts, reasons map[string]ReasonCounts) {
	counts, reasons = map[string]Counts{}, map[string]ReasonCounts{}
	units := map[string][]*told{}
	for _, x := range all {
		if x.Purpose == pipeline.Production {
			key := x.Lot + "/" + x.Unit
			units[key] = append(units[key], x)
		}
	}
	for _, u := range units {
		sort.Slice(u, func(a, b int) bool {
			if u[a].Attempt != u[b].Attempt {
				return u[a].Attempt < u[b].Attempt
			}
			if !u[a].Captured.Equal(u[b].Captured) {
				return u[a].Captured.Before(u[b].Captured)
			}
			return u[a].ID < u[b].ID
		})
		countUnit(counts, u)
		for i, x := range u {
			countReasons(reasons, x, i == 0 && x.Attempt == 1)
		}
	}
	return counts, reasons
}

func slot(x *told) string { return x.Captured.Truncate(30*time.Minute).Format("15:04") + " " + x.Line }

func countUnit(counts map[string]Counts, u []*told) {
	c := counts[slot(u[0])]
	c.Attempts += int64(len(u))
	last := u[len(u)-1]
	switch {
	case last.decision == DecideClean || last.decision == DecideRework:
		c.Final.Rework++
	case last.decision == DecideAccept || last.decision == "" && last.Judgement.Verdict == pipeline.Accept:
		c.Final.Accept++
	case last.decision == DecideReject || last.Judgement.Verdict == pipeline.Reject:
		c.Final.Reject++
	default:
		c.Final.Open++
	}
	if u[0].Attempt == 1 {
		c.First = plus(c.First, u[0].Judgement.Verdict)
		c.Permanent = plus(c.Permanent, u[0].Judgement.Verdict) // nothing was proven removable
		c.FirstBinned = plus(c.FirstBinned, u[0].bin)
		for _, x := range u[1:] {
			if u[0].Judgement.Verdict != pipeline.Accept && x.Judgement.Verdict == pipeline.Accept {
				c.RetestAccepts = plus(c.RetestAccepts, u[0].Judgement.Verdict)
				break
			}
		}
	}
	counts[slot(u[0])] = c
	for _, x := range u {
		c := counts[slot(x)]
		c.Showings = plus(c.Showings, x.Judgement.Verdict)
		c.Binned = plus(c.Binned, x.bin)
		counts[slot(x)] = c
	}
}

func plus(t Tally, v pipeline.Verdict) Tally {
	switch v {
	case pipeline.Accept:
		t.Accept++
	case pipeline.Reject:
		t.Reject++
	case pipeline.Hold:
		t.Hold++
	}
	return t
}

func countReasons(reasons map[string]ReasonCounts, x *told, first bool) {
	seen := map[string]bool{}
	for i, name := range x.reasons {
		if seen[name] {
			continue
		}
		seen[name] = true
		key := string(x.Judgement.Verdict) + " " + name
		n := reasons[key]
		n.Showings++
		if i == 0 {
			n.Principal++
		}
		if first {
			n.First++
		}
		if first && i == 0 {
			n.FirstPrincipal++
		}
		reasons[key] = n
	}
}

func TestRollUpsEqualASlowRecount(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		all := production(t, s, rand.New(rand.NewPCG(1, 2)), 200)
		wantCounts, wantReasons := recount(all)
		got, err := s.Counts(ctx, Question{GroupBy: []Dimension{ByLine}, Every: 30 * time.Minute})
		if err != nil || len(got) != len(wantCounts) || len(got) < 8 {
			t.Fatalf("%d groups, want %d, %v", len(got), len(wantCounts), err)
		}
		for _, c := range got {
			key := c.Start.Format("15:04") + " " + c.Of[ByLine]
			c.Group = Group{}
			if !reflect.DeepEqual(c, wantCounts[key]) {
				t.Errorf("%s\ngot  %+v\nwant %+v", key, c, wantCounts[key])
			}
		}
		reasons, err := s.Reasons(ctx, Question{})
		if err != nil || len(reasons) != len(wantReasons) || len(reasons) < 6 {
			t.Fatalf("%d reasons, want %d, %v", len(reasons), len(wantReasons), err)
		}
		for _, n := range reasons {
			key := string(n.Verdict) + " " + n.Reason
			n.Group, n.Verdict, n.Reason = Group{}, "", ""
			if !reflect.DeepEqual(n, wantReasons[key]) {
				t.Errorf("%s\ngot  %+v\nwant %+v", key, n, wantReasons[key])
			}
		}
		if n := rowsIn(t, s, "dirty_buckets"); n != 0 {
			t.Errorf("%d dirty buckets after asking for everything", n)
		}
	})
}

func TestALateFirstAttemptMovesTheUnit(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		mustRecord(t, s, disc("0001", 2, pipeline.Accept, noon.Add(2*time.Hour)))
		q := Question{Every: time.Hour}
		got, err := s.Counts(ctx, q)
		if err != nil || len(got) != 1 || got[0].First.Total() != 0 || got[0].Final.Accept != 1 {
			t.Fatalf("before: %+v, %v", got, err)
		}
		mustRecord(t, s, disc("0001", 1, pipeline.Reject, noon)) // from a spool
		got, err = s.Counts(ctx, q)
		if err != nil || len(got) != 2 {
			t.Fatalf("after: %+v, %v", got, err)
		}
		first, second := got[0], got[1]
		if first.First != (Tally{Reject: 1}) || first.Final != (Final{Accept: 1}) || first.Attempts != 2 || first.Showings.Total() != 1 {
			t.Errorf("noon: %+v", first)
		}
		if second.First.Total() != 0 || second.Final.Total() != 0 || second.Showings != (Tally{Accept: 1}) {
			t.Errorf("two hours later: %+v", second)
		}
	})
}

func TestQuestionsPickGroupAndRefuse(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		for i := range 24 {
			in := disc(fmt.Sprint(i), 1, pipeline.Accept, noon.Add(time.Duration(i)*time.Hour))
			in.Lot = []string{"L7", "L8"}[i%2]
			mustRecord(t, s, in)
		}
		midnight := time.Date(2026, 3, 3, 0, 0, 0, 0, time.FixedZone("", 5*3600+1800)) // +05:30
		got, err := s.Counts(ctx, Question{Every: 24 * time.Hour, Origin: midnight})
		if err != nil || len(got) != 2 || !got[1].Start.Equal(midnight) || got[0].Showings.Accept != 7 || got[1].Showings.Accept != 17 {
			t.Errorf("days of +05:30: %+v, %v", got, err)
		}
		got, err = s.Counts(ctx, Question{Filter: Filter{Lot: "L8", From: noon.Add(time.Hour), To: noon.Add(5 * time.Hour)}})
		if err != nil || len(got) != 1 || got[0].Showings.Accept != 2 {
			t.Errorf("lot L8, 13:00 to 17:00: %+v, %v", got, err)
		}
		if got, err = s.Counts(ctx, Question{Filter: Filter{Purpose: pipeline.Master}}); err != nil || len(got) != 0 {
			t.Errorf("masters: %+v, %v", got, err)
		}
		for name, q := range map[string]Question{
			"from":      {Filter: Filter{From: noon.Add(time.Minute)}},
			"every":     {Every: 20 * time.Minute},
			"unit":      {Filter: Filter{Unit: "1"}},
			"dimension": {GroupBy: []Dimension{"unit"}},
		} {
			_, err := s.Counts(ctx, q)
			if pipeline.KindOf(err) != pipeline.InvalidKind || err == nil {
				t.Errorf("%s: got %v", name, err)
			}
		}
	})
}

// A record that comes between counting a bucket and writing the counts keeps it dirty.
func TestARecordDuringRepairIsNotLost(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		mustRecord(t, s, disc("0001", 1, pipeline.Accept, noon))
		b, err := s.dirty(ctx, 0, 1<<62)
		if err != nil || len(b) != 1 {
			t.Fatal(b, err)
		}
		stale := newTally(b[0].us, b[0].us+bucketUS)
		if err := s.count(ctx, stale); err != nil {
			t.Fatal(err)
		}
		mustRecord(t, s, disc("0002", 1, pipeline.Reject, noon))
		if err := s.writeTally(ctx, b[0], stale); err != nil {
			t.Fatal(err)
		}
		if rowsIn(t, s, "dirty_buckets") != 1 {
			t.Error("the bucket is clean with a unit missing")
		}
		if err := s.Repair(ctx); err != nil {
			t.Fatal(err)
		}
		if err := s.writeTally(ctx, b[0], stale); err != nil { // a slow server
			t.Fatal(err)
		}
		c, err := s.Counts(ctx, Question{})
		if err != nil || c[0].Showings != (Tally{Accept: 1, Reject: 1}) {
			t.Errorf("%+v, %v", c, err)
		}
	})
}
