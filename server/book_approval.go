package server

import (
	"context"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Approvals is where approvals are kept; see ledger.Store.
type Approvals interface {
	Approvals(ctx context.Context, part string) ([]ledger.Approved, error)
	LotBegan(ctx context.Context, part, lot, line, station string) (time.Time, error)
}

// Decode reads a recipe's text; file is its name in messages, and where files that it
// names are looked for.
type Decode func(file string, text []byte) (*pipeline.Recipe, error)

// RequireApproval has only approved recipes judge from now on; now dates lots that begin.
// It must be called before the first Put.
func (b *Book) RequireApproval(a Approvals, decode Decode, now func() time.Time) {
	b.approvals, b.decode, b.now = a, decode, now
}

// Development reports whether recipes need no approval.
func (b *Book) Development() bool { return b.approvals == nil }

// Refresh takes over approvals that were recorded since.
func (b *Book) Refresh(ctx context.Context) error {
	approved, err := b.readApprovals(ctx)
	if err != nil || b.approvals == nil {
		return err
	}
	b.mu.Lock()
	defer b.mu.Unlock()
	var first error
	for file, e := range b.files {
		if err := b.adopt(e, file, approved); err != nil && first == nil {
			first = err
		}
	}
	return first
}

func (b *Book) readApprovals(ctx context.Context) ([]ledger.Approved, error) {
	if b.approvals == nil {
		return nil, nil
	}
	return b.approvals.Approvals(ctx, "")
}

// adopt gives an entry the versions that its approvals let judge: the latest that was
// effective at once, and those for later lots. The caller holds b.mu.
func (b *Book) adopt(e *entry, file string, all []ledger.Approved) error {
	if e.saved == nil {
		return nil
	}
	var mine []ledger.Approved
	for _, a := range all {
		if a.Recipe.Part != e.saved.Part || a.Recipe.Revision != e.saved.Revision || a.Recipe.Surface != e.saved.Surface {
			continue
		}
		if a.Effective == ledger.EffectiveNow {
			mine = nil
		}
		mine = append(mine, a)
	}
	versions := map[string]*version{}
	for _, a := range mine {
		v := &version{recipe: e.saved, since: a.At, approval: &a.Approval}
		if old := e.versions[a.Hash]; old != nil {
			v.recipe = old.recipe
		} else if a.Hash != e.saved.TextHash {
			r, err := b.decode(file, []byte(a.Recipe.Text))
			if err != nil {
				return pipeline.Fail(pipeline.Unready, "recipe %s was approved and cannot be read any more: %w", a.Hash, err)
			}
			v.recipe = r
		}
		versions[a.Hash] = v
	}
	b.keepVersions(e, versions)
	e.approved = mine
	return nil
}

// versionFor returns the version that judges a unit; nil = none is approved. The caller
// holds b.mu.
func (b *Book) versionFor(e *entry, id pipeline.Identity) (*version, error) {
	if b.approvals == nil {
		return e.versions[e.saved.TextHash], nil
	}
	if len(e.approved) == 0 {
		return nil, nil
	}
	began, err := b.lotBegan(id)
	if err != nil {
		return nil, err
	}
	return e.versions[chosen(e.approved, began)], nil
}

// chosen returns the hash of the recipe for a lot that began then. Where every approval
// was for later lots the first of them judges: there was none before.
func chosen(approved []ledger.Approved, began time.Time) string {
	for i := len(approved) - 1; i > 0; i-- {
		if a := approved[i]; a.Effective == ledger.EffectiveNow || !began.Before(a.At) {
			return a.Hash
		}
	}
	return approved[0].Hash
}

// lotAt is a lot at one line and station. Units without a lot are one lot.
type lotAt struct{ part, lot, line, station string }

// lotsRemembered bounds the memory of lots; what is forgotten is in the ledger.
const lotsRemembered = 10000

// lotBegan returns when a lot was first shown at a station; one that never was begins
// now. The caller holds b.mu.
func (b *Book) lotBegan(id pipeline.Identity) (time.Time, error) {
	key := lotAt{id.Part, id.Lot, id.Line, id.Station}
	if began, known := b.lots[key]; known {
		return began, nil
	}
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
	defer cancel()
	began, err := b.approvals.LotBegan(ctx, id.Part, id.Lot, id.Line, id.Station)
	if err != nil {
		return began, err
	}
	if began.IsZero() {
		began = b.now()
	}
	if len(b.lots) >= lotsRemembered {
		clear(b.lots)
	}
	b.lots[key] = began
	return began, nil
}

// unapproved is the answer to a unit whose recipe nobody has approved.
func unapproved(r *pipeline.Recipe) error {
	return pipeline.Fail(pipeline.Unready, "%s for part %s: %s (%s) waits for approval and none was approved before; a second person runs: "+
		"lapgate approve %s --author NAME --person NAME --reason TEXT --effective now", pipeline.ReasonNoRecipe, r.Part, r.File, r.TextHash, r.TextHash)
}

// Judges reports whether a recipe may judge units now, of some lot at least.
func (b *Book) Judges(r *pipeline.Recipe) bool {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, e := range b.files {
		if e.saved != nil && sameSubject(e.saved, r) && e.versions[r.TextHash] != nil {
			return true
		}
	}
	return false
}
