package spool

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func entry(unit string) Entry {
	return Entry{
		Header: pipeline.FrameHeader{
			Identity: pipeline.Identity{Part: "mirror-25", Unit: unit, Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production},
			Capture:  pipeline.Capture{Format: raster.Mono8, Width: 4, Height: 2}, View: "ring", Count: 1, Stride: 4,
			Captured: time.Date(2026, 3, 1, 8, 0, 0, 5, time.UTC),
		},
		Source: "U1_ring.pgm", Taken: time.Date(2026, 3, 1, 8, 0, 1, 0, time.UTC),
	}
}

func open(t *testing.T, dir string, most int64) *Spool {
	t.Helper()
	s, err := Open(dir, most)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func put(t *testing.T, s *Spool, unit string, pixels []byte) Number {
	t.Helper()
	n, err := s.Put(entry(unit), pixels)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func TestFramesComeBackInOrderAfterReopening(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "spool")
	s := open(t, dir, 1<<20)
	for _, u := range []string{"U1", "U2", "U3"} {
		put(t, s, u, []byte(u+"pixels"))
	}
	if err := s.Remove(2); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	s = open(t, dir, 1<<20)
	if got := s.Numbers(); !slices.Equal(got, []Number{1, 3}) {
		t.Fatalf("kept %v, want 1 and 3", got)
	}
	e, pixels, err := s.Get(3)
	if err != nil || !reflect.DeepEqual(e, entry("U3")) || string(pixels) != "U3pixels" {
		t.Errorf("got %+v %q %v", e, pixels, err)
	}
	if head, err := s.Head(1); err != nil || !reflect.DeepEqual(head, entry("U1")) {
		t.Errorf("head %+v %v", head, err)
	}
	if n := put(t, s, "U4", nil); n != 4 {
		t.Errorf("new frame got number %d, want 4, behind all others", n)
	}
}

func TestSpoolMakesAndRemovesItsFolderWhenNeeded(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "spool")
	s := open(t, dir, 1<<20)
	if _, err := os.Stat(dir); err == nil {
		t.Error("the folder is there although nothing was put")
	}
	if err := s.Remove(put(t, s, "U1", nil)); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(dir); err == nil {
		t.Error("the empty folder is still there")
	}
}

func TestFullSpoolRefuses(t *testing.T) {
	s := open(t, filepath.Join(t.TempDir(), "spool"), 2000)
	n := put(t, s, "U1", make([]byte, 1000))
	_, err := s.Put(entry("U2"), make([]byte, 1000))
	if pipeline.KindOf(err) != pipeline.Exhausted || !strings.Contains(err.Error(), "full") {
		t.Fatalf("got %v, want an Exhausted error that says full", err)
	}
	if err := s.Remove(n); err != nil || s.Bytes() != 0 {
		t.Fatalf("after removal: %v, %d bytes", err, s.Bytes())
	}
	put(t, s, "U2", make([]byte, 1000))
}

func TestSpoolBelongsToOne(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "spool")
	put(t, open(t, dir, 1<<20), "U1", nil)
	if _, err := Open(dir, 1<<20); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v, want a refusal", err)
	}
}

func TestUnfinishedFilesAreForgottenAndBrokenOnesKept(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "spool")
	s := open(t, dir, 1<<20)
	n := put(t, s, "U1", []byte("pixels"))
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(s.path(n))
	if err != nil {
		t.Fatal(err)
	}
	text[len(text)-8] ^= 1 // one bit of a pixel
	for name, content := range map[string][]byte{s.path(n): text, filepath.Join(dir, "00000000000000000009.tmp"): text[:20]} {
		if err := os.WriteFile(name, content, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	s = open(t, dir, 1<<20)
	if got := s.Numbers(); !slices.Equal(got, []Number{n}) {
		t.Errorf("kept %v, want only %d", got, n)
	}
	if _, _, err := s.Get(n); err == nil || !strings.Contains(err.Error(), "checksum") {
		t.Errorf("got %v, want a checksum error", err)
	}
	if s.Bytes() != 0 || len(s.Numbers()) != 0 {
		t.Error("the broken frame still counts")
	}
	if aside, _ := filepath.Glob(filepath.Join(dir, "*.bad")); len(aside) != 1 {
		t.Errorf("set aside: %v, want one file", aside)
	}
}

func TestEveryCutIsRefused(t *testing.T) {
	var whole bytes.Buffer
	if err := encode(&whole, entry("U1"), []byte("pixels")); err != nil {
		t.Fatal(err)
	}
	for i := range whole.Len() {
		if _, _, err := decode(whole.Bytes()[:i]); err == nil {
			t.Errorf("the first %d of %d bytes were taken as whole", i, whole.Len())
		}
	}
}

func FuzzDecode(f *testing.F) {
	var whole bytes.Buffer
	if err := encode(&whole, entry("U1"), []byte("pixels")); err != nil {
		f.Fatal(err)
	}
	f.Add(whole.Bytes()[:whole.Len()-trailer])
	f.Add([]byte(magic))
	f.Fuzz(func(t *testing.T, body []byte) {
		file := binary.LittleEndian.AppendUint32(body, crc32.Checksum(body, castagnoli()))
		e, pixels, err := decode(file)
		if err != nil || !e.Header.Format.Known() {
			return
		}
		var again bytes.Buffer
		if err := encode(&again, e, pixels); err != nil {
			t.Skip("no frame that a program would put: ", err) // a year beyond 9999
		}
		if _, back, err := decode(again.Bytes()); err != nil || !bytes.Equal(back, pixels) {
			t.Fatalf("second time: %v", err)
		}
	})
}
