package retest

import (
	"context"
	"fmt"
	"log/slog"
	"slices"
	"sync"
	"sync/atomic"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Keeper registers showings as they are recorded and keeps the result in the ledger. Set
// its fields before first use; it is then safe for concurrent use.
type Keeper struct {
	Ledger *ledger.Store
	// Decode reads a recipe's text as it is on record.
	Decode func(file string, text []byte) (*pipeline.Recipe, error)
	Log    *slog.Logger

	done atomic.Bool // nothing waits; false at first, since an earlier run may have left some
	mu   sync.Mutex  // held while units are worked on; guards recipes
	// recipes by text hash; nil = it cannot be read any more
	recipes map[string]*pipeline.Recipe
}

// Recorded notes an inspection that the ledger took. It does not block.
func (k *Keeper) Recorded(in ledger.Inspection) {
	if in.Purpose == pipeline.Production && (in.Attempt > 1 || in.Late) { // a late one may come after the attempt that follows it
		k.done.Store(false)
	}
}

// CatchUp registers every showing that waits for it. A nil Keeper has none.
func (k *Keeper) CatchUp(ctx context.Context) error {
	if k == nil || k.done.Load() {
		return nil
	}
	k.mu.Lock()
	defer k.mu.Unlock()
	if k.done.Swap(true) { // set first: what is recorded meanwhile clears it again
		return nil
	}
	err := k.catchUp(ctx)
	if err != nil {
		k.done.Store(false)
	}
	return err
}

func (k *Keeper) catchUp(ctx context.Context) error {
	units, err := k.Ledger.Unregistered(ctx)
	if err != nil {
		return err
	}
	for _, id := range units {
		if err := k.unit(ctx, id); err != nil {
			return err
		}
	}
	return nil
}

// unit registers the showings of one unit, each with the latest complete one before it.
func (k *Keeper) unit(ctx context.Context, id pipeline.Identity) error {
	list, err := k.Ledger.Attempts(ctx, id)
	if err != nil || len(list) < 2 {
		return err
	}
	first, against := list[0].Inspection, list[0].Inspection
	t := newTrail(first)
	for i, sh := range list[1:] {
		r := register(against, sh.Inspection)
		r.Previous = list[i].ID
		t.follow(sh.Inspection, r)
		if complete(sh.Evidence) {
			against = sh.Inspection
		}
		if r.Verdict, r.Reasons, err = k.judge(ctx, first, t); err != nil {
			return err
		}
		if sh.Registration == nil || changed(*sh.Registration, r) {
			if err := k.Ledger.PutRegistration(ctx, sh.ID, r); err != nil {
				return err
			}
		}
	}
	return nil
}

func changed(old, r ledger.Registration) bool {
	return old.Previous != r.Previous || old.Against != r.Against || old.Verdict != r.Verdict || old.Known != r.Known || !slices.Equal(old.Reasons, r.Reasons)
}

// judge judges the first showing by its permanent defects, by the recipe that judged it.
// Where nothing is gone, and where that recipe cannot be read, the verdict stays.
func (k *Keeper) judge(ctx context.Context, first ledger.Inspection, t *trail) (pipeline.Verdict, []string, error) {
	verdict, reasons := first.Judgement.Verdict, first.Judgement.Reasons
	if len(t.gone) > 0 {
		r, err := k.recipe(ctx, first.Judgement.Recipe)
		if err != nil {
			return "", nil, err
		}
		if r != nil {
			verdict, reasons = r.Verdict(t.permanent(first.Evidence))
		}
	}
	var names []string
	for _, r := range reasons {
		if !slices.Contains(names, r.Name) {
			names = append(names, r.Name)
		}
	}
	return verdict, names, nil
}

// recipe reads a recipe from the ledger; nil = it is not there or cannot be read. The caller
// holds k.mu.
func (k *Keeper) recipe(ctx context.Context, hash string) (*pipeline.Recipe, error) {
	if r, known := k.recipes[hash]; known {
		return r, nil
	}
	var r *pipeline.Recipe
	stored, err := k.Ledger.Recipe(ctx, hash)
	switch {
	case err == nil:
		if r, err = k.Decode(stored.File, []byte(stored.Text)); err != nil {
			r, err = nil, fmt.Errorf("recipe %s: %w", hash, err)
		}
	case pipeline.KindOf(err) != pipeline.NotFoundKind:
		return nil, err
	}
	if err != nil {
		k.Log.Warn("units are not judged by their permanent defects: their recipe cannot be read", "recipe", hash, "error", err)
	}
	if k.recipes == nil {
		k.recipes = map[string]*pipeline.Recipe{}
	}
	k.recipes[hash] = r
	return r, nil
}
