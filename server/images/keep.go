package images

import (
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"syscall"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// Keep writes a frame, whatever the policy, and returns its key. When it returns without
// error the frame is on disk. A frame that is kept already is left as it is.
func (s *Store) Keep(ctx context.Context, f pipeline.Frame) (key string, err error) {
	if key, err = Key(f.Header); err != nil {
		return "", err
	}
	if err := ctx.Err(); err != nil {
		return "", err
	}
	s.writing.Lock()
	defer s.writing.Unlock()
	path, err := s.file(key)
	if err != nil {
		return "", err
	}
	if _, err := os.Stat(path); err == nil {
		return key, nil
	}
	if err = s.makeRoom(int64(f.Raw.Size())); err == nil {
		err = s.write(key, path, f.Raw)
	}
	s.note(err)
	if err != nil {
		return "", err
	}
	return key, nil
}

func (s *Store) note(err error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if err == nil {
		s.stats.Kept++
		return
	}
	s.stats.Failed++
	s.stats.LastError = err.Error()
}

func (s *Store) write(key, path string, r raster.Raw) error {
	bytes, err := s.place(path, r)
	switch {
	case errors.Is(err, syscall.ENOSPC) || errors.Is(err, syscall.EDQUOT):
		return pipeline.Fail(pipeline.Exhausted, "images: no room to write (%w): free disk space or lower the quota", err)
	case err != nil:
		return pipeline.Fail(pipeline.Unready, "images: %w", err)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.index.add(entry{key: key, bytes: bytes})
	return nil
}

// place writes the frame's files in a folder of their own, sees them onto the disk and
// moves them to their place, the pixels last: where they are, everything is. It returns
// the size of the files.
func (s *Store) place(path string, r raster.Raw) (int64, error) {
	if err := os.MkdirAll(filepath.Join(s.dir, incoming), 0o755); err != nil {
		return 0, err
	}
	dir, err := os.MkdirTemp(filepath.Join(s.dir, incoming), "")
	if err != nil {
		return 0, err
	}
	defer os.RemoveAll(dir)
	name := filepath.Base(path)
	if err := files.Write(filepath.Join(dir, name), r); err != nil {
		return 0, err
	}
	if err := s.makeFolder(filepath.Dir(path)); err != nil {
		return 0, err
	}
	var total int64
	for _, n := range filesOf(name) {
		bytes, err := syncFile(filepath.Join(dir, n))
		if err != nil {
			return 0, err
		}
		total += bytes
		if err := os.Rename(filepath.Join(dir, n), filepath.Join(filepath.Dir(path), n)); err != nil {
			return 0, err
		}
	}
	_, err = syncFile(filepath.Dir(path))
	return total, err
}

// makeFolder makes a folder with those above it and sees their names onto the disk.
func (s *Store) makeFolder(dir string) error {
	if _, err := os.Stat(dir); err == nil {
		return nil
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	for range keyParts - 1 {
		dir = filepath.Dir(dir)
		if _, err := syncFile(dir); err != nil {
			return err
		}
	}
	return nil
}

// filesOf returns the files that a frame consists of, the pixels last.
func filesOf(path string) []string {
	if base, packed := strings.CutSuffix(path, ".raw"); packed {
		return []string{base + ".json", path}
	}
	return []string{path}
}

func syncFile(path string) (bytes int64, err error) {
	f, err := os.Open(path)
	if err != nil {
		return 0, err
	}
	defer f.Close()
	if err := f.Sync(); err != nil {
		return 0, err
	}
	info, err := f.Stat()
	if err != nil {
		return 0, err
	}
	return info.Size(), nil
}

// Find reads a kept frame, every bit as it was taken; rows of formats that fill whole
// bytes come back without padding. One that is not kept, or no longer, is an error of
// kind NotFoundKind.
func (s *Store) Find(key string) (raster.Raw, error) {
	path, err := s.file(key)
	if err != nil {
		return raster.Raw{}, err
	}
	r, err := files.Read(path, files.Options{})
	if errors.Is(err, fs.ErrNotExist) {
		return r, pipeline.NotFound("image %s: not kept, or deleted since to keep the quota", key)
	}
	return r, err
}
