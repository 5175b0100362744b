package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
)

const appendTo = "LAPGATE_TEST_APPEND_STDIN_TO"

// TestMain lets the test program stand in for lapgate itself and for a reject command.
func TestMain(m *testing.M) {
	if path := os.Getenv(appendTo); path != "" && len(os.Args) > 1 && os.Args[1] == "append it" {
		f, err := os.OpenFile(path, os.O_APPEND|os.O_CREATE|os.O_WRONLY, 0o600)
		if err == nil {
			_, err = io.Copy(f, os.Stdin)
		}
		if err != nil {
			fmt.Println(err)
			os.Exit(1)
		}
		fmt.Fprintln(f)
		os.Exit(0)
	}
	if len(os.Args) > 2 && os.Args[1] == "run-as-lapgate" {
		os.Exit(run(context.Background(), os.Args[2:], os.Stdin, os.Stdout, os.Stderr))
	}
	os.Exit(m.Run())
}

// fed is what a run of the feed verb gave.
type fed struct {
	code   int
	lines  []verdictLine
	stderr string
}

func (f fed) units() []string {
	var out []string
	for _, l := range f.lines {
		out = append(out, l.Unit)
	}
	return out
}

// feedArgs are the flags that every test needs; the spool lies in a folder of the test.
func feedArgs(t *testing.T, p *peer, more ...string) []string {
	return append([]string{"feed", "--server", p.address(), "--part", "mirror-25", "--line", "A", "--station", "A1", "--lot", "L1",
		"--spool", filepath.Join(t.TempDir(), "spool")}, more...)
}

func runFeed(t *testing.T, ctx context.Context, stdin io.Reader, args []string) fed {
	t.Helper()
	var stdout, stderr bytes.Buffer
	code := run(ctx, args, stdin, &stdout, &stderr)
	return fed{code, parseLines(t, stdout.Bytes()), stderr.String()}
}

func parseLines(t *testing.T, text []byte) []verdictLine {
	t.Helper()
	var out []verdictLine
	for line := range bytes.Lines(text) {
		var l verdictLine
		if err := json.Unmarshal(line, &l); err != nil {
			t.Fatalf("output line %q: %v", line, err)
		}
		out = append(out, l)
	}
	return out
}

// inBackground runs the feed; the returned function waits for its end.
func inBackground(t *testing.T, ctx context.Context, stdin io.Reader, args []string) func() fed {
	t.Helper()
	done := make(chan fed, 1)
	go func() { done <- runFeed(t, ctx, stdin, args) }()
	return sync.OnceValue(func() fed {
		select {
		case f := <-done:
			return f
		case <-time.After(20 * time.Second):
			t.Fatal("the feed did not end within 20 s")
			return fed{}
		}
	})
}

func TestFeedOfAFolder(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	p.judge = func(h pipeline.FrameHeader) pipeline.Judgement {
		if h.Unit == "U002" {
			return pipeline.Judgement{Verdict: pipeline.Reject, Reasons: []pipeline.Reason{{Name: "digs", Verdict: pipeline.Reject}, {Name: "digs", Verdict: pipeline.Reject}}}
		}
		return pipeline.Judgement{Verdict: pipeline.Accept}
	}
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, unitsIn(t, 3)))
	if got.code != 0 || !slices.Equal(got.units(), []string{"U001", "U002", "U003"}) {
		t.Fatalf("status %d, units %v\n%s", got.code, got.units(), got.stderr)
	}
	l := got.lines[1]
	if l.Verdict != pipeline.Reject || !slices.Equal(l.Reasons, []string{"digs"}) || l.Lot != "L1" || l.Purpose != pipeline.Production || l.InspectionID != "2" {
		t.Errorf("line of the rejected unit: %+v", l)
	}
	if !strings.Contains(got.stderr, "6 frames taken; 3 verdicts: 2 accept, 1 reject, 0 hold") {
		t.Errorf("summary: %s", got.stderr)
	}
}

