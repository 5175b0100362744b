package server

import (
	"fmt"
	"maps"
	"slices"
	"strings"
	"sync"
	"time"

	"lapgate/pipeline"
)

// Builder makes the pipeline of a recipe for the cameras of one line and station. Stale
// reports whether what it was built from (calibrations) has changed since.
type Builder func(r *pipeline.Recipe, line, station string) (p *pipeline.Pipeline, stale func() bool, err error)

// Book is the recipes in force, by file, and their pipelines by line and station. A
// file that was saved broken keeps its last good recipe in force. It is safe for
// concurrent use.
type Book struct {
	build Builder

	mu      sync.Mutex // guards everything below
	files   map[string]*entry
	retired []*pipeline.Pipeline // replaced, perhaps still judging; closed with the book
}

type entry struct {
	recipe  *pipeline.Recipe // nil = never loaded well
	since   time.Time
	refused error // of the latest save, nil = none
	pipes   map[place]built
}

// place is where cameras of their own stand.
type place struct{ line, station string }

type built struct {
	pipe  *pipeline.Pipeline
	stale func() bool
}

// NewBook returns an empty Book whose pipelines are made by build.
func NewBook(build Builder) *Book { return &Book{build: build, files: map[string]*entry{}} }

// Put brings a recipe into force. Two files for the same part, revision and surface are
// an error, and nothing changes.
func (b *Book) Put(file string, r *pipeline.Recipe, now time.Time) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	for other, e := range b.files {
		if other != file && e.recipe != nil && sameSubject(e.recipe, r) {
			return pipeline.Invalid("%s: part %s revision %q surface %q is in %s already; keep one of the two files", file, r.Part, r.Revision, r.Surface, other)
		}
	}
	if old := b.files[file]; old != nil {
		b.retire(old)
	}
	b.files[file] = &entry{recipe: r, since: now, pipes: map[place]built{}}
	return nil
}

// retire sets pipelines aside. The caller holds b.mu.
func (b *Book) retire(e *entry) {
	for _, p := range e.pipes {
		b.retired = append(b.retired, p.pipe)
	}
}

func sameSubject(a, c *pipeline.Recipe) bool {
	return a.Part == c.Part && a.Revision == c.Revision && a.Surface == c.Surface
}

// Refuse notes that the latest save of a file could not be used.
func (b *Book) Refuse(file string, why error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.files[file] == nil {
		b.files[file] = &entry{pipes: map[place]built{}}
	}
	b.files[file].refused = why
}

// For implements intake.Recipes. An empty revision or surface in a recipe stands for
// any; the most exact recipe wins.
func (b *Book) For(id pipeline.Identity) (*pipeline.Pipeline, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	var best *entry
	most := -1
	for _, file := range slices.Sorted(maps.Keys(b.files)) {
		e := b.files[file]
		if e.recipe == nil || e.recipe.Part != id.Part {
			continue
		}
		if exact, ok := matches(e.recipe, id); ok && exact > most {
			best, most = e, exact
		}
	}
	if best == nil {
		return nil, pipeline.NotFound("%s for part %s revision %q surface %q (have %s); save one in the recipes folder", pipeline.ReasonNoRecipe, id.Part, id.Revision, id.Surface, b.have())
	}
	return b.at(best, place{id.Line, id.Station})
}

// at returns the entry's pipeline for a place, made anew when its calibration changed.
// The caller holds b.mu.
func (b *Book) at(e *entry, where place) (*pipeline.Pipeline, error) {
	have, ok := e.pipes[where]
	if ok && !have.stale() {
		return have.pipe, nil
	}
	p, stale, err := b.build(e.recipe, where.line, where.station)
	if err != nil {
		if ok { // the last good one stays in force
			return have.pipe, nil
		}
		return nil, pipeline.Fail(pipeline.Unready, "line %s station %s: %w", where.line, where.station, err)
	}
	if ok {
		b.retired = append(b.retired, have.pipe)
	}
	e.pipes[where] = built{p, stale}
	return p, nil
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
		if e.recipe != nil {
			out = append(out, strings.TrimRight(fmt.Sprintf("%s/%s/%s", e.recipe.Part, e.recipe.Revision, e.recipe.Surface), "/"))
		}
	}
	if len(out) == 0 {
		return "none"
	}
	slices.Sort(out)
	return strings.Join(out, ", ")
}

// snapshot returns copies of the entries by file.
func (b *Book) snapshot() map[string]entry {
	b.mu.Lock()
	defer b.mu.Unlock()
	out := map[string]entry{}
	for file, e := range b.files {
		out[file] = entry{recipe: e.recipe, since: e.since, refused: e.refused, pipes: maps.Clone(e.pipes)}
	}
	return out
}

// Close closes every pipeline that was ever in force.
func (b *Book) Close() error {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, e := range b.files {
		b.retire(e)
	}
	var first error
	for _, p := range b.retired {
		if err := p.Close(); err != nil && first == nil {
			first = err
		}
	}
	b.files, b.retired = map[string]*entry{}, nil
	return first
}
