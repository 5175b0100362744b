package intake

import (
	"context"
	"slices"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/server/ledger"
)

// noRecipes has no recipe for any part.
type noRecipes struct{}

func (noRecipes) For(pipeline.Identity) (*pipeline.Pipeline, error) {
	return nil, pipeline.NotFound(pipeline.ReasonNoRecipe)
}

func newTestIntake(t testing.TB) *Intake {
	t.Helper()
	store, err := ledger.Open(context.Background(), t.TempDir()+"/ledger.db")
	if err != nil {
		t.Fatal(err)
	}
	in, err := New(Settings{MaxBytesInFlight: 1 << 16, MaxFrameBytes: 1 << 14, Workers: 1, ViewTimeout: time.Second}, noRecipes{}, store)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { in.Drain(time.Second); store.Close() })
	return in
}

// FuzzReceiver feeds a frame in chunks of any offset and size: whatever comes, the
// bytes end where they belong or are refused, and the memory is given back.
func FuzzReceiver(f *testing.F) {
	f.Add(8, 4, 8, []byte{0, 16, 16, 16}, false)
	f.Add(3, 3, 5, []byte{0, 255, 1, 2}, true)
	f.Add(65535, 65535, 1<<40, []byte{}, false)
	f.Add(-1, 1<<31, -5, []byte{9}, false)
	in := newTestIntake(f)
	f.Fuzz(func(t *testing.T, width, height, stride int, chunks []byte, wrongSum bool) {
		h := pipeline.FrameHeader{
			Identity: pipeline.Identity{Part: "disc", Unit: "u", Line: "A", Station: "s", Attempt: 1, Purpose: pipeline.Production},
			Capture:  pipeline.Capture{Format: raster.Mono8, Width: width, Height: height},
			View:     "ring", Count: 1, Stride: stride, Captured: time.Unix(1, 0),
		}
		r, err := in.Begin(h)
		if err != nil {
			return
		}
		want := make([]byte, h.PixelBytes())
		for i := range want {
			want[i] = byte(i * 7)
		}
		if !wrongSum {
			r.header.CRC32C = pipeline.Checksum(want)
		}
		feedChunks(t, r, want, chunks)
		if r.Complete() && string(r.buffer.bytes) != string(want) {
			t.Error("the frame's bytes are not where they belong")
		}
		if err := r.Submit(t, func(Verdict, error) { t.Error("answered without a recipe") }); err == nil {
			t.Error("a frame without a recipe was taken")
		}
		r.Abandon()
		if n := in.BytesInFlight(); n != 0 {
			t.Errorf("%d bytes are still held", n)
		}
	})
}

// feedChunks reads pairs of bytes as how far off the next chunk is and how long.
func feedChunks(t *testing.T, r *Receiver, want, chunks []byte) {
	for i := 0; i+1 < len(chunks); i += 2 {
		offset := r.filled + int(int8(chunks[i]))
		end := offset + int(chunks[i+1])
		if offset < 0 {
			if err := r.Add(^uint64(0), []byte{1}); err == nil {
				t.Error("a chunk at 2^64 − 1 was taken")
			}
			continue
		}
		data := make([]byte, end-offset)
		if offset < len(want) {
			copy(data, want[offset:min(end, len(want))])
		}
		before := r.filled
		err := r.Add(uint64(offset), data)
		fits := offset == before && end > offset && end <= len(want)
		if (err == nil) != fits {
			t.Fatalf("chunk %d to %d of %d with %d filled: error %v", offset, end, len(want), before, err)
		}
	}
}

func TestAdmissionCountsBytes(t *testing.T) {
	in := newTestIntake(t)
	h := pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "disc", Unit: "u", Line: "A", Station: "s", Attempt: 1, Purpose: pipeline.Production},
		Capture:  pipeline.Capture{Format: raster.Mono8, Width: 128, Height: 128},
		View:     "ring", Count: 1, Stride: 128, Captured: time.Unix(1, 0),
	}
	var open []*Receiver
	for range 4 { // 4 × 16 KiB fill the 64 KiB
		r, err := in.Begin(h)
		if err != nil {
			t.Fatal(err)
		}
		open = append(open, r)
	}
	_, err := in.Begin(h)
	later, ok := err.(interface{ RetryAfter() time.Duration })
	if pipeline.KindOf(err) != pipeline.Exhausted || !ok || later.RetryAfter() <= 0 {
		t.Errorf("fifth frame: %v, want Exhausted with a delay", err)
	}
	open[0].Abandon()
	open[0].Abandon() // twice is once
	if _, err := in.Begin(h); err != nil {
		t.Errorf("after one was given back: %v", err)
	}
	if n := in.BytesInFlight(); n != 4*128*128 {
		t.Errorf("%d bytes held, want %d", n, 4*128*128)
	}
}

// A frame gets the memory of an earlier one; cut short, it is refused, so that nobody
// sees the earlier one's pixels in it.
func TestShortFrameShowsNoEarlierPixels(t *testing.T) {
	in := newTestIntake(t)
	h := pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: "disc", Unit: "u", Line: "A", Station: "s", Attempt: 1, Purpose: pipeline.Production},
		Capture:  pipeline.Capture{Format: raster.Mono8, Width: 64, Height: 64},
		View:     "ring", Count: 1, Stride: 64, Captured: time.Unix(1, 0),
	}
	first, err := in.Begin(h)
	if err != nil {
		t.Fatal(err)
	}
	secret := slices.Repeat([]byte{77}, 64*64)
	h.CRC32C = pipeline.Checksum(secret)
	if err := first.Add(0, secret[:1000], nil, secret[1000:]); err != nil || !first.Complete() {
		t.Fatal(err)
	}
	memory := &first.buffer.bytes[0]
	first.Abandon()
	second, err := in.Begin(h)
	if err != nil {
		t.Fatal(err)
	}
	if &second.buffer.bytes[0] != memory {
		t.Error("the memory was not used again")
	}
	if err := second.Add(0, secret[:4000]); err != nil {
		t.Fatal(err)
	}
	err = second.Submit(t, func(Verdict, error) { t.Error("answered") })
	if err == nil || !strings.Contains(err.Error(), "cut short") || second.Complete() {
		t.Errorf("a short frame whose missing bytes happen to be right: %v", err)
	}
	second.Abandon()
	if in.BytesInFlight() != 0 || in.memory.kept != 64*64 {
		t.Errorf("%d bytes held, %d kept", in.BytesInFlight(), in.memory.kept)
	}
}

// Memory of sizes that nobody sends any more makes room; lent and kept stay below the bound.
func TestMemoryStaysWithinItsBound(t *testing.T) {
	made := 0
	m := newMemory(1000, 400, func(n int) []byte { made++; return make([]byte, n) })
	for n := 1; n <= 400; n++ {
		a, errA := m.lend(n)
		b, errB := m.lend(n)
		if errA != nil || errB != nil || len(a.bytes) != n || len(b.bytes) != n {
			t.Fatal(errA, errB)
		}
		a.giveBack()
		b.giveBack()
		b.giveBack() // twice is once
		if m.lent != 0 || m.kept > m.most {
			t.Fatalf("%d bytes lent, %d kept, want at most %d", m.lent, m.kept, m.most)
		}
	}
	before := made
	for range 10 {
		a, err := m.lend(400)
		if err != nil {
			t.Fatal(err)
		}
		a.giveBack()
	}
	if made != before {
		t.Errorf("%d new buffers for frames of one size", made-before)
	}
}