func TestLargeFramesGoInChunksBelowOneMebibyte(t *testing.T) {
	p := newPeer(t, "ring").start()
	path := filepath.Join(t.TempDir(), "U1_ring.pgm")
	writePGM(t, path, 2000, 1600, 1)
	if got := runFeed(t, t.Context(), nil, feedArgs(t, p, path)); got.code != 0 {
		t.Fatalf("status %d\n%s", got.code, got.stderr)
	}
	if p.chunkTop != chunkBytes {
		t.Errorf("largest chunk %d bytes, want %d", p.chunkTop, chunkBytes)
	}
}

func TestFeedKeepsFramesWhileTheServerIsAway(t *testing.T) {
	p := newPeer(t, "ring", "bar")
	args := feedArgs(t, p, "--late-after", "1ms", unitsIn(t, 20))
	spoolDir := args[slices.Index(args, "--spool")+1]
	wait := inBackground(t, t.Context(), nil, args)
	eventually(t, "all 40 frames are in the spool", func() bool {
		kept, _ := filepath.Glob(filepath.Join(spoolDir, "*.frame"))
		return len(kept) == 40
	})
	p.start()
	got := wait()
	if got.code != 0 || !slices.IsSorted(p.recorded()) || len(p.recorded()) != 20 || len(got.lines) != 20 {
		t.Fatalf("status %d, recorded %v, %d lines\n%s", got.code, p.recorded(), len(got.lines), got.stderr)
	}
	for _, l := range got.lines {
		if l.Verdict != pipeline.Hold || !slices.Equal(l.Reasons, []string{pipeline.ReasonLate}) {
			t.Errorf("unit %s: %s %v, want hold for late", l.Unit, l.Verdict, l.Reasons)
		}
	}
	if exists(spoolDir) {
		t.Error("the spool is still there after all verdicts came")
	}
}

func TestFeedGivesUpAndTheNextFeedSendsWhatWasKept(t *testing.T) {
	p := newPeer(t, "ring", "bar")
	args := feedArgs(t, p, "--give-up", "50ms")
	got := runFeed(t, t.Context(), nil, append(args, unitsIn(t, 3)))
	if got.code != exitFailure || !strings.Contains(got.stderr, "3 units have no verdict: 3 are kept in the spool") {
		t.Fatalf("status %d\n%s", got.code, got.stderr)
	}
	p.start()
	other := filepath.Join(t.TempDir(), "U900_ring.pgm")
	writePGM(t, other, 8, 4, 99)
	writePGM(t, strings.Replace(other, "ring", "bar", 1), 8, 4, 98)
	got = runFeed(t, t.Context(), nil, append(args, filepath.Dir(other)))
	if got.code != 0 || !slices.Equal(p.recorded(), []string{"U001", "U002", "U003", "U900"}) {
		t.Fatalf("status %d, recorded %v\n%s", got.code, p.recorded(), got.stderr)
	}
	if p.records[showingKey(got.lines[0].header())].header.Spooled != true || got.lines[3].Verdict != pipeline.Accept {
		t.Error("frames of an earlier run are late, those of this run are not")
	}
}

func (l verdictLine) header() pipeline.FrameHeader { return pipeline.FrameHeader{Identity: l.Identity} }

func TestStreamBreaksBeforeTheVerdict(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	p.silent = true
	wait := inBackground(t, t.Context(), nil, feedArgs(t, p, unitsIn(t, 5)))
	eventually(t, "the stream breaks twice", func() (is bool) { p.with(func() { is = p.breaks >= 2 }); return is })
	p.with(func() { p.silent = false })
	got := wait()
	if got.code != 0 || len(got.lines) != 5 || len(p.recorded()) != 5 {
		t.Fatalf("status %d, %d lines, recorded %v\n%s", got.code, len(got.lines), p.recorded(), got.stderr)
	}
	if !got.lines[0].Stored {
		t.Error("the first unit was judged before the break: want its stored verdict")
	}
}

func TestNoRoomMeansLater(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	refusals := 0
	p.refuse = func(pipeline.FrameHeader) error {
		if refusals++; refusals%3 != 0 {
			return &pipeline.Error{Kind: pipeline.Exhausted, Err: soon{fmt.Errorf("no room")}}
		}
		return nil
	}
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, unitsIn(t, 6)))
	if got.code != 0 || len(p.recorded()) != 6 || len(got.lines) != 6 {
		t.Fatalf("status %d, recorded %v\n%s", got.code, p.recorded(), got.stderr)
	}
}

