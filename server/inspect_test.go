package server_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

const (
	accept = inspectpb.Verdict_VERDICT_ACCEPT
	reject = inspectpb.Verdict_VERDICT_REJECT
	hold   = inspectpb.Verdict_VERDICT_HOLD
)

func wantVerdict(t *testing.T, l *line, unit string, want inspectpb.Verdict, reason string) {
	t.Helper()
	got, reasons := l.verdict(unit)
	if got != want || !strings.Contains(strings.Join(reasons, "; "), reason) {
		t.Errorf("unit %s: %v because of %q, want %v with %q", unit, got, reasons, want, reason)
	}
}

func TestStreamOfManyUnits(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i := range 20 {
		l.showUnit(fmt.Sprintf("u%02d", i), uint64(i), float64(8*(i%2))) // every second has a dig of 80 µm
	}
	l.finish()
	for i := range 20 {
		want, reason := accept, ""
		if i%2 == 1 {
			want, reason = reject, "dig too large"
		}
		wantVerdict(t, l, fmt.Sprintf("u%02d", i), want, reason)
	}
	stored, err := r.ledger.Find(context.Background(), header("u03", "ring", frame(1, 0)).Identity)
	if err != nil || stored.Judgement.Verdict != pipeline.Reject || len(stored.Evidence.Defects) != 1 {
		t.Errorf("the ledger has %+v (%v), want u03 rejected with one defect", stored.Judgement, err)
	}
}

// Frames of two units in small chunks that take turns on one stream.
func TestInterleavedChunks(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	var numbers []uint32
	var raws []raster.Raw
	for i, unit := range []string{"a", "a", "b", "b"} {
		raw := frame(uint64(i), 0)
		raws = append(raws, raw)
		numbers = append(numbers, l.start(header(unit, []string{"ring", "bar"}[i%2], raw)))
	}
	for offset := 0; offset < side*side; offset += 1000 {
		for i, n := range numbers {
			l.chunk(n, offset, raws[i].Data[offset:min(offset+1000, side*side)])
		}
	}
	l.finish()
	wantVerdict(t, l, "a", accept, "")
	wantVerdict(t, l, "b", accept, "")
}

// A frame that cannot be true is refused with field, got and wanted; its unit is held;
// the next unit on the same stream is judged as if nothing had been.
func TestBadFramesHoldTheirUnitAlone(t *testing.T) {
	cases := []struct {
		name, want string
		send       func(l *line, h pipeline.FrameHeader, raw raster.Raw)
	}{
		{"checksum", "crc32c: got", func(l *line, h pipeline.FrameHeader, raw raster.Raw) { h.CRC32C ^= 1; l.show(h, raw) }},
		{"too much", "chunk: got 9217 bytes", func(l *line, h pipeline.FrameHeader, raw raster.Raw) {
			l.chunk(l.start(h), 0, append(raw.Data, 0))
		}},
		{"gap", "offset: got 5000, want 4000", func(l *line, h pipeline.FrameHeader, raw raster.Raw) {
			n := l.start(h)
			l.chunk(n, 0, raw.Data[:4000])
			l.chunk(n, 5000, raw.Data[5000:])
		}},
		{"size", "stride: got 10 bytes, want at least 96", func(l *line, h pipeline.FrameHeader, raw raster.Raw) { h.Stride = 10; l.show(h, raw) }},
		{"overflow", "width: got 2147483647", func(l *line, h pipeline.FrameHeader, raw raster.Raw) {
			h.Width, h.Height, h.Stride = math.MaxInt32, math.MaxInt32, math.MaxInt32
			l.show(h, raw)
		}},
		{"format", "pixel_format: got 0x02180014", func(l *line, h pipeline.FrameHeader, raw raster.Raw) { h.Format = 0x02180014; l.show(h, raw) }},
		{"larger than allowed", "frame size: got", func(l *line, h pipeline.FrameHeader, raw raster.Raw) {
			h.Width, h.Height, h.Stride = 4000, 3000, 4000
			l.show(h, raw)
		}},
		{"unknown view", `view: got "left"`, func(l *line, h pipeline.FrameHeader, raw raster.Raw) { h.View = "left"; l.show(h, raw) }},
	}
	for _, tc := range cases {
		t.Run(tc.name, func(t *testing.T) {
			r := newRig(t, rigOptions{})
			l := r.line()
			raw := frame(1, 0)
			tc.send(l, header("bad", "ring", raw), raw)
			l.show(header("bad", "bar", raw), raw)
			l.showUnit("good", 5, 0)
			l.finish()
			if len(l.refused) != 1 || !strings.Contains(l.refused[0].Message, tc.want) || codes.Code(l.refused[0].Code) != codes.InvalidArgument {
				t.Errorf("refusals %v, want one InvalidArgument with %q", l.refused, tc.want)
			}
			wantVerdict(t, l, "bad", hold, "")
			wantVerdict(t, l, "good", accept, "")
		})
	}
}

