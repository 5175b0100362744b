package configs

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"
)

// note is the small file that these tests save. A and B are always equal: a half state
// would show.
type note struct{ A, B int }

// journal is what a watcher told.
type journal struct {
	mu      sync.Mutex // guards the lists
	changes []string
	errors  []string
}

func (j *journal) changed(_ string, n note) {
	j.mu.Lock()
	defer j.mu.Unlock()
	j.changes = append(j.changes, fmt.Sprint(n.A))
	if n.A != n.B {
		j.errors = append(j.errors, fmt.Sprintf("half state %+v", n))
	}
}

func (j *journal) failed(_ string, err error) {
	j.mu.Lock()
	defer j.mu.Unlock()
	j.errors = append(j.errors, err.Error())
}

func (j *journal) read() (changes string, errors []string) {
	j.mu.Lock()
	defer j.mu.Unlock()
	return strings.Join(j.changes, " "), append([]string(nil), j.errors...)
}

// expect waits until the journal says so, and a little longer that it says no more.
func (j *journal) expect(t *testing.T, changes string, errors int) {
	t.Helper()
	var gotChanges string
	var gotErrors []string
	for end := time.Now().Add(5 * time.Second); time.Now().Before(end); time.Sleep(10 * time.Millisecond) {
		if gotChanges, gotErrors = j.read(); gotChanges == changes && len(gotErrors) == errors {
			break
		}
	}
	time.Sleep(150 * time.Millisecond)
	if gotChanges, gotErrors = j.read(); gotChanges != changes || len(gotErrors) != errors {
		t.Errorf("got changes %q and errors %q, want changes %q and %d errors", gotChanges, gotErrors, changes, errors)
	}
}

func text(n int) []byte { return fmt.Appendf(nil, "format: 1\na: %d\nb: %d\n", n, n) }

func watch(t *testing.T, dir string, poll time.Duration) (*Watcher[note], *journal) {
	t.Helper()
	j := &journal{}
	ctx, cancel := context.WithCancel(context.Background())
	w, err := Watch(ctx, WatchOptions[note]{Folder: dir, Poll: poll, Changed: j.changed, Failed: j.failed,
		Parse: func(path string, text []byte) (note, error) {
			n, _, err := Decode(filepath.Base(path), text, note{})
			return n, err
		}})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { cancel(); w.Wait() })
	return w, j
}

func save(t *testing.T, path string, text []byte) {
	t.Helper()
	must(t, os.WriteFile(path, text, 0o600))
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

// Every kind of save gives one change or one error, never a half state.
func TestKindsOfSave(t *testing.T) {
	for name, c := range map[string]struct {
		act     func(t *testing.T, path string)
		changes string // "1" is the first reading
		errors  int
		now     int // value in force at the end
	}{
		"in place":     {func(t *testing.T, p string) { save(t, p, text(2)) }, "1 2", 0, 2},
		"same content": {func(t *testing.T, p string) { save(t, p, text(1)) }, "1", 0, 1},
		"rename over": {func(t *testing.T, p string) {
			save(t, p+".tmp", text(2))
			must(t, os.Rename(p+".tmp", p))
		}, "1 2", 0, 2},
		"backup, then create": {func(t *testing.T, p string) { // as vim does
			must(t, os.Rename(p, p+"~"))
			save(t, p, text(2))
			must(t, os.Remove(p+"~"))
		}, "1 2", 0, 2},
		"broken": {func(t *testing.T, p string) { save(t, p, []byte("format: 1\na: [\n")) }, "1", 1, 1},
		"remove, then create": {func(t *testing.T, p string) {
			must(t, os.Remove(p))
			time.Sleep(200 * time.Millisecond)
			save(t, p, text(2))
		}, "1 2", 0, 2},
		"emptied, written later": {func(t *testing.T, p string) {
			must(t, os.Truncate(p, 0))
			time.Sleep(200 * time.Millisecond)
			save(t, p, text(2))
		}, "1 2", 0, 2},
		"half first, whole later": {func(t *testing.T, p string) {
			f, err := os.Create(p)
			must(t, err)
			_, err = f.Write(text(2)[:14])
			must(t, err)
			time.Sleep(40 * time.Millisecond)
			_, err = f.Write(text(2)[14:])
			must(t, err)
			must(t, f.Close())
		}, "1 2", 0, 2},
		"gone":  {func(t *testing.T, p string) { must(t, os.Remove(p)) }, "1", 1, 1},
		"empty": {func(t *testing.T, p string) { must(t, os.Truncate(p, 0)) }, "1", 1, 1},
		"broken, then as before": {func(t *testing.T, p string) {
			save(t, p, []byte("format: 1\na: x\n"))
			time.Sleep(400 * time.Millisecond)
			save(t, p, text(1))
		}, "1 1", 1, 1},
		"too large": {func(t *testing.T, p string) { save(t, p, make([]byte, MaxFileBytes+1)) }, "1", 1, 1},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := t.TempDir()
			path := filepath.Join(dir, "n.yaml")
			save(t, path, text(1))
			w, j := watch(t, dir, time.Minute)
			c.act(t, path)
			j.expect(t, c.changes, c.errors)
			if n, ok := w.Get(path); !ok || n.A != c.now {
				t.Errorf("in force: got %+v, want %d", n, c.now)
			}
		})
	}
}