type soon struct{ error }

func (soon) RetryAfter() time.Duration { return 2 * time.Millisecond }

func TestConflictIsAHoldAndAFailure(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	dir := unitsIn(t, 2)
	args := feedArgs(t, p, dir)
	if got := runFeed(t, t.Context(), nil, args); got.code != 0 {
		t.Fatal(got.stderr)
	}
	writePGM(t, filepath.Join(dir, "U001_bar.pgm"), 8, 4, 77) // the counter restarted: another part
	got := runFeed(t, t.Context(), nil, args)
	if got.code != exitFailure || !strings.Contains(got.stderr, "did a counter restart") {
		t.Fatalf("status %d\n%s", got.code, got.stderr)
	}
	l := got.lines[slices.Index(got.units(), "U001")]
	if l.Verdict != pipeline.Hold || !slices.Equal(l.Reasons, []string{pipeline.ReasonConflict}) || l.Code != "AlreadyExists" {
		t.Errorf("line of the conflict: %+v", l)
	}
	if other := got.lines[slices.Index(got.units(), "U002")]; !other.Stored || other.Verdict != pipeline.Accept {
		t.Errorf("the same frames again: %+v, want the stored verdict", other)
	}
	if len(p.recorded()) != 2 {
		t.Errorf("recorded %v, want each unit once", p.recorded())
	}
}

func TestRefusedFrameHoldsItsUnitOnly(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	p.refuse = func(h pipeline.FrameHeader) error {
		if h.Unit == "U002" {
			return pipeline.Fail(pipeline.Unready, "no recipe for part %s", h.Part)
		}
		return nil
	}
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, unitsIn(t, 3)))
	if got.code != exitFailure || len(got.lines) != 3 {
		t.Fatalf("status %d, %d lines\n%s", got.code, len(got.lines), got.stderr)
	}
	l := got.lines[slices.Index(got.units(), "U002")]
	if l.Verdict != pipeline.Hold || l.Code != "FailedPrecondition" || !strings.Contains(l.Refused, "no recipe for part mirror-25") {
		t.Errorf("line of the refused unit: %+v", l)
	}
}

func TestHoldOfOurOwnMakingIsShownAgain(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	p.judge = func(h pipeline.FrameHeader) pipeline.Judgement {
		if h.Attempt < 3 {
			return pipeline.Judgement{Verdict: pipeline.Hold, Reasons: []pipeline.Reason{{Name: pipeline.ReasonStageFailed, Verdict: pipeline.Hold}}}
		}
		return pipeline.Judgement{Verdict: pipeline.Accept}
	}
	for _, c := range []struct {
		lot, retries string
		attempts     []int
	}{{"none", "0", []int{1}}, {"one", "1", []int{1, 2}}, {"many", "9", []int{1, 2, 3}}} {
		got := runFeed(t, t.Context(), nil, feedArgs(t, p, "--lot", c.lot, "--retry-holds", c.retries, unitsIn(t, 1)))
		var attempts []int
		for _, l := range got.lines {
			attempts = append(attempts, l.Attempt)
		}
		if got.code != 0 || !slices.Equal(attempts, c.attempts) {
			t.Errorf("--retry-holds %s: status %d, attempts %v, want %v\n%s", c.retries, got.code, attempts, c.attempts, got.stderr)
		}
	}
}

func TestRejectCommandRunsForEachUnitThatIsNotAccepted(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	p.judge = func(h pipeline.FrameHeader) pipeline.Judgement {
		return pipeline.Judgement{Verdict: map[string]pipeline.Verdict{"U001": pipeline.Reject, "U002": pipeline.Accept, "U003": pipeline.Hold}[h.Unit]}
	}
	ejected := filepath.Join(t.TempDir(), "ejected")
	t.Setenv(appendTo, ejected)
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, "--reject-cmd", os.Args[0]+" 'append it'", unitsIn(t, 3)))
	text, err := os.ReadFile(ejected)
	if err != nil {
		t.Fatal(err, got.stderr)
	}
	lines := fed{lines: parseLines(t, text)}
	if got.code != 0 || !slices.Equal(lines.units(), []string{"U001", "U003"}) {
		t.Errorf("status %d, ejected %v", got.code, lines.units())
	}
	t.Setenv(appendTo, filepath.Join(t.TempDir(), "no folder", "ejected"))
	got = runFeed(t, t.Context(), nil, feedArgs(t, p, "--reject-cmd", os.Args[0]+" 'append it'", unitsIn(t, 3)))
	if got.code != exitFailure || !strings.Contains(got.stderr, "the unit may still be on the line") || !strings.Contains(got.stderr, "failed for 2 units") {
		t.Errorf("status %d\n%s", got.code, got.stderr)
	}
}

