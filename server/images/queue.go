package images

import (
	"context"
	"sync"

	"lapgate/pipeline"
)

// queue holds showings whose frames wait to be written, bounded by their pixels.
type queue struct {
	store *Store
	most  int64
	wake  chan struct{}
	done  chan struct{}

	mu     sync.Mutex // guards the following
	jobs   []job
	bytes  int64
	closed bool
}

type job struct {
	frames  []pipeline.Frame
	bytes   int64
	release func()
}

func newQueue(s *Store, most int64) *queue {
	q := &queue{store: s, most: most, wake: make(chan struct{}, 1), done: make(chan struct{})}
	go q.run()
	return q
}

// Offer hands over the frames of a showing to be written behind the caller's back and
// returns their keys at once, to be recorded with the inspection. It returns nil where the
// policy does not want them or the queue has no room; the latter is counted. It never
// waits. release, if not nil, is called exactly once when the pixels are no longer needed.
func (s *Store) Offer(v pipeline.Verdict, frames []pipeline.Frame, release func()) []string {
	if release == nil {
		release = func() {}
	}
	if len(frames) == 0 || !s.settings.Policy.Wants(v) {
		release()
		return nil
	}
	j := job{frames: frames, release: release}
	var keys []string
	for _, f := range frames {
		key, err := Key(f.Header)
		if err != nil {
			s.note(err)
			release()
			return nil
		}
		keys = append(keys, key)
		j.bytes += int64(f.Raw.Size())
	}
	if !s.queue.put(j) {
		s.mu.Lock()
		s.stats.Dropped += int64(len(frames))
		s.mu.Unlock()
		release()
		return nil
	}
	return keys
}

func (q *queue) put(j job) bool {
	q.mu.Lock()
	defer q.mu.Unlock()
	if q.closed || q.bytes+j.bytes > q.most {
		return false
	}
	q.jobs = append(q.jobs, j)
	q.bytes += j.bytes
	q.signal()
	return true
}

func (q *queue) signal() {
	select {
	case q.wake <- struct{}{}:
	default:
	}
}

func (q *queue) run() {
	defer close(q.done)
	for range q.wake {
		for j, ok := q.take(); ok; j, ok = q.take() {
			for _, f := range j.frames {
				_, _ = q.store.Keep(context.Background(), f) // a failure is counted and kept as LastError
			}
			j.release()
			q.mu.Lock()
			q.bytes -= j.bytes
			q.mu.Unlock()
		}
		if q.finished() {
			return
		}
	}
}

func (q *queue) take() (job, bool) {
	q.mu.Lock()
	defer q.mu.Unlock()
	if len(q.jobs) == 0 {
		return job{}, false
	}
	j := q.jobs[0]
	q.jobs = q.jobs[1:]
	return j, true
}

func (q *queue) finished() bool {
	q.mu.Lock()
	defer q.mu.Unlock()
	return q.closed && len(q.jobs) == 0
}

func (q *queue) close() {
	q.mu.Lock()
	q.closed = true
	q.signal()
	q.mu.Unlock()
	<-q.done
}
