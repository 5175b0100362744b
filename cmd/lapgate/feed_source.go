package main

import (
	"bufio"
	"context"
	"errors"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"

	"lapgate/pipeline"
)

// reading is a frame from a source, or why a file could not be taken.
type reading struct {
	taken
	err error
}

// source sends what it reads until it has no more or the context ends.
type source func(ctx context.Context, out chan<- reading) error

// picturesIn lists the pictures below a folder, by name.
func picturesIn(dir string) ([]string, error) {
	var out []string
	err := filepath.WalkDir(dir, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if !d.IsDir() && isWanted(d.Name()) {
			out = append(out, p)
		}
		return nil
	})
	return out, err
}

// isWanted reports whether a name is a finished picture's: hidden files and *.tmp are
// being written.
func isWanted(name string) bool { return isPicture(name) && !strings.HasPrefix(name, ".") }

// folderSource reads every picture below dir, all frames of one showing after one
// another so that a unit is complete as early as can be.
func folderSource(r frameReader, paths []string) source {
	groups, order := map[string][]string{}, []string{}
	perView := map[string]int{}
	for _, p := range paths {
		key, view := r.groupOf(p)
		if _, seen := groups[key]; !seen {
			order = append(order, key)
		}
		groups[key] = append(groups[key], p)
		perView[key+"\x00"+view]++
	}
	r.frames = func(p string) int {
		key, view := r.groupOf(p)
		return perView[key+"\x00"+view]
	}
	return func(ctx context.Context, out chan<- reading) error {
		for _, key := range order {
			for _, p := range groups[key] {
				if !r.send(ctx, out, p) {
					return ctx.Err()
				}
			}
		}
		return nil
	}
}

// groupOf returns the showing and the view that a file belongs to; a file that cannot
// be described is alone.
func (r frameReader) groupOf(p string) (showing, view string) {
	r.frames = nil
	h, _, err := r.describe(p)
	if err != nil {
		return p, ""
	}
	return showingKey(h), h.View
}

// send reads one file and sends it on; false when the context ended.
func (r frameReader) send(ctx context.Context, out chan<- reading, p string) bool {
	t, err := r.read(p)
	select {
	case out <- reading{t, err}:
		return true
	case <-ctx.Done():
		return false
	}
}

// listSource reads the pictures that are named on in, one a line, as they are named.
func listSource(r frameReader, in io.Reader) source {
	return func(ctx context.Context, out chan<- reading) error {
		lines := bufio.NewScanner(in)
		for lines.Scan() {
			p := strings.TrimSpace(lines.Text())
			if p != "" && !r.send(ctx, out, p) {
				return ctx.Err()
			}
		}
		return lines.Err()
	}
}

// paced lets at most perSecond readings through.
func paced(s source, perSecond float64) source {
	if perSecond <= 0 {
		return s
	}
	return func(ctx context.Context, out chan<- reading) error {
		in := make(chan reading)
		failed := make(chan error, 1)
		go func() {
			defer close(in)
			failed <- s(ctx, in)
		}()
		tick := time.NewTicker(time.Duration(float64(time.Second) / perSecond))
		defer tick.Stop()
		for r := range in {
			select {
			case <-tick.C:
			case <-ctx.Done():
			}
			select {
			case out <- r:
			case <-ctx.Done():
			}
		}
		return <-failed
	}
}

// picturesOf returns the pictures that the arguments name: files, and folders in full.
func picturesOf(args []string) ([]string, error) {
	var out []string
	for _, a := range args {
		info, err := os.Stat(a)
		if err != nil {
			return nil, err
		}
		if !info.IsDir() {
			out = append(out, a)
			continue
		}
		in, err := picturesIn(a)
		if err != nil {
			return nil, err
		}
		out = append(out, in...)
	}
	if len(out) == 0 {
		return nil, pipeline.Invalid("%s: no picture below it, want files ending in %s", strings.Join(args, " "), strings.Join(pictureExtensions(), " "))
	}
	return out, nil
}

// moveAside moves a file and the header beside it into dir, under a name that is not
// taken there.
func moveAside(file, dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	target := filepath.Join(dir, filepath.Base(file))
	for n := 2; exists(target); n++ {
		ext := path.Ext(file)
		target = filepath.Join(dir, strings.TrimSuffix(filepath.Base(file), ext)+"-"+strconv.Itoa(n)+ext)
	}
	companions := sidecarNames(file)
	if strings.EqualFold(filepath.Ext(file), ".raw") {
		companions = append(companions, strings.TrimSuffix(file, filepath.Ext(file))+".json")
	}
	err := os.Rename(file, target)
	for _, c := range slices.Compact(companions) {
		if exists(c) {
			suffix := strings.TrimPrefix(c, strings.TrimSuffix(file, filepath.Ext(file)))
			err = errors.Join(err, os.Rename(c, strings.TrimSuffix(target, filepath.Ext(target))+suffix))
		}
	}
	return err
}

func exists(p string) bool {
	_, err := os.Stat(p)
	return err == nil
}
