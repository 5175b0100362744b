package images

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func open(t *testing.T, dir string, s Settings) *Store {
	t.Helper()
	if s.Policy == "" {
		s.Policy = KeepAll
	}
	st, err := Open(dir, s)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { st.Close() })
	return st
}

// frame is a picture of 40 × 30 pixels in which every count differs from its neighbours.
func frame(t *testing.T, unit string, f raster.PixelFormat) pipeline.Frame {
	t.Helper()
	raw := raster.Pack(f, ramp(f, 40*30), 40, 30)
	h := pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "disc-25", Unit: unit, Line: "A", Station: "final", Attempt: 1, Purpose: pipeline.Production},
		Capture:  pipeline.Capture{Format: f, Width: 40, Height: 30}, View: "ring", Count: 1, Stride: raw.Stride,
		Captured: time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC), CRC32C: pipeline.Checksum(raw.Data)}
	out, err := pipeline.NewFrame(h, raw.Data)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func ramp(f raster.PixelFormat, n int) []uint16 {
	counts := make([]uint16, n)
	for i := range counts {
		counts[i] = uint16(i * 7919 % (f.MaxCount() + 1))
	}
	return counts
}

func mustKeep(t *testing.T, s *Store, f pipeline.Frame) string {
	t.Helper()
	key, err := s.Keep(context.Background(), f)
	if err != nil {
		t.Fatal(err)
	}
	return key
}

func wantKind(t *testing.T, err error, k pipeline.ErrorKind) {
	t.Helper()
	if err == nil || pipeline.KindOf(err) != k {
		t.Fatalf("got error %v of kind %d, want kind %d", err, pipeline.KindOf(err), k)
	}
}

func TestEveryFormatComesBackBitByBit(t *testing.T) {
	dir := t.TempDir()
	s := open(t, dir, Settings{})
	for _, f := range raster.PixelFormats() {
		want := frame(t, f.String(), f)
		key := mustKeep(t, s, want)
		got, err := s.Find(key)
		if err != nil || !reflect.DeepEqual(got, want.Raw) {
			t.Errorf("%s: %v, %s of %d bytes", f, err, got.Format, len(got.Data))
		}
	}
	if left, _ := os.ReadDir(filepath.Join(dir, incoming)); len(left) != 0 {
		t.Errorf("left in %s: %v", incoming, left)
	}
	before := s.Stats()
	mustKeep(t, s, frame(t, "Mono8", raster.Mono8)) // a resend
	again := open(t, dir, Settings{})
	if after := again.Stats(); s.Stats() != before || after.StoredBytes != before.StoredBytes || before.Kept != 7 {
		t.Errorf("before %+v, reopened %+v", before, after)
	}
}

func TestFramesUnderOneIdentityNeverMeet(t *testing.T) {
	s := open(t, t.TempDir(), Settings{})
	a, b := frame(t, "0001", raster.Mono8), frame(t, "0001", raster.Mono8)
	b.Raw.Data = append([]byte{200}, b.Raw.Data[1:]...)
	b.Header.CRC32C = pipeline.Checksum(b.Raw.Data)
	ka, kb := mustKeep(t, s, a), mustKeep(t, s, b)
	got, err := s.Find(ka)
	if err != nil || ka == kb || got.Data[0] != a.Raw.Data[0] {
		t.Errorf("%s, %s: %v", ka, kb, err)
	}
}

func TestKeysCannotLeaveTheFolder(t *testing.T) {
	s := open(t, t.TempDir(), Settings{})
	for _, key := range []string{"", "x", "../../../../../../../etc/passwd", "a/b/c/d/e/f/g/../h", "a/b/c/d/e/f/../x.pgm",
		"a/b/c/d/e/f//x.pgm", "/a/b/c/d/e/f/x.pgm", `a/b/c/d/e/f/g/..\x.pgm`, "a/b/c/d/e/f/~../x.pgm"} {
		_, err := s.Find(key)
		wantKind(t, err, pipeline.InvalidKind)
	}
	f := frame(t, "0001", raster.Mono8)
	f.Header.Unit = "../0001"
	_, err := s.Keep(context.Background(), f)
	wantKind(t, err, pipeline.InvalidKind)
	key, _ := Key(frame(t, "0002", raster.Mono8).Header)
	_, err = s.Find(key)
	wantKind(t, err, pipeline.NotFoundKind)
}

