package configs

import (
	"context"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
	"time"

	"github.com/fsnotify/fsnotify"
)

// WatchOptions say what to watch and whom to tell. The functions are called one at a
// time, from the goroutine that watches.
type WatchOptions[T any] struct {
	Folder string
	Match  func(name string) bool // which files of the folder; nil = *.yaml and *.yml
	// Parse turns the text of a file into a value; it must not keep state between calls.
	Parse func(path string, text []byte) (T, error)
	// Changed is told of a value that is in force from now on; nil = nobody.
	Changed func(path string, value T)
	// Failed is told why a save was not taken; the last good value stays in force. path
	// is the folder where the folder itself cannot be watched; nil = nobody.
	Failed func(path string, err error)
	Settle time.Duration // 0 = DefaultSettle
	Poll   time.Duration // 0 = DefaultPoll
}

// DefaultSettle is how long a file must stay the same before it is read for good;
// DefaultPoll is how often the folder is looked at without being told of a change, as on
// a network share; Patience is how long a file may be empty or gone before that counts
// as an error and not as a save under way.
const (
	DefaultSettle = 60 * time.Millisecond
	DefaultPoll   = 5 * time.Second
	Patience      = time.Second
)

// Watcher keeps the values of the files of one folder. It is safe for concurrent use.
type Watcher[T any] struct {
	opt    WatchOptions[T]
	values atomic.Pointer[map[string]T] // by path; the map is never changed, only replaced
	files  map[string]*watched          // only for the goroutine that watches
	done   chan struct{}
}

// watched is what is known of one file.
type watched struct {
	good    string    // hash of the text in force; empty = none
	settled string    // hash of the text that was dealt with last
	latest  string    // hash at the latest look
	since   time.Time // when latest was first seen
}

// Watch reads every file of the folder, then watches until ctx ends. Files that are
// broken at the start are told to Failed and taken once they are mended. A folder that
// cannot be read is an error.
func Watch[T any](ctx context.Context, opt WatchOptions[T]) (*Watcher[T], error) {
	opt = withDefaults(opt)
	if _, err := os.ReadDir(opt.Folder); err != nil {
		return nil, fmt.Errorf("cannot watch: %w", err)
	}
	w := &Watcher[T]{opt: opt, files: map[string]*watched{}, done: make(chan struct{})}
	w.values.Store(&map[string]T{})
	// The watch starts before the first look, so that no save falls between the two.
	events, err := fsnotify.NewWatcher()
	if err == nil {
		err = events.Add(opt.Folder)
	}
	if err != nil {
		opt.Failed(opt.Folder, fmt.Errorf("changes are seen every %v only: %w", opt.Poll, err))
	}
	for _, path := range w.paths() {
		w.deal(path, w.file(path), read(path))
	}
	go w.loop(ctx, events)
	return w, nil
}

func withDefaults[T any](opt WatchOptions[T]) WatchOptions[T] {
	if opt.Match == nil {
		opt.Match = func(name string) bool { return strings.HasSuffix(name, ".yaml") || strings.HasSuffix(name, ".yml") }
	}
	if opt.Changed == nil {
		opt.Changed = func(string, T) {}
	}
	if opt.Failed == nil {
		opt.Failed = func(string, error) {}
	}
	if opt.Settle == 0 {
		opt.Settle = DefaultSettle
	}
	if opt.Poll == 0 {
		opt.Poll = DefaultPoll
	}
	return opt
}

// Get returns the value in force of the file at path.
func (w *Watcher[T]) Get(path string) (T, bool) {
	v, ok := (*w.values.Load())[path]
	return v, ok
}

// All returns the values in force by path.
func (w *Watcher[T]) All() map[string]T { return maps.Clone(*w.values.Load()) }

// Wait returns once the watcher has stopped, after its context ended.
func (w *Watcher[T]) Wait() { <-w.done }

func (w *Watcher[T]) loop(ctx context.Context, events *fsnotify.Watcher) {
	defer close(w.done)
	var changed chan fsnotify.Event
	var failed chan error
	if events != nil {
		defer events.Close()
		changed, failed = events.Events, events.Errors
	}
	poll := time.NewTicker(w.opt.Poll)
	defer poll.Stop()
	var settle <-chan time.Time
	for {
		select {
		case <-ctx.Done():
			return
		case <-changed:
			if settle == nil {
				settle = time.After(w.opt.Settle)
			}
			continue
		case err := <-failed:
			w.opt.Failed(w.opt.Folder, fmt.Errorf("watching: %w", err))
		case <-settle:
			settle = nil
		case <-poll.C:
			if events != nil {
				_ = events.Add(w.opt.Folder) // again, in case the folder was replaced; the look below tells if it is gone
			}
		}
		if w.look() && settle == nil {
			settle = time.After(w.opt.Settle)
		}
	}
}

// paths lists the files to watch, those that have gone too.
func (w *Watcher[T]) paths() []string {
	entries, _ := os.ReadDir(w.opt.Folder)
	var out []string
	for _, e := range entries {
		if !e.IsDir() && w.opt.Match(e.Name()) {
			out = append(out, filepath.Join(w.opt.Folder, e.Name()))
		}
	}
	for path := range w.files {
		if !slices.Contains(out, path) {
			out = append(out, path)
		}
	}
	slices.Sort(out)
	return out
}

func (w *Watcher[T]) file(path string) *watched {
	if w.files[path] == nil {
		w.files[path] = &watched{}
	}
	return w.files[path]
}
