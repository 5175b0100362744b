package pipeline_test

import (
	"math"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// RFC 3720, appendix B.4: 32 bytes of zeroes give aa 36 91 8a, sent least significant
// byte first; the check value of "123456789" is from memory.
func TestChecksum(t *testing.T) {
	if got := pipeline.Checksum(make([]byte, 32)); got != 0x8a9136aa {
		t.Errorf("32 zero bytes: 0x%08x, want 0x8a9136aa", got)
	}
	if got := pipeline.Checksum([]byte("123456789")); got != 0xe3069283 {
		t.Errorf("check value: 0x%08x, want 0xe3069283", got)
	}
}

func header() pipeline.FrameHeader {
	return pipeline.FrameHeader{Identity: identity(), View: "ring", Count: 1, Stride: 4, Captured: time.Unix(1, 0),
		CRC32C: pipeline.Checksum(make([]byte, 12)), Capture: pipeline.Capture{Format: raster.Mono8, Width: 4, Height: 3}}
}

func TestNewFrameNamesWhatIsWrong(t *testing.T) {
	cases := []struct {
		want   string
		change func(*pipeline.FrameHeader) int // returns the bytes sent
	}{
		{"data: got 11 bytes, want 12", func(*pipeline.FrameHeader) int { return 11 }},
		{"crc32c: got 0x", func(h *pipeline.FrameHeader) int { h.CRC32C++; return 12 }},
		{"stride: got 3 bytes, want at least 4", func(h *pipeline.FrameHeader) int { h.Stride = 3; return 12 }},
		{"width: got 2147483647, want 1 to 65535", func(h *pipeline.FrameHeader) int { h.Width = math.MaxInt32; return 12 }},
		{"height: got 0", func(h *pipeline.FrameHeader) int { h.Height = 0; return 12 }},
		{"stride: got 9223372036854775807", func(h *pipeline.FrameHeader) int { h.Stride = math.MaxInt; return 12 }},
		{"pixel_format: got 0x02180014", func(h *pipeline.FrameHeader) int { h.Format = 0x02180014; return 12 }},
		{`unit: got "../u"`, func(h *pipeline.FrameHeader) int { h.Unit = "../u"; return 12 }},
		{`lot: got ".hidden"`, func(h *pipeline.FrameHeader) int { h.Lot = ".hidden"; return 12 }},
		{`part: got ""`, func(h *pipeline.FrameHeader) int { h.Part = ""; return 12 }},
		{"unit: got", func(h *pipeline.FrameHeader) int { h.Unit = strings.Repeat("u", 65); return 12 }},
		{`purpose: got "play"`, func(h *pipeline.FrameHeader) int { h.Purpose = "play"; return 12 }},
		{"attempt: got 0", func(h *pipeline.FrameHeader) int { h.Attempt = 0; return 12 }},
		{"index: got 1, want 0 to 0", func(h *pipeline.FrameHeader) int { h.Index = 1; return 12 }},
		{"count: got 0", func(h *pipeline.FrameHeader) int { h.Count = 0; return 12 }},
		{"captured: not given", func(h *pipeline.FrameHeader) int { h.Captured = time.Time{}; return 12 }},
		{`tag "tool": got 129 characters`, func(h *pipeline.FrameHeader) int {
			h.Tags = map[string]string{"tool": strings.Repeat("x", 129)}
			return 12
		}},
	}
	for _, tc := range cases {
		h := header()
		n := tc.change(&h)
		_, err := pipeline.NewFrame(h, make([]byte, n))
		if err == nil || !strings.Contains(err.Error(), tc.want) || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("error %v (kind %d), want one of kind Invalid with %q", err, pipeline.KindOf(err), tc.want)
		}
	}
	if _, err := pipeline.NewFrame(header(), make([]byte, 12)); err != nil {
		t.Errorf("a good frame was refused: %v", err)
	}
}

func TestDigestKnowsNoOrderOfViews(t *testing.T) {
	a, b := frame(t, "ring"), frame(t, "bar")
	if pipeline.Digest([]pipeline.View{a, b}) != pipeline.Digest([]pipeline.View{b, a}) {
		t.Error("the digest depends on the order of the views")
	}
	c := frame(t, "bar")
	c.Frames[0].Header.CRC32C ^= 1
	if pipeline.Digest([]pipeline.View{a, b}) == pipeline.Digest([]pipeline.View{a, c}) {
		t.Error("another checksum gives the same digest")
	}
}

func TestPlanarThereAndBack(t *testing.T) {
	for _, g := range []pipeline.Planar{{UMPerPx: 10}, {UMPerPx: 16.5, RotationDeg: 37, Mirror: true}, {UMPerPx: 5, RotationDeg: -120}} {
		p := g.WithOrigin(800, 600)
		u, v, scale := p.ToStation(812.5, 590)
		x, y := p.ToPixel(u, v)
		if math.Abs(x-812.5) > 1e-9 || math.Abs(y-590) > 1e-9 || scale != g.UMPerPx {
			t.Errorf("%+v: back at (%g, %g) with %g µm/px", g, x, y, scale)
		}
		if want := g.UMPerPx * math.Hypot(12.5, 10); math.Abs(math.Hypot(u, v)-want) > 1e-9 {
			t.Errorf("%+v: %g µm from the centre, want %g", g, math.Hypot(u, v), want)
		}
	}
	if u, v, _ := (pipeline.Planar{UMPerPx: 2}).ToStation(1, -3); u != 2 || v != 6 {
		t.Errorf("(1, -3) px is (%g, %g) µm, want (2, 6): v points up", u, v)
	}
}
