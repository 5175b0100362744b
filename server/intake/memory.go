package intake

import (
	"sync"
	"sync/atomic"
	"time"

	"lapgate/pipeline"
)

// RetryDelay is what a client that found no room is told to wait.
const RetryDelay = 250 * time.Millisecond

// retryLater is an error that says when to try again.
type retryLater struct {
	error
	after time.Duration
}

// Unwrap returns the error with its kind.
func (r retryLater) Unwrap() error { return r.error }

// RetryAfter says how long to wait.
func (r retryLater) RetryAfter() time.Duration { return r.after }

// memory lends buffers for the pixels of frames within a bound on their bytes, and keeps
// those that come back for later frames of the same size. It never blocks: when there is
// no room it says so before memory grows.
type memory struct {
	allocate func(n int) []byte
	frame    int64 // bytes of one frame, at most

	mu   sync.Mutex // guards everything below
	most int64      // bytes lent and kept together
	lent int64
	kept int64
	free map[int][][]byte // by size
}

// buffer is lent memory. What is in it may be pixels of an earlier frame: it must be
// filled before anybody reads it.
type buffer struct {
	bytes  []byte
	from   *memory
	isBack atomic.Bool
}

func newMemory(most, frame int64, allocate func(n int) []byte) *memory {
	if allocate == nil {
		allocate = func(n int) []byte { return make([]byte, n) }
	}
	return &memory{allocate: allocate, frame: frame, most: most, free: map[int][][]byte{}}
}

// lend reserves n bytes and returns them.
func (m *memory) lend(n int) (*buffer, error) {
	bytes, err := m.reserve(int64(n))
	if err != nil {
		return nil, err
	}
	if bytes == nil {
		bytes = m.allocate(n)
	}
	return &buffer{bytes: bytes, from: m}, nil
}

// reserve counts n bytes as lent and returns a kept buffer of that size, or nil where
// there is none.
func (m *memory) reserve(n int64) ([]byte, error) {
	if n > m.frame {
		return nil, pipeline.Invalid("frame size: got %d bytes, want at most %d (max_frame_bytes in the server's settings)", n, m.frame)
	}
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.lent+n > m.most {
		return nil, retryLater{pipeline.Fail(pipeline.Exhausted, "no room for a frame of %d bytes: %d of %d bytes are in flight; try again in %v", n, m.lent, m.most, RetryDelay), RetryDelay}
	}
	m.lent += n
	got := m.pop(int(n))
	for size := range m.free { // sizes that no camera sends any more make room
		for m.lent+m.kept > m.most && m.pop(size) != nil {
			continue
		}
	}
	return got, nil
}

// pop takes a kept buffer of n bytes, or nil. The caller holds m.mu.
func (m *memory) pop(n int) []byte {
	list := m.free[n]
	if len(list) == 0 {
		return nil
	}
	got := list[len(list)-1]
	list[len(list)-1] = nil
	if m.free[n] = list[:len(list)-1]; len(list) == 1 {
		delete(m.free, n)
	}
	m.kept -= int64(n)
	return got
}

// giveBack ends the loan; only the first call counts. Nobody may read the bytes after it.
func (b *buffer) giveBack() {
	if b.isBack.Swap(true) {
		return
	}
	m, n := b.from, len(b.bytes)
	m.mu.Lock()
	defer m.mu.Unlock()
	m.lent -= int64(n)
	if m.lent+m.kept+int64(n) <= m.most {
		m.free[n] = append(m.free[n], b.bytes)
		m.kept += int64(n)
	}
	b.bytes = nil
}

func giveBackAll(buffers []*buffer) {
	for _, b := range buffers {
		b.giveBack()
	}
}

// bound changes the bytes that may be lent.
func (m *memory) bound(most int64) {
	m.mu.Lock()
	defer m.mu.Unlock()
	m.most = most
}

func (m *memory) inFlight() int64 {
	m.mu.Lock()
	defer m.mu.Unlock()
	return m.lent
}
