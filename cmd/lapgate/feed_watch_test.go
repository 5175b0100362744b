package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
)

func TestWatchTakesOnlyWholePictures(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	dir, done := t.TempDir(), filepath.Join(t.TempDir(), "done")
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	wait := inBackground(t, ctx, nil, feedArgs(t, p, "--watch", "--poll", "50ms", "--settle", "500ms", "--move-to", done, dir))
	writePGM(t, filepath.Join(dir, "sub", "U001_ring.pgm"), 8, 4, 1) // by renaming, in a folder made later
	slow, err := os.Create(filepath.Join(dir, "U001_bar.pgm"))
	if err != nil {
		t.Fatal(err)
	}
	text := append([]byte("P5\n8 4\n255\n"), bytes.Repeat([]byte{9}, 32)...)
	for i := range text { // a writer that takes its time, in steps shorter than settle
		if _, err := slow.Write(text[i : i+1]); err != nil {
			t.Fatal(err)
		}
		time.Sleep(5 * time.Millisecond)
	}
	slow.Close()
	eventually(t, "unit U001 is judged and its pictures are moved", func() bool {
		moved, _ := filepath.Glob(filepath.Join(done, "U001_*.pgm"))
		return len(p.recorded()) == 1 && len(moved) == 2
	})
	stop()
	if got := wait(); got.code != 0 || len(got.lines) != 1 || got.lines[0].Verdict != pipeline.Accept {
		t.Errorf("status %d, lines %+v\n%s", got.code, got.lines, got.stderr)
	}
}

func TestStoppedWatchKeepsWhatIsUnanswered(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	dir := t.TempDir()
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	args := feedArgs(t, p, "--watch", "--poll", "20ms", "--settle", "20ms", "--drain", "50ms", dir)
	wait := inBackground(t, ctx, nil, args)
	writePGM(t, filepath.Join(dir, "U001_ring.pgm"), 8, 4, 1)
	eventually(t, "the frame arrives", func() (is bool) { p.with(func() { is = len(p.headers) == 1 }); return is })
	stop()
	if got := wait(); got.code != exitFailure || !strings.Contains(got.stderr, "1 units have no verdict: 1 are kept") {
		t.Errorf("status %d\n%s", got.code, got.stderr)
	}
	kept, _ := filepath.Glob(filepath.Join(args[slices.Index(args, "--spool")+1], "*.frame"))
	if len(kept) != 1 {
		t.Errorf("kept %v, want the one frame", kept)
	}
}

func TestHeaderBesideThePicture(t *testing.T) {
	p := newPeer(t, "ring").start()
	dir := t.TempDir()
	path := filepath.Join(dir, "picture.pgm")
	writePGM(t, path, 8, 4, 1)
	temperature := 31.5
	h := pipeline.FrameHeader{Identity: pipeline.Identity{Part: "mirror-40", Unit: "S7", Line: "B", Station: "B2", Attempt: 2, Purpose: pipeline.Master},
		View: "ring", Count: 1, Tags: map[string]string{"tool": "7"}, SensorC: &temperature, Captured: time.Date(2026, 3, 1, 8, 0, 0, 0, time.UTC)}
	h.ExposureUS, h.Format = 1200, 0x01080001
	text, err := json.Marshal(h)
	if err != nil {
		t.Fatal(err)
	}
	side := filepath.Join(dir, "picture.json")
	if err := os.WriteFile(side, text, 0o600); err != nil {
		t.Fatal(err)
	}
	if got := runFeed(t, t.Context(), nil, feedArgs(t, p, "--tag", "shift=late,tool=3", dir)); got.code != 0 {
		t.Fatalf("status %d\n%s", got.code, got.stderr)
	}
	sent := p.headers[0]
	if sent.Unit != "S7" || sent.Part != "mirror-40" || sent.Purpose != pipeline.Master || sent.Lot != "L1" || sent.ExposureUS != 1200 ||
		sent.Tags["tool"] != "7" || sent.Tags["shift"] != "late" || *sent.SensorC != 31.5 || !sent.Captured.Equal(h.Captured) || sent.Width != 8 {
		t.Errorf("sent %+v", sent)
	}
	for wrong, want := range map[string]string{
		`{"unit":"S7","untit":"x"}`:                     "unknown field",
		`{"unit":"S8","view":"ring","width":9}`:         "size: picture has 8 × 4 px, its header says 9 × 0",
		`{"unit":"S8","view":"ring","crc32c":1}`:        "crc32c: picture has",
		`{"unit":"S/8","view":"ring"}`:                  "unit: got ",
		`{"unit":"S8","view":"ring","format":"Mono12"}`: "bits",
	} {
		if err := os.WriteFile(side, []byte(wrong), 0o600); err != nil {
			t.Fatal(err)
		}
		got := runFeed(t, t.Context(), nil, feedArgs(t, p, dir))
		if got.code != exitFailure || !strings.Contains(got.stderr, want) || len(got.lines) != 1 || got.lines[0].Verdict != pipeline.Hold {
			t.Errorf("%s: status %d, %d lines, want one hold and %q\n%s", wrong, got.code, len(got.lines), want, got.stderr)
		}
	}
}

func TestSequencesAreCountedInAFolder(t *testing.T) {
	p := newPeer(t, "fringes").start()
	dir := t.TempDir()
	for i := range 3 {
		writePGM(t, filepath.Join(dir, fmt.Sprintf("U1_fringes_%d.pgm", i)), 8, 4, byte(i))
	}
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, "--pattern", "{unit}_{view}_{index}.pgm", dir))
	if got.code != 0 || len(got.lines) != 1 || len(p.headers) != 3 {
		t.Fatalf("status %d, %d lines, %d frames sent, want 3 frames of one unit\n%s", got.code, len(got.lines), len(p.headers), got.stderr)
	}
	for i, h := range p.headers {
		if h.Index != i || h.Count != 3 {
			t.Errorf("frame %d: index %d of %d, want %d of 3", i, h.Index, h.Count, i)
		}
	}
}
