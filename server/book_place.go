package server

import (
	"maps"
	"slices"

	"lapgate/pipeline"
)

// place is where cameras of their own stand.
type place struct{ line, station string }

type built struct {
	pipe  *pipeline.Pipeline
	stale func() bool
}

// at returns the pipeline of a version at a place, made anew when its calibration
// changed. The caller holds b.mu.
func (b *Book) at(v *version, where place) (*pipeline.Pipeline, error) {
	have, ok := v.pipes[where]
	if ok && !have.stale() {
		return have.pipe, nil
	}
	p, stale, err := b.build(v.recipe, where.line, where.station)
	if err != nil {
		if ok { // the last good one stays in force
			return have.pipe, nil
		}
		return nil, pipeline.Fail(pipeline.Unready, "line %s station %s: %w", where.line, where.station, err)
	}
	if ok {
		b.retired = append(b.retired, have.pipe)
	}
	v.pipes[where] = built{p, stale}
	return p, nil
}

// snapshot returns copies of the entries by file.
func (b *Book) snapshot() map[string]entry {
	b.mu.Lock()
	defer b.mu.Unlock()
	out := map[string]entry{}
	for file, e := range b.files {
		c := *e
		c.versions = map[string]*version{}
		for hash, v := range e.versions {
			copied := *v
			copied.pipes = maps.Clone(v.pipes)
			c.versions[hash] = &copied
		}
		out[file] = c
	}
	return out
}

// byAge returns the versions of an entry, the one in force for longest first.
func (e entry) byAge() []*version {
	return slices.SortedFunc(maps.Values(e.versions), func(a, b *version) int { return a.since.Compare(b.since) })
}

// Close closes every pipeline that was ever in force.
func (b *Book) Close() error {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, e := range b.files {
		b.keepVersions(e, nil)
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