func TestQuotaDeletesTheOldestFirst(t *testing.T) {
	dir := t.TempDir()
	s := open(t, dir, Settings{QuotaBytes: 6000}) // a frame of 40 × 30 bytes and its header: four fit
	var keys []string
	for i := range 6 {
		keys = append(keys, mustKeep(t, s, frame(t, fmt.Sprint(i), raster.Mono8)))
		when := time.Unix(int64(1000-i), 0) // the folder's times disagree: the order of keeping counts
		if err := os.Chtimes(filepath.Join(dir, filepath.FromSlash(keys[i])), when, when); err != nil {
			t.Fatal(err)
		}
	}
	kept := ""
	for i, k := range keys {
		if _, err := s.Find(k); err == nil {
			kept += fmt.Sprint(i)
		}
	}
	if st := s.Stats(); kept != "2345" || st.Deleted != 2 || st.StoredBytes > 6000 {
		t.Errorf("kept %s, %+v", kept, st)
	}
	if _, err := os.Stat(filepath.Join(dir, "disc-25", "~", "0")); !os.IsNotExist(err) {
		t.Error("the empty folders of unit 0 are still there")
	}
	// Reopened, the times of the files are all there is to go by: 5 is the oldest now.
	again := open(t, dir, Settings{QuotaBytes: 6000})
	mustKeep(t, again, frame(t, "6", raster.Mono8))
	_, err := again.Find(keys[5])
	wantKind(t, err, pipeline.NotFoundKind)
	small := open(t, t.TempDir(), Settings{QuotaBytes: 1000})
	_, err = small.Keep(context.Background(), frame(t, "0", raster.Mono8))
	wantKind(t, err, pipeline.Exhausted)
}

func TestACrashLeavesNoHalfFrame(t *testing.T) {
	dir := t.TempDir()
	s := open(t, dir, Settings{})
	key := mustKeep(t, s, frame(t, "0001", raster.Mono12p))
	path := filepath.Join(dir, filepath.FromSlash(key))
	if err := os.Remove(path); err != nil { // as between the two renames
		t.Fatal(err)
	}
	half := filepath.Join(dir, incoming, "123")
	if err := os.MkdirAll(half, 0o755); err != nil {
		t.Fatal(err)
	}
	again := open(t, dir, Settings{})
	if again.Stats().StoredBytes != 0 {
		t.Error("half a frame is counted")
	}
	for _, gone := range []string{half, strings.TrimSuffix(path, ".raw") + ".json"} {
		if _, err := os.Stat(gone); !os.IsNotExist(err) {
			t.Errorf("%s is still there", gone)
		}
	}
	mustKeep(t, again, frame(t, "0001", raster.Mono12p))
	if _, err := again.Find(key); err != nil {
		t.Error(err)
	}
}

func TestOfferFollowsThePolicy(t *testing.T) {
	f := frame(t, "0001", raster.Mono8)
	for policy, want := range map[Policy]string{KeepNone: "", KeepRejectsAndHolds: "reject hold ", KeepAll: "accept reject hold "} {
		s := open(t, t.TempDir(), Settings{Policy: policy})
		got := ""
		for _, v := range []pipeline.Verdict{pipeline.Accept, pipeline.Reject, pipeline.Hold} {
			if s.Offer(v, []pipeline.Frame{f}, nil) != nil {
				got += string(v) + " "
			}
		}
		if got != want {
			t.Errorf("%s keeps %q, want %q", policy, got, want)
		}
	}
	_, err := Open(t.TempDir(), Settings{Policy: "some"})
	wantKind(t, err, pipeline.InvalidKind)
}

// The writer is held up; the queue takes two showings and drops the rest at once.
func TestOfferNeverWaits(t *testing.T) {
	s := open(t, t.TempDir(), Settings{QueueBytes: 2 * 1200})
	var mu sync.Mutex
	released := 0
	release := func() { mu.Lock(); released++; mu.Unlock() }
	s.writing.Lock()
	var keys []string
	for i := range 5 {
		keys = append(keys, s.Offer(pipeline.Reject, []pipeline.Frame{frame(t, fmt.Sprint(i), raster.Mono8)}, release)...)
	}
	s.writing.Unlock()
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if st := s.Stats(); len(keys) != 2 || st.Dropped != 3 || st.Kept != 2 || released != 5 {
		t.Errorf("keys %v, %+v, released %d", keys, st, released)
	}
	for _, k := range keys {
		if _, err := s.Find(k); err != nil {
			t.Error(err)
		}
	}
	if s.Offer(pipeline.Reject, []pipeline.Frame{frame(t, "9", raster.Mono8)}, release) != nil || released != 6 {
		t.Error("a closed store took a frame")
	}
}

func TestAFailureIsCountedAndTold(t *testing.T) {
	dir := t.TempDir()
	s := open(t, dir, Settings{})
	if err := os.WriteFile(filepath.Join(dir, "disc-25"), nil, 0o644); err != nil { // in the way
		t.Fatal(err)
	}
	s.Offer(pipeline.Hold, []pipeline.Frame{frame(t, "0", raster.Mono8)}, nil)
	s.Close()
	if st := s.Stats(); st.Failed != 1 || !strings.Contains(st.LastError, "disc-25") {
		t.Errorf("%+v", st)
	}
}