// A folder of links into a folder that is swapped as one, as container platforms mount
// configurations.
func TestSymlinkSwap(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	for i, name := range []string{"v1", "v2"} {
		must(t, os.Mkdir(filepath.Join(dir, name), 0o700))
		save(t, filepath.Join(dir, name, "n.yaml"), text(i+1))
	}
	must(t, os.Symlink("v1", filepath.Join(dir, "data")))
	must(t, os.Symlink(filepath.Join("data", "n.yaml"), filepath.Join(dir, "n.yaml")))
	w, j := watch(t, dir, time.Minute)
	must(t, os.Symlink("v2", filepath.Join(dir, "data.tmp")))
	must(t, os.Rename(filepath.Join(dir, "data.tmp"), filepath.Join(dir, "data")))
	j.expect(t, "1 2", 0)
	if n, _ := w.Get(filepath.Join(dir, "n.yaml")); n.A != 2 {
		t.Errorf("in force: %+v, want 2", n)
	}
}

func TestNewFileAndOtherFiles(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	w, j := watch(t, dir, time.Minute)
	save(t, filepath.Join(dir, "readme.txt"), []byte("x"))
	save(t, filepath.Join(dir, "new.yaml"), text(3))
	j.expect(t, "3", 0)
	if all := w.All(); len(all) != 1 {
		t.Errorf("got %v, want the new file alone", all)
	}
}

func TestBrokenAtTheStartIsTakenOnceMended(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	path := filepath.Join(dir, "n.yaml")
	save(t, path, []byte("format: 9\n"))
	w, j := watch(t, dir, time.Minute)
	if _, ok := w.Get(path); ok {
		t.Error("a broken file has a value")
	}
	save(t, path, text(4))
	j.expect(t, "4", 1)
}

// The folder is taken away and put back, as a network share can be: no event comes from
// the new one, and the poll finds it.
func TestPoll(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(t.TempDir(), "r")
	must(t, os.Mkdir(dir, 0o700))
	path := filepath.Join(dir, "n.yaml")
	save(t, path, text(1))
	_, j := watch(t, dir, 100*time.Millisecond)
	must(t, os.Rename(dir, dir+"2"))
	must(t, os.Mkdir(dir, 0o700))
	save(t, path, text(2))
	j.expect(t, "1 2", 0)
	save(t, path, text(3))
	j.expect(t, "1 2 3", 0)
}

func TestReadersNeverSeeAHalfState(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	path := filepath.Join(dir, "n.yaml")
	save(t, path, text(1))
	w, j := watch(t, dir, 20*time.Millisecond)
	stop := make(chan struct{})
	var readers sync.WaitGroup
	for range 2 {
		readers.Go(func() {
			for {
				select {
				case <-stop:
					return
				case <-time.After(time.Millisecond):
					if n, ok := w.Get(path); !ok || n.A != n.B {
						t.Errorf("got %+v, %v", n, ok)
					}
				}
			}
		})
	}
	for i := range 40 {
		save(t, path, text(i))
		time.Sleep(7 * time.Millisecond)
	}
	save(t, path, text(99))
	for end := time.Now().Add(5 * time.Second); time.Now().Before(end); time.Sleep(10 * time.Millisecond) {
		if n, _ := w.Get(path); n.A == 99 {
			break
		}
	}
	close(stop)
	readers.Wait()
	changes, errors := j.read()
	if !strings.HasSuffix(changes, "99") || len(errors) != 0 {
		t.Errorf("got changes %s, errors %q; want 99 last and no error", changes, errors)
	}
}

func TestMissingFolder(t *testing.T) {
	if _, err := Watch(context.Background(), WatchOptions[note]{Folder: filepath.Join(t.TempDir(), "none")}); err == nil {
		t.Error("a folder that is not there was accepted")
	}
}
