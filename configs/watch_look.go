package configs

import (
	"bytes"
	"errors"
	"io/fs"
	"maps"
	"time"
)

// reading is one look at a file.
type reading struct {
	text []byte
	err  error
	hash string // of the text, or of what kept it from being read
}

func read(path string) reading {
	text, err := readFile(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return reading{err: errors.New(path + ": the file is gone; put it back, or restart without it"), hash: "gone"}
	case err != nil:
		return reading{err: err, hash: "unreadable: " + err.Error()}
	case len(bytes.TrimSpace(text)) == 0:
		return reading{err: Problems{{File: path, Found: "the file is empty", Want: "its content; perhaps it was saved only half"}}, hash: "empty"}
	}
	return reading{text: text, hash: HashOf(text)}
}

// look reads every file and deals with those that have settled; again says that some
// have not.
func (w *Watcher[T]) look() (again bool) {
	for _, path := range w.paths() {
		f, r := w.file(path), read(path)
		switch {
		case r.hash == f.settled:
			f.latest = r.hash
		case r.hash != f.latest:
			f.latest, f.since = r.hash, time.Now()
			again = true
		case r.err != nil && time.Since(f.since) < Patience:
			again = true
		default:
			w.deal(path, f, r)
		}
	}
	return again
}

// deal takes a settled reading into force, or says why it cannot be.
func (w *Watcher[T]) deal(path string, f *watched, r reading) {
	f.settled, f.latest = r.hash, r.hash
	if r.err != nil {
		w.opt.Failed(path, r.err)
		return
	}
	value, err := w.opt.Parse(path, r.text)
	if err != nil {
		w.opt.Failed(path, err)
		return
	}
	next := maps.Clone(*w.values.Load())
	next[path] = value
	w.values.Store(&next)
	f.good = r.hash
	w.opt.Changed(path, value)
}
