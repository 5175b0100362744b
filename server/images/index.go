package images

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"lapgate/pipeline"
)

// entry is a kept frame.
type entry struct {
	key   string
	bytes int64
	at    time.Time
}

// index lists the kept frames, the oldest first.
type index struct {
	entries []entry
	bytes   int64
}

func (x *index) add(e entry) {
	x.entries = append(x.entries, e)
	x.bytes += e.bytes
}

// readIndex finds the frames in a folder and deletes sidecars whose pixels a crash lost.
func readIndex(dir string) (index, error) {
	var x index
	var found []entry
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		e, err := entryAt(dir, path)
		if err == nil && e.key != "" {
			found = append(found, e)
		}
		return err
	})
	if err != nil {
		return x, err
	}
	slices.SortStableFunc(found, func(a, b entry) int { return a.at.Compare(b.at) })
	for _, e := range found {
		x.add(e)
	}
	return x, nil
}

// entryAt returns the frame whose pixels are at path, or an entry without key.
func entryAt(dir, path string) (entry, error) {
	if base, is := strings.CutSuffix(path, ".json"); is {
		if _, err := os.Stat(base + ".raw"); errors.Is(err, fs.ErrNotExist) {
			return entry{}, os.Remove(path)
		}
		return entry{}, nil
	}
	if ext := filepath.Ext(path); ext != ".pgm" && ext != ".raw" {
		return entry{}, nil
	}
	relative, err := filepath.Rel(dir, path)
	if err != nil {
		return entry{}, err
	}
	e := entry{key: filepath.ToSlash(relative)}
	for _, p := range filesOf(path) {
		info, err := os.Stat(p)
		if err != nil {
			return entry{}, err
		}
		e.bytes += info.Size()
		e.at = info.ModTime()
	}
	return e, nil
}

// makeRoom deletes the oldest frames until bytes more fit the quota.
func (s *Store) makeRoom(bytes int64) error {
	quota := s.settings.QuotaBytes
	if quota == 0 {
		return nil
	}
	if bytes > quota {
		return pipeline.Fail(pipeline.Exhausted, "images: a frame of %d bytes does not fit the quota of %d bytes: raise the quota", bytes, quota)
	}
	for {
		e, ok := s.oldest(quota - bytes)
		if !ok {
			return nil
		}
		if err := s.remove(e); err != nil {
			return pipeline.Fail(pipeline.Unready, "images: cannot delete for the quota: %w", err)
		}
	}
}

// oldest returns the oldest frame if all frames take more than most bytes.
func (s *Store) oldest(most int64) (entry, bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.index.bytes <= most || len(s.index.entries) == 0 {
		return entry{}, false
	}
	return s.index.entries[0], true
}

func (s *Store) remove(e entry) error {
	path := filepath.Join(s.dir, filepath.FromSlash(e.key))
	all := filesOf(path)
	slices.Reverse(all) // the pixels first: a sidecar alone is no frame
	for _, p := range all {
		if err := os.Remove(p); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	for dir, depth := filepath.Dir(path), 1; depth < keyParts; dir, depth = filepath.Dir(dir), depth+1 {
		if os.Remove(dir) != nil { // holds other frames
			break
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.index.entries = s.index.entries[1:]
	s.index.bytes -= e.bytes
	s.stats.Deleted++
	return nil
}
