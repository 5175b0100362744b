package retest

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

// few accepts up to three defects.
type few struct{}

func (few) Judge(e pipeline.Evidence) (pipeline.Verdict, []pipeline.Reason) {
	if len(e.Defects) > 3 {
		return pipeline.Reject, []pipeline.Reason{{Name: "too many", Verdict: pipeline.Reject}}
	}
	return pipeline.Accept, nil
}

func (few) Canonical() []byte { return []byte("few") }

// bench is a keeper over a real ledger whose recipes accept up to three defects.
func newBench(t *testing.T) (*Keeper, func(attempt int, recipe string, change func(*ledger.Inspection), at ...[2]float64)) {
	t.Helper()
	store, err := ledger.Open(context.Background(), filepath.Join(t.TempDir(), "ledger.db"))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { store.Close() })
	if err := store.PutRecipe(context.Background(), ledger.Recipe{Part: "disc-25", Text: "few"}); err != nil {
		t.Fatal(err)
	}
	k := &Keeper{Ledger: store, Log: slog.New(slog.NewTextHandler(io.Discard, nil)), Decode: func(_ string, text []byte) (*pipeline.Recipe, error) {
		if string(text) != "few" {
			return nil, errors.New("cannot be read")
		}
		return &pipeline.Recipe{Judge: few{}}, nil
	}}
	return k, func(attempt int, recipe string, change func(*ledger.Inspection), at ...[2]float64) {
		t.Helper()
		e := pipeline.Evidence{Coverage: 1, Views: []pipeline.ViewEvidence{{Name: "ring"}}}
		for i, p := range at {
			e.Defects = append(e.Defects, pipeline.Defect{ID: i + 1, Kind: pipeline.Dig, DiameterUM: 50 + 10*float64(i%2), SNR: 20, Place: pipeline.Place{UUM: p[0], VUM: p[1]}})
		}
		verdict, reasons := few{}.Judge(e)
		in := ledger.Inspection{Identity: pipeline.Identity{Part: "disc-25", Unit: "U1", Line: "A", Station: "A1", Attempt: attempt, Purpose: pipeline.Production},
			Digest: fmt.Sprint(attempt), Captured: noon.Add(time.Duration(attempt) * time.Minute), Judged: noon.Add(time.Duration(attempt) * time.Minute),
			Evidence: e, Judgement: pipeline.Judgement{Verdict: verdict, Reasons: reasons, Recipe: recipe}}
		if change != nil {
			change(&in)
		}
		in, _, err := store.Record(context.Background(), in)
		if err != nil {
			t.Fatal(err)
		}
		k.Recorded(in)
	}
}

func (k *Keeper) story(t *testing.T) []ledger.Showing {
	t.Helper()
	if err := k.CatchUp(context.Background()); err != nil {
		t.Fatal(err)
	}
	list, err := k.Ledger.Unit(context.Background(), "disc-25", "U1")
	if err != nil {
		t.Fatal(err)
	}
	return list
}

var (
	digs = [][2]float64{{1000, 0}, {0, 2000}, {-1500, -300}}
	dust = [2]float64{700, -900}
	more = [2]float64{-400, 1100}
)

func hashOf(t *testing.T, k *Keeper) string {
	t.Helper()
	list, err := k.Ledger.Recipes(context.Background(), "")
	if err != nil || len(list) != 1 {
		t.Fatal(list, err)
	}
	return list[0].Hash
}

// Dust goes at the second showing and more of it at the third: what the first is worth is
// known better each time.
func TestWhatGoesStepByStep(t *testing.T) {
	k, show := newBench(t)
	hash := hashOf(t, k)
	show(1, hash, nil, append(slices.Clone(digs), dust, more)...)
	show(2, hash, nil, append(slices.Clone(digs), more)...)
	list := k.story(t)
	if g := list[1].Registration; g == nil || !g.Known || !slices.Equal(g.Removable, []int{4}) || g.Verdict != pipeline.Reject || !slices.Equal(g.Reasons, []string{"too many"}) {
		t.Fatalf("second: %+v", g)
	}
	show(3, hash, nil, digs...)
	list = k.story(t)
	if g := list[2].Registration; g == nil || g.PreviousAttempt != 2 || !slices.Equal(g.Removable, []int{4}) || g.Verdict != pipeline.Accept || len(g.Reasons) != 0 {
		t.Errorf("third: %+v", g)
	}
}

// On a dark picture every defect would be gone: it is held against nothing, and the next one
// is held against the last complete showing.
func TestAnIncompleteShowingProvesNothing(t *testing.T) {
	k, show := newBench(t)
	hash := hashOf(t, k)
	show(1, hash, nil, append(slices.Clone(digs), dust)...)
	show(2, hash, func(in *ledger.Inspection) {
		in.Evidence.Views[0].Proofs = []pipeline.Proof{{Name: pipeline.ProofLight, Reason: "lamp off"}}
		in.Judgement.Verdict = pipeline.Hold
	})
	show(3, hash, func(in *ledger.Inspection) {
		in.Evidence.Failures = []pipeline.Failure{{Reason: pipeline.ReasonLate}}
		in.Judgement.Verdict, in.Late = pipeline.Hold, true
	}, digs...)
	list := k.story(t)
	if g := list[1].Registration; g == nil || g.Known || g.Verdict != pipeline.Reject {
		t.Errorf("dark: %+v", g)
	}
	if g := list[2].Registration; g == nil || !g.Known || g.Against != list[0].ID || g.PreviousAttempt != 1 || g.Verdict != pipeline.Accept {
		t.Errorf("after it, late but complete: %+v", g)
	}
}

// Where too little is in common, and where the recipe cannot be read any more, the verdict
// stays; a datum's angle needs nothing in common.
func TestWhatCannotBeToldStays(t *testing.T) {
	k, show := newBench(t)
	show(1, hashOf(t, k), nil, [2]float64{1000, 0}, dust, more, [2]float64{2200, 100})
	show(2, hashOf(t, k), nil, [2]float64{-1000, 0})
	if g := k.story(t)[1].Registration; g == nil || g.Known || g.Verdict != pipeline.Reject {
		t.Errorf("nothing in common: %+v", g)
	}
	k, show = newBench(t)
	turned := func(deg float64) func(*ledger.Inspection) {
		return func(in *ledger.Inspection) {
			in.Evidence.Measurements = []pipeline.Measurement{{Name: pipeline.MeasuredPartAngle, Value: deg}}
		}
	}
	show(1, hashOf(t, k), turned(10), [2]float64{1000, 0}, dust, more, [2]float64{2200, 100})
	show(2, hashOf(t, k), turned(190), [2]float64{-1000, 0})
	if g := k.story(t)[1].Registration; g == nil || !g.Known || len(g.Removable) != 3 || g.Verdict != pipeline.Accept {
		t.Errorf("by the datum: %+v", g)
	}
	k, show = newBench(t)
	show(1, "sha256:gone", nil, append(slices.Clone(digs), dust)...)
	show(2, "sha256:gone", nil, digs...)
	if g := k.story(t)[1].Registration; g == nil || !g.Known || len(g.Removable) != 1 || g.Verdict != pipeline.Reject {
		t.Errorf("the recipe is not on record: %+v", g)
	}
}
