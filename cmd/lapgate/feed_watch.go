package main

import (
	"context"
	"io/fs"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/fsnotify/fsnotify"
)

// watcher takes pictures from a folder as they become complete. A picture is complete
// when it was renamed from its own name with .tmp behind it, or when size and time
// stayed the same for as long as settle. File events only make it look sooner: the
// poll finds everything.
type watcher struct {
	dir         string
	poll        time.Duration
	settle      time.Duration
	needsHeader bool // a picture counts only with the header beside it
	reader      frameReader
	log         *slog.Logger
	seen        map[string]sighting
	renamed     map[string]bool // complete since renamed
}

// sighting is what a file looked like, since when, and whether it was taken.
type sighting struct {
	size    int64
	changed time.Time
	since   time.Time
	taken   bool
}

func (w *watcher) source() source {
	w.seen, w.renamed = map[string]sighting{}, map[string]bool{}
	return func(ctx context.Context, out chan<- reading) error {
		events, errs, closeEvents := w.events()
		defer closeEvents()
		tick := time.NewTicker(w.poll)
		defer tick.Stop()
		for {
			again, err := w.scan(ctx, out)
			if err != nil {
				return err
			}
			soon := make(<-chan time.Time)
			if again {
				soon = time.After(w.settle)
			}
			select {
			case <-ctx.Done():
				return ctx.Err()
			case <-tick.C:
			case <-soon:
			case e := <-events:
				w.note(e)
			case err := <-errs:
				w.log.Warn("file events are incomplete; polling goes on", "error", err)
			}
		}
	}
}

// events returns the folder's file events; without them polling has to do.
func (w *watcher) events() (<-chan fsnotify.Event, <-chan error, func()) {
	n, err := fsnotify.NewWatcher()
	if err == nil {
		err = filepath.WalkDir(w.dir, func(p string, d fs.DirEntry, err error) error {
			if err == nil && d.IsDir() {
				return n.Add(p)
			}
			return err
		})
	}
	if err != nil {
		w.log.Warn("no file events; polling instead", "folder", w.dir, "every", w.poll, "error", err)
		return nil, nil, func() {}
	}
	return n.Events, n.Errors, func() { n.Close() }
}

// note remembers that NAME.tmp was given another name: NAME is then complete.
func (w *watcher) note(e fsnotify.Event) {
	if name, ok := strings.CutSuffix(e.Name, ".tmp"); ok && e.Has(fsnotify.Rename) && isWanted(filepath.Base(name)) {
		w.renamed[name] = true
	}
}

// scan takes every complete picture. again says that one may be complete soon.
func (w *watcher) scan(ctx context.Context, out chan<- reading) (again bool, err error) {
	pictures, err := picturesIn(w.dir)
	if err != nil && !os.IsNotExist(err) { // a file that went away while looking is no failure
		return false, err
	}
	there := make(map[string]bool, len(pictures))
	for _, p := range pictures {
		there[p] = true
		complete, pending := w.look(p)
		again = again || pending
		if complete && !w.reader.send(ctx, out, p) {
			return false, ctx.Err()
		}
	}
	for p := range w.seen {
		if !there[p] {
			delete(w.seen, p)
		}
	}
	return again, nil
}

// look compares a file with what it was; it is complete once, and once more each time
// it was written anew.
func (w *watcher) look(p string) (complete, pending bool) {
	info, err := os.Stat(p)
	if err != nil || (w.needsHeader && !hasHeader(p)) {
		return false, false
	}
	now := w.reader.now()
	was, known := w.seen[p]
	is := sighting{size: info.Size(), changed: info.ModTime(), since: now}
	if known && was.size == is.size && was.changed.Equal(is.changed) {
		is = was
	}
	if !is.taken && (w.renamed[p] || now.Sub(is.since) >= w.settle) {
		is.taken, complete = true, true
		delete(w.renamed, p)
	}
	w.seen[p] = is
	return complete, !is.taken
}

func hasHeader(p string) bool {
	for _, name := range sidecarNames(p) {
		if exists(name) {
			return true
		}
	}
	return false
}