// A stream that breaks in the middle of a frame leaves no verdict; the resend gets one.
func TestTruncatedStream(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	raw := frame(1, 0)
	l.chunk(l.start(header("u", "ring", raw)), 0, raw.Data[:100])
	must(t, l.stream.CloseSend())
	<-l.done
	l = r.line()
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(i), 0)
		l.show(header("u", view, raw), raw)
	}
	l.finish()
	wantVerdict(t, l, "u", accept, "")
	if n := r.intake.BytesInFlight(); n != 0 {
		t.Errorf("%d bytes are still held", n)
	}
}

func TestOddIdsAreRefused(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	raw := frame(1, 0)
	for _, id := range []string{"../etc", "a b", ".hidden", strings.Repeat("x", 65), "ü"} {
		l.show(header(id, "ring", raw), raw)
	}
	l.finish()
	if len(l.refused) != 5 || len(l.verdicts) != 0 {
		t.Errorf("%d refusals and %d verdicts, want 5 and none", len(l.refused), len(l.verdicts))
	}
	for _, f := range l.refused {
		if !strings.HasPrefix(f.Message, "unit: got") {
			t.Errorf("refusal %q does not name the field", f.Message)
		}
	}
}

func TestMissingViewIsHeld(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	raw := frame(1, 0)
	l.show(header("u", "ring", raw), raw)
	l.finish()
	wantVerdict(t, l, "u", hold, "missing view: view bar: got 0 of 1 frames")
}

// The same frames again: the stored verdict comes back and nothing is written.
func TestResendGetsTheStoredVerdict(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	l.showUnit("u", 1, 8)
	l.finish()
	first := l.verdicts["u"]
	l = r.line()
	l.showUnit("u", 1, 8)
	l.finish()
	second := l.verdicts["u"]
	if second == nil || !second.Stored || second.InspectionId != first.InspectionId || second.Judgement.Verdict != reject {
		t.Errorf("resend: %v, want the stored reject of inspection %s", second, first.InspectionId)
	}
	page, err := r.ledger.Showings(context.Background(), ledger.Filter{}, ledger.Page{})
	if err != nil || len(page.List) != 1 {
		t.Errorf("%d showings in the ledger (%v), want 1", len(page.List), err)
	}
}

// A line PC that restarts its counter must never get yesterday's verdict for unit 1.
func TestSameIdentityOtherFrames(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	l.showUnit("1", 1, 0)
	l.finish()
	wantVerdict(t, l, "1", accept, "")
	l = r.line()
	l.showUnit("1", 99, 8)
	l.finish()
	if len(l.verdicts) != 0 || len(l.refused) != 1 {
		t.Fatalf("verdicts %v, refusals %v, want no verdict and one refusal", l.verdicts, l.refused)
	}
	if f := l.refused[0]; codes.Code(f.Code) != codes.AlreadyExists || !strings.Contains(f.Message, "identity conflict") || f.Identity.GetUnit() != "1" {
		t.Errorf("refusal %v, want AlreadyExists, identity conflict, unit 1", f)
	}
}

// Unserialised units get an id from the server, the same one on a resend.
func TestServerGivesUnitAndAttempt(t *testing.T) {
	r := newRig(t, rigOptions{})
	send := func(request string, seed uint64) *inspectpb.UnitVerdict {
		l := r.line()
		for i, view := range []string{"ring", "bar"} {
			raw := frame(seed+uint64(i), 0)
			h := header("", view, raw)
			h.Attempt, h.RequestID = 0, request
			l.show(h, raw)
		}
		l.finish()
		for _, v := range l.verdicts {
			return v
		}
		t.Fatalf("no verdict, refused: %v", l.refused)
		return nil
	}
	a, b, again := send("r1", 1), send("r2", 50), send("r1", 1)
	if a.Identity.Unit == "" || a.Identity.Unit == b.Identity.Unit || again.Identity.Unit != a.Identity.Unit || !again.Stored {
		t.Errorf("units %q, %q, and %q (stored %v) for the resend of the first", a.Identity.Unit, b.Identity.Unit, again.Identity.Unit, again.Stored)
	}
	if a.Identity.Attempt != 1 {
		t.Errorf("attempt %d, want 1", a.Identity.Attempt)
	}
}

