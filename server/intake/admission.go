package intake

import (
	"sync"
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

// admission counts the bytes of frames in memory. It never blocks: when there is no
// room it says so before memory grows.
type admission struct {
	mu    sync.Mutex // guards held
	held  int64
	most  int64 // bytes of all frames in flight
	frame int64 // bytes of one frame
}

// take reserves n bytes.
func (a *admission) take(n int64) error {
	if n > a.frame {
		return pipeline.Invalid("frame size: got %d bytes, want at most %d (max_frame_bytes in the server's settings)", n, a.frame)
	}
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.held+n > a.most {
		return retryLater{pipeline.Fail(pipeline.Exhausted, "no room for a frame of %d bytes: %d of %d bytes are in flight; try again in %v", n, a.held, a.most, RetryDelay), RetryDelay}
	}
	a.held += n
	return nil
}

// give returns n bytes.
func (a *admission) give(n int64) {
	a.mu.Lock()
	defer a.mu.Unlock()
	a.held -= n
}

func (a *admission) inFlight() int64 {
	a.mu.Lock()
	defer a.mu.Unlock()
	return a.held
}
