package spool

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"lapgate/pipeline"
)

// Number is a frame's place in the order of the spool.
type Number uint64

// Spool is a folder with one file per frame. It belongs to one process at a time and
// is not safe for concurrent use.
type Spool struct {
	Dir      string
	MaxBytes int64 // Put refuses what would go beyond it
	lock     *os.File
	next     Number
	size     map[Number]int64
	bytes    int64
}

const (
	suffix       = ".frame"
	unfinished   = ".tmp"
	setAside     = ".bad"
	lockName     = "lock"
	numberDigits = 20 // of the largest Number
)

// Open opens the folder, which it makes at the first Put if it is not there. Files
// that were being written when the power went are removed: their frames were never
// counted as kept.
func Open(dir string, maxBytes int64) (*Spool, error) {
	s := &Spool{Dir: dir, MaxBytes: maxBytes, next: 1, size: map[Number]int64{}}
	if _, err := os.Stat(dir); errors.Is(err, fs.ErrNotExist) {
		return s, nil
	}
	if err := s.own(); err != nil {
		return nil, err
	}
	return s, s.scan()
}

// own makes the folder and takes its lock.
func (s *Spool) own() error {
	if s.lock != nil {
		return nil
	}
	if err := os.MkdirAll(s.Dir, 0o700); err != nil {
		return err
	}
	f, err := os.OpenFile(filepath.Join(s.Dir, lockName), os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return err
	}
	if err := lockFile(f); err != nil {
		f.Close()
		return pipeline.Invalid("spool %s: in use by another program (%v); give this one a folder of its own", s.Dir, err)
	}
	s.lock = f
	return syncDir(filepath.Dir(s.Dir))
}

func (s *Spool) scan() error {
	files, err := os.ReadDir(s.Dir)
	if err != nil {
		return err
	}
	for _, f := range files {
		name := f.Name()
		if strings.HasSuffix(name, unfinished) {
			if err := os.Remove(filepath.Join(s.Dir, name)); err != nil {
				return err
			}
		}
		n, ok := numberOf(name)
		if !ok {
			continue
		}
		info, err := f.Info()
		if err != nil {
			return err
		}
		s.count(n, info.Size())
	}
	return nil
}

func (s *Spool) count(n Number, size int64) {
	s.size[n] = size
	s.bytes += size
	s.next = max(s.next, n+1)
}

func numberOf(name string) (Number, bool) {
	digits, ok := strings.CutSuffix(name, suffix)
	if !ok || len(digits) != numberDigits {
		return 0, false
	}
	n, err := strconv.ParseUint(digits, 10, 63)
	return Number(n), err == nil
}

func (s *Spool) path(n Number) string {
	return filepath.Join(s.Dir, fmt.Sprintf("%0*d%s", numberDigits, n, suffix))
}

// Numbers lists the frames kept, in the order they were put.
func (s *Spool) Numbers() []Number {
	out := make([]Number, 0, len(s.size))
	for n := range s.size {
		out = append(out, n)
	}
	slices.Sort(out)
	return out
}

// Bytes returns the size of the frames kept.
func (s *Spool) Bytes() int64 { return s.bytes }

// Get reads a frame. A file that does not hold what was put is set aside under another
// name, never deleted, and is an error.
func (s *Spool) Get(n Number) (Entry, []byte, error) {
	text, err := os.ReadFile(s.path(n))
	if err != nil {
		return Entry{}, nil, err
	}
	e, pixels, err := decode(text)
	if err != nil {
		aside := strings.TrimSuffix(s.path(n), suffix) + setAside
		s.forget(n)
		return Entry{}, nil, errors.Join(fmt.Errorf("%s: %w; set aside as %s", s.path(n), err, aside), os.Rename(s.path(n), aside))
	}
	return e, pixels, nil
}

// Head reads a frame's entry and leaves its pixels unread and unchecked.
func (s *Spool) Head(n Number) (Entry, error) {
	f, err := os.Open(s.path(n))
	if err != nil {
		return Entry{}, err
	}
	defer f.Close()
	e, err := decodeHead(f)
	if err != nil {
		return Entry{}, fmt.Errorf("%s: %w", s.path(n), err)
	}
	return e, nil
}

func (s *Spool) forget(n Number) {
	s.bytes -= s.size[n]
	delete(s.size, n)
}

// Remove deletes a frame whose verdict came. Should the power go before the disk
// knows, the frame is sent again and gets the stored verdict.
func (s *Spool) Remove(n Number) error {
	s.forget(n)
	return os.Remove(s.path(n))
}

// Close gives the folder free, and removes it when nothing is left in it.
func (s *Spool) Close() error {
	if s.lock == nil {
		return nil
	}
	err := s.lock.Close()
	s.lock = nil
	if files, readErr := os.ReadDir(s.Dir); readErr == nil && len(files) == 1 && files[0].Name() == lockName {
		err = errors.Join(err, os.Remove(filepath.Join(s.Dir, lockName)), os.Remove(s.Dir))
	}
	return err
}
