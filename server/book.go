package server

import (
	"context"
	"fmt"
	"maps"
	"slices"
	"strings"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Builder makes the pipeline of a recipe for the cameras of one line and station. Stale
// reports whether what it was built from (calibrations) has changed since.
type Builder func(r *pipeline.Recipe, line, station string) (p *pipeline.Pipeline, stale func() bool, err error)

// Book is the recipes in force, by file, and their pipelines by line and station. A
// file that was saved broken keeps its last good recipe in force; one that was saved and
// not approved keeps its last approved one, where approval is required. It is safe for
// concurrent use.
type Book struct {
	build     Builder
	approvals Approvals // nil = every good save is in force at once
	decode    Decode
	now       func() time.Time // set where approvals are

	mu      sync.Mutex // guards everything below
	files   map[string]*entry
	lots    map[lotAt]time.Time  // when a lot was first asked for
	retired []*pipeline.Pipeline // replaced, perhaps still judging; closed with the book
}

// entry is one file.
type entry struct {
	saved    *pipeline.Recipe // the latest good save; nil = never loaded well
	since    time.Time        // of that save
	refused  error            // of the latest save, nil = none
	approved []ledger.Approved
	versions map[string]*version // the recipes that may judge, by text hash
}

// version is one text of a file that may judge.
type version struct {
	recipe   *pipeline.Recipe
	since    time.Time
	approval *ledger.Approval // nil = none is needed
	pipes    map[place]built
}

// NewBook returns an empty Book whose pipelines are made by build.
func NewBook(build Builder) *Book {
	return &Book{build: build, files: map[string]*entry{}, lots: map[lotAt]time.Time{}}
}

// Put takes over a good save. It comes into force at once, or when it is approved where
// approval is required. Two files for the same part, revision and surface are an error,
// and nothing changes.
func (b *Book) Put(file string, r *pipeline.Recipe, now time.Time) error {
	approved, err := b.readApprovals(context.Background())
	if err != nil {
		return err
	}
	b.mu.Lock()
	defer b.mu.Unlock()
	for other, e := range b.files {
		if other != file && e.saved != nil && sameSubject(e.saved, r) {
			return pipeline.Invalid("%s: part %s revision %q surface %q is in %s already; keep one of the two files", file, r.Part, r.Revision, r.Surface, other)
		}
	}
	e := b.entry(file)
	e.saved, e.since, e.refused = r, now, nil
	if b.approvals == nil {
		b.keepVersions(e, map[string]*version{r.TextHash: {recipe: r, since: now}})
		return nil
	}
	return b.adopt(e, file, approved)
}

// entry returns the entry of a file, a new one where there is none. The caller holds b.mu.
func (b *Book) entry(file string) *entry {
	if b.files[file] == nil {
		b.files[file] = &entry{versions: map[string]*version{}}
	}
	return b.files[file]
}

// keepVersions makes want the entry's versions; those it has already keep their
// pipelines. The caller holds b.mu.
func (b *Book) keepVersions(e *entry, want map[string]*version) {
	for hash, v := range e.versions {
		if w := want[hash]; w != nil {
			w.pipes = v.pipes
			continue
		}
		for _, p := range v.pipes {
			b.retired = append(b.retired, p.pipe)
		}
	}
	for _, v := range want {
		if v.pipes == nil {
			v.pipes = map[place]built{}
		}
	}
	e.versions = want
}

func sameSubject(a, c *pipeline.Recipe) bool {
	return a.Part == c.Part && a.Revision == c.Revision && a.Surface == c.Surface
}

// Refuse notes that the latest save of a file could not be used.
func (b *Book) Refuse(file string, why error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.entry(file).refused = why
}

// For implements intake.Recipes. An empty revision or surface in a recipe stands for
// any; the most exact recipe wins.
func (b *Book) For(id pipeline.Identity) (*pipeline.Pipeline, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	var best *version
	var waiting *pipeline.Recipe
	most := -1
	for _, file := range slices.Sorted(maps.Keys(b.files)) {
		e := b.files[file]
		if e.saved == nil || e.saved.Part != id.Part {
			continue
		}
		exact, ok := matches(e.saved, id)
		if !ok || exact <= most {
			continue
		}
		v, err := b.versionFor(e, id)
		if err != nil {
			return nil, err
		}
		if v == nil {
			waiting = e.saved
			continue
		}
		best, most = v, exact
	}
	switch {
	case best == nil && waiting != nil:
		return nil, unapproved(waiting)
	case best == nil:
		return nil, pipeline.NotFound("%s for part %s revision %q surface %q (have %s); save one in the recipes folder", pipeline.ReasonNoRecipe, id.Part, id.Revision, id.Surface, b.have())
	}
	return b.at(best, place{id.Line, id.Station})
}

func matches(r *pipeline.Recipe, id pipeline.Identity) (exact int, ok bool) {
	for _, f := range []struct{ recipe, unit string }{{r.Revision, id.Revision}, {r.Surface, id.Surface}} {
		switch f.recipe {
		case "":
		case f.unit:
			exact++
		default:
			return 0, false
		}
	}
	return exact, true
}

// have lists what there is. The caller holds b.mu.
func (b *Book) have() string {
	var out []string
	for _, e := range b.files {
		if e.saved != nil {
			out = append(out, strings.TrimRight(fmt.Sprintf("%s/%s/%s", e.saved.Part, e.saved.Revision, e.saved.Surface), "/"))
		}
	}
	if len(out) == 0 {
		return "none"
	}
	slices.Sort(out)
	return strings.Join(out, ", ")
}
