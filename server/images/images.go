// Package images keeps and finds stored frames in a folder. It knows neither what a frame
// shows nor whether an inspection is on record.
package images

import (
	"errors"
	"os"
	"path/filepath"
	"sync"

	"lapgate/pipeline"
)

// Policy says frames of which verdicts are kept.
type Policy string

// The policies.
const (
	KeepNone            Policy = "none"
	KeepRejectsAndHolds Policy = "rejects_and_holds"
	KeepAll             Policy = "all"
)

// Wants reports whether frames behind this verdict are kept.
func (p Policy) Wants(v pipeline.Verdict) bool {
	return p == KeepAll || p == KeepRejectsAndHolds && v != pipeline.Accept
}

// Settings say how much is kept.
type Settings struct {
	Policy     Policy
	QuotaBytes int64 // of all files; the oldest go first; 0 = no bound
	QueueBytes int64 // of pixels that wait to be written; 0 = 256 MiB
}

const defaultQueueBytes = 256 << 20

// Store is an open folder of frames. It is safe for concurrent use within one program;
// two programs must not share a folder.
type Store struct {
	dir      string
	settings Settings
	queue    *queue

	mu    sync.Mutex // guards index and stats
	index index
	stats Stats

	writing sync.Mutex // one frame is written at a time
}

// Stats says what the store has done since it was opened, and how full it is.
type Stats struct {
	Kept, Dropped, Failed, Deleted int64 // frames: written, no room in the queue, not written for an error, deleted for the quota
	StoredBytes                    int64
	LastError                      string // of the newest failure
}

// Open opens the folder, makes it if there is none, and clears away what a crash left
// half-written.
func Open(dir string, s Settings) (*Store, error) {
	switch s.Policy {
	case KeepNone, KeepRejectsAndHolds, KeepAll:
	default:
		return nil, pipeline.Invalid("images: policy: got %q, want %s, %s or %s", s.Policy, KeepNone, KeepRejectsAndHolds, KeepAll)
	}
	if s.QuotaBytes < 0 || s.QueueBytes < 0 {
		return nil, pipeline.Invalid("images: quota and queue: got %d and %d bytes, want 0 or more", s.QuotaBytes, s.QueueBytes)
	}
	if s.QueueBytes == 0 {
		s.QueueBytes = defaultQueueBytes
	}
	if err := errors.Join(os.MkdirAll(dir, 0o755), os.RemoveAll(filepath.Join(dir, incoming))); err != nil {
		return nil, pipeline.Fail(pipeline.Unready, "images: %w: check that the folder may be written by this user", err)
	}
	x, err := readIndex(dir)
	if err != nil {
		return nil, pipeline.Fail(pipeline.Unready, "images: %w", err)
	}
	st := &Store{dir: dir, settings: s, index: x}
	st.queue = newQueue(st, s.QueueBytes)
	return st, nil
}

// Close writes what waits in the queue and stops. Frames offered later are dropped.
func (s *Store) Close() error {
	s.queue.close()
	return nil
}

// Stats returns the counters.
func (s *Store) Stats() Stats {
	s.mu.Lock()
	defer s.mu.Unlock()
	out := s.stats
	out.StoredBytes = s.index.bytes
	return out
}
