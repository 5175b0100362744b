package spool

import (
	"bufio"
	"errors"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"lapgate/pipeline"
)

// Put keeps a frame behind all others. When it returns without an error the frame
// survives a power cut. A full spool is an error of kind Exhausted.
func (s *Spool) Put(e Entry, pixels []byte) (Number, error) {
	if need := sizeOf(len(pixels)); s.bytes+need > s.MaxBytes {
		return 0, pipeline.Fail(pipeline.Exhausted, "spool %s: full: holds %d bytes in %d frames, the next needs %d, want at most %d in all; bring the server back or allow more",
			s.Dir, s.bytes, len(s.size), need, s.MaxBytes)
	}
	if err := s.own(); err != nil {
		return 0, err
	}
	n := s.next
	path := s.path(n)
	size, err := writeWhole(path, e, pixels)
	if err != nil {
		return 0, err
	}
	s.count(n, size)
	return n, nil
}

// writeWhole writes to another name, waits for the disk, renames and waits again, so
// that under path stands a whole file or none.
func writeWhole(path string, e Entry, pixels []byte) (size int64, err error) {
	tmp := strings.TrimSuffix(path, suffix) + unfinished
	f, err := os.Create(tmp)
	if err != nil {
		return 0, err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(tmp))
		}
	}()
	if size, err = writeAndSync(f, e, pixels); err != nil {
		return 0, errors.Join(err, f.Close())
	}
	if err = f.Close(); err != nil {
		return 0, err
	}
	if err = os.Rename(tmp, path); err != nil {
		return 0, err
	}
	return size, syncDir(filepath.Dir(path))
}

func writeAndSync(f *os.File, e Entry, pixels []byte) (int64, error) {
	w := bufio.NewWriterSize(f, 1<<20)
	if err := encode(w, e, pixels); err != nil {
		return 0, err
	}
	if err := w.Flush(); err != nil {
		return 0, err
	}
	if err := f.Sync(); err != nil {
		return 0, err
	}
	info, err := f.Stat()
	if err != nil {
		return 0, err
	}
	return info.Size(), nil
}

// syncDir makes the names in a folder durable. Windows has no such call: there the
// file system's own journal has to do.
func syncDir(dir string) error {
	if runtime.GOOS == "windows" {
		return nil
	}
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}