func TestOverloadSaysWhenToTryAgain(t *testing.T) {
	r := newRig(t, rigOptions{maxBytes: 2*side*side + 100})
	l := r.line()
	for i := range 6 { // six first views without their second fill the memory
		raw := frame(uint64(i), 0)
		l.show(header(fmt.Sprintf("u%d", i), "ring", raw), raw)
	}
	l.finish()
	exhausted := 0
	for _, f := range l.refused {
		if codes.Code(f.Code) == codes.ResourceExhausted && f.RetryAfterMs > 0 {
			exhausted++
		}
	}
	if exhausted != 4 {
		t.Errorf("%d of 6 frames refused as ResourceExhausted with a delay (%v), want 4", exhausted, l.refused)
	}
	if n := r.intake.BytesInFlight(); n != 0 {
		t.Errorf("%d bytes are still held after the time-outs", n)
	}
}

func TestLateIsHeld(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(i), 0)
		h := header("slow", view, raw)
		h.AnswerWithinMS = 50
		l.show(h, raw)
		time.Sleep(100 * time.Millisecond)
		h = header("spooled", view, raw)
		h.Spooled = true
		l.show(h, raw)
	}
	l.finish()
	wantVerdict(t, l, "slow", hold, "late: judged")
	wantVerdict(t, l, "spooled", hold, "late: the frames waited in a spool")
	in, err := r.ledger.Find(context.Background(), header("slow", "ring", frame(1, 0)).Identity)
	if err != nil || !in.Late {
		t.Errorf("the ledger has late = %v (%v), want true", in.Late, err)
	}
}

// More attempts than the recipe allows: a person has to decide.
func TestTooManyAttempts(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(i), 0)
		h := header("u", view, raw)
		h.Attempt = 4
		l.show(h, raw)
	}
	l.finish()
	wantVerdict(t, l, "u", hold, "too many attempts")
}

func TestUnknownPartIsRefused(t *testing.T) {
	r := newRig(t, rigOptions{})
	l := r.line()
	raw := frame(1, 0)
	h := header("u", "ring", raw)
	h.Part = "lens"
	l.show(h, raw)
	l.finish()
	if len(l.refused) != 1 || codes.Code(l.refused[0].Code) != codes.NotFound || !strings.Contains(l.refused[0].Message, "have disc") {
		t.Errorf("refusals %v, want NotFound that lists what there is", l.refused)
	}
}

func TestUnaryUnit(t *testing.T) {
	r := newRig(t, rigOptions{})
	req := &inspectpb.InspectUnitRequest{}
	for i, view := range []string{"ring", "bar"} {
		raw := frame(uint64(i), 8)
		req.Frames = append(req.Frames, &inspectpb.Frame{Header: inspectpb.FromFrameHeader(header("u", view, raw)), Data: raw.Data})
	}
	resp, err := r.InspectUnit(context.Background(), req)
	if err != nil || resp.Verdict.Judgement.Verdict != reject {
		t.Errorf("%v (%v), want reject", resp, err)
	}
	_, err = r.InspectUnit(context.Background(), &inspectpb.InspectUnitRequest{})
	if status.Code(err) != codes.InvalidArgument {
		t.Errorf("no frames: %v, want InvalidArgument", err)
	}
}

// Graceful stop: what is whole is finished, what is half gets no verdict.
func TestDrain(t *testing.T) {
	r := newRig(t, rigOptions{workers: 1})
	l := r.line()
	for i := range 5 {
		l.showUnit(fmt.Sprintf("u%d", i), uint64(i), 0)
	}
	raw := frame(77, 0)
	l.show(header("half", "ring", raw), raw)
	for r.intake.BytesInFlight() == 0 {
		time.Sleep(time.Millisecond)
	}
	time.Sleep(100 * time.Millisecond)
	r.intake.Drain(100 * time.Millisecond)
	l.finish()
	for i := range 5 {
		wantVerdict(t, l, fmt.Sprintf("u%d", i), accept, "")
	}
	if _, ok := l.verdicts["half"]; ok || len(l.refused) != 1 || codes.Code(l.refused[0].Code) != codes.Unavailable {
		t.Errorf("half a unit: verdict %v, refusals %v, want Unavailable alone", ok, l.refused)
	}
	_, err := r.ledger.Find(context.Background(), header("half", "ring", raw).Identity)
	if pipeline.KindOf(err) != pipeline.NotFoundKind {
		t.Errorf("the half unit is in the ledger: %v", err)
	}
}