func TestFullSpoolStopsTaking(t *testing.T) {
	p := newPeer(t, "ring", "bar")
	wait := inBackground(t, t.Context(), nil, feedArgs(t, p, "--in-flight", "2", "--spool-bytes", "2000", unitsIn(t, 30)))
	time.Sleep(300 * time.Millisecond)
	p.start()
	got := wait()
	if got.code != 0 || len(p.recorded()) != 30 || len(got.lines) != 30 {
		t.Fatalf("status %d, recorded %d, %d lines\n%s", got.code, len(p.recorded()), len(got.lines), got.stderr)
	}
	if !strings.Contains(got.stderr, "not taken from the source until the spool has room") {
		t.Errorf("no word of the full spool:\n%s", got.stderr)
	}
}

func TestUnitsWithoutSerial(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	dir := t.TempDir()
	for i, name := range []string{"0001_ring.pgm", "0001_bar.pgm", "0002_ring.pgm", "0002_bar.pgm"} {
		writePGM(t, filepath.Join(dir, name), 8, 4, byte(i))
	}
	got := runFeed(t, t.Context(), nil, feedArgs(t, p, "--pattern", "{request_id}_{view}", dir))
	if got.code != 0 || !slices.Equal(got.units(), []string{"G1", "G2"}) {
		t.Errorf("status %d, units %v\n%s", got.code, got.units(), got.stderr)
	}
}

// TestSameIDTwiceInOneRun shows other frames under an id that is still waited for.
func TestSameIDTwiceInOneRun(t *testing.T) {
	for _, pattern := range []string{"{unit}_{view}", "{request_id}_{view}"} {
		p := newPeer(t, "ring", "bar").start()
		dir := t.TempDir()
		var list []string
		for i, name := range []string{"a/0001_ring.pgm", "a/0001_bar.pgm", "b/0001_ring.pgm", "b/0001_bar.pgm"} {
			list = append(list, filepath.Join(dir, name))
			writePGM(t, list[i], 8, 4, byte(i))
		}
		got := runFeed(t, t.Context(), strings.NewReader(strings.Join(list, "\n")), feedArgs(t, p, "--pattern", pattern, "-"))
		if got.code != exitFailure || len(got.lines) != 2 || got.lines[0].Verdict != pipeline.Accept || got.lines[1].Code != "AlreadyExists" {
			t.Errorf("%s: status %d, lines %+v\n%s", pattern, got.code, got.lines, got.stderr)
		}
	}
}

func TestListOnStdinAndWrongFiles(t *testing.T) {
	p := newPeer(t, "ring", "bar").start()
	dir := unitsIn(t, 2)
	broken := filepath.Join(dir, "U009_ring.pgm")
	if err := os.WriteFile(broken, []byte("P5\n8 4\n255\nshort"), 0o600); err != nil {
		t.Fatal(err)
	}
	list := strings.Join([]string{filepath.Join(dir, "U001_ring.pgm"), broken, filepath.Join(dir, "U001_bar.pgm"), filepath.Join(dir, "U001_bar.pgm")}, "\n")
	got := runFeed(t, t.Context(), strings.NewReader(list), feedArgs(t, p, "-"))
	if got.code != exitFailure || len(got.lines) != 2 || !slices.Equal(p.recorded(), []string{"U001"}) {
		t.Fatalf("status %d, lines %v, recorded %v\n%s", got.code, got.units(), p.recorded(), got.stderr)
	}
	l := got.lines[slices.Index(got.units(), "U009")]
	if l.Verdict != pipeline.Hold || !strings.Contains(l.Refused, "U009_ring.pgm") {
		t.Errorf("line of the broken file: %+v", l)
	}
}
