package server

import (
	"cmp"
	"maps"
	"slices"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/intake"
	"lapgate/server/ledger"
)

// mostStations is how many stations are remembered; names come from clients.
const mostStations = 4096

// Stations remembers when each station was heard of since the server started, and what
// it showed. It is safe for concurrent use.
type Stations struct {
	mu   sync.Mutex // guards seen
	seen map[place]*sight
}

// sight is what is known of one station.
type sight struct {
	heartbeat, inspection time.Time
	subjects              map[subject]bool
}

// subject is what was shown.
type subject struct{ part, surface string }

// NewStations returns one that has heard of none.
func NewStations() *Stations { return &Stations{seen: map[place]*sight{}} }

// Inspected notes a showing that is on record. It does not block.
func (s *Stations) Inspected(v intake.Verdict) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if at := s.at(place{v.Line, v.Station}); at != nil {
		at.inspection = v.Judged
		at.subjects[subject{v.Part, v.Surface}] = true
	}
}

// heard notes a heartbeat; an error says that the station cannot be remembered.
func (s *Stations) heard(where place, now time.Time) error {
	for _, f := range []struct{ field, id string }{{"line", where.line}, {"station", where.station}} {
		if err := pipeline.CheckID(f.field, f.id); err != nil {
			return err
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	at := s.at(where)
	if at == nil {
		return pipeline.Fail(pipeline.Exhausted, "station: %d are known already; is every line given a name of its own that stays?", mostStations)
	}
	at.heartbeat = now
	return nil
}

// at returns a station's sight, nil where there are too many. The caller holds s.mu.
func (s *Stations) at(where place) *sight {
	if s.seen[where] == nil {
		if len(s.seen) >= mostStations {
			return nil
		}
		s.seen[where] = &sight{subjects: map[subject]bool{}}
	}
	return s.seen[where]
}

// stationSight is a copy of what is known of a station.
type stationSight struct {
	place
	heartbeat, inspection time.Time
}

// list returns the stations by line and station.
func (s *Stations) list() []stationSight {
	s.mu.Lock()
	defer s.mu.Unlock()
	var out []stationSight
	for where, at := range s.seen {
		out = append(out, stationSight{where, at.heartbeat, at.inspection})
	}
	slices.SortFunc(out, func(a, b stationSight) int {
		return cmp.Or(cmp.Compare(a.line, b.line), cmp.Compare(a.station, b.station))
	})
	return out
}

// places returns where a part was shown since the server started.
func (s *Stations) places(part string) []ledger.MasterPlace {
	s.mu.Lock()
	defer s.mu.Unlock()
	var out []ledger.MasterPlace
	for where, at := range s.seen {
		for what := range maps.Keys(at.subjects) {
			if what.part == part {
				out = append(out, ledger.MasterPlace{Part: part, Surface: what.surface, Line: where.line, Station: where.station})
			}
		}
	}
	return out
}
