package server

import (
	"sync"

	"lapgate/server/intake"
)

// watchBuffer is how many inspections a slow watcher may lag behind before it misses
// some.
const watchBuffer = 256

// Feed sends every recorded inspection to the watchers. It never blocks its sender: a
// watcher that reads too slowly misses inspections and is told how many.
type Feed struct {
	mu       sync.Mutex // guards watchers
	watchers map[*watcher]bool
}

type watcher struct {
	c      chan intake.Verdict
	missed int // guarded by Feed.mu
}

// NewFeed returns a Feed without watchers.
func NewFeed() *Feed { return &Feed{watchers: map[*watcher]bool{}} }

// Send gives v to every watcher that has room.
func (f *Feed) Send(v intake.Verdict) {
	f.mu.Lock()
	defer f.mu.Unlock()
	for w := range f.watchers {
		select {
		case w.c <- v:
		default:
			w.missed++
		}
	}
}

// watch adds a watcher; stop takes it off.
func (f *Feed) watch() (w *watcher, stop func()) {
	w = &watcher{c: make(chan intake.Verdict, watchBuffer)}
	f.mu.Lock()
	defer f.mu.Unlock()
	f.watchers[w] = true
	return w, func() {
		f.mu.Lock()
		defer f.mu.Unlock()
		delete(f.watchers, w)
	}
}

// takeMissed returns how many inspections the watcher missed since the last call.
func (f *Feed) takeMissed(w *watcher) int {
	f.mu.Lock()
	defer f.mu.Unlock()
	n := w.missed
	w.missed = 0
	return n
}
