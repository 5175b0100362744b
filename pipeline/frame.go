package pipeline

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"hash/crc32"
	"sort"
	"time"

	"lapgate/pipeline/raster"
)

// Capture is how the camera was set when it took a frame; a calibration fits only
// frames taken with the same.
type Capture struct {
	Format     raster.PixelFormat `json:"format"`
	Width      int                `json:"width"`
	Height     int                `json:"height"`
	ExposureUS float64            `json:"exposure_us"` // µs
	GainDB     float64            `json:"gain_db"`     // dB
	BlackLevel float64            `json:"black_level"` // DN
	OffsetX    int                `json:"offset_x"`    // px, of the read-out window on the sensor
	OffsetY    int                `json:"offset_y"`
	BinningX   int                `json:"binning_x"` // 0 is read as 1
	BinningY   int                `json:"binning_y"`
}

// FrameHeader is what is said about a frame beside its pixels.
type FrameHeader struct {
	Identity
	Capture
	Tags           map[string]string `json:"tags"` // bounded: tool, cavity, shift, operator, photodiode …
	View           string            `json:"view"`
	Index          int               `json:"index"` // of the frame within the view, from 0
	Count          int               `json:"count"` // frames in the view, from 1
	CameraID       string            `json:"camera_id"`
	Stride         int               `json:"stride"`        // bytes
	FrameCounter   uint64            `json:"frame_counter"` // the camera's own; 0 = not given
	SensorC        *float64          `json:"sensor_c"`      // °C, where the camera says
	Captured       time.Time         `json:"captured"`
	CRC32C         uint32            `json:"crc32c"` // of the pixel bytes, Castagnoli
	RequestID      string            `json:"request_id"`
	AnswerWithinMS int               `json:"answer_within_ms"`  // 0 = no deadline
	Spooled        bool              `json:"spooled,omitempty"` // waited in a spool because no server answered: its verdict is late
}

// Frame is one picture with its header. The bytes of Raw are never altered.
type Frame struct {
	Header FrameHeader
	Raw    raster.Raw
}

// View is what one camera saw of a unit under one light: one frame, or a sequence.
type View struct {
	Name   string
	Frames []Frame
}

// Limits on what a header may carry.
const (
	MaxTags       = 16
	MaxTagLength  = 128
	MaxViewFrames = 64
)

// Check refuses a header that cannot be true; the error names field, got and wanted.
func (h FrameHeader) Check() error {
	if err := h.Identity.Check(); err != nil {
		return err
	}
	if err := CheckID("view", h.View); err != nil {
		return err
	}
	if h.Count < 1 || h.Count > MaxViewFrames {
		return Invalid("count: got %d, want 1 to %d frames in a view", h.Count, MaxViewFrames)
	}
	if h.Index < 0 || h.Index >= h.Count {
		return Invalid("index: got %d, want 0 to %d", h.Index, h.Count-1)
	}
	if h.Captured.IsZero() {
		return Invalid("captured: not given, want the time of capture")
	}
	if err := h.raw().CheckDimensions(); err != nil {
		return &Error{Kind: InvalidKind, Err: err}
	}
	return h.checkTags()
}

func (h FrameHeader) checkTags() error {
	if len(h.Tags) > MaxTags {
		return Invalid("tags: got %d, want at most %d", len(h.Tags), MaxTags)
	}
	for k, v := range h.Tags {
		if err := CheckID("tag name", k); err != nil {
			return err
		}
		if len(v) > MaxTagLength {
			return Invalid("tag %q: got %d characters, want at most %d", k, len(v), MaxTagLength)
		}
	}
	return nil
}

func (h FrameHeader) raw() raster.Raw {
	return raster.Raw{Format: h.Format, Width: h.Width, Height: h.Height, Stride: h.Stride}
}

// PixelBytes returns how many bytes of pixels the header announces.
func (h FrameHeader) PixelBytes() int { return h.raw().Size() }

// Checksum returns the CRC-32C (Castagnoli, RFC 3720 appendix B.4) of pixel bytes.
func Checksum(data []byte) uint32 { return AddChecksum(0, data) }

// AddChecksum returns the checksum of bytes whose checksum is sum, followed by data.
func AddChecksum(sum uint32, data []byte) uint32 {
	return crc32.Update(sum, crc32.MakeTable(crc32.Castagnoli), data)
}

// NewFrame puts header and pixel bytes together and checks size and checksum.
func NewFrame(h FrameHeader, data []byte) (Frame, error) {
	return NewSummedFrame(h, data, Checksum(data))
}

// NewSummedFrame is NewFrame for pixel bytes whose checksum is known, as where it was taken
// while they came in.
func NewSummedFrame(h FrameHeader, data []byte, sum uint32) (Frame, error) {
	if err := h.Check(); err != nil {
		return Frame{}, err
	}
	raw := h.raw()
	raw.Data = data
	if err := raw.Check(); err != nil {
		return Frame{}, &Error{Kind: InvalidKind, Err: err}
	}
	if sum != h.CRC32C {
		return Frame{}, Invalid("crc32c: got 0x%08x over the pixels received, header says 0x%08x; resend the frame", sum, h.CRC32C)
	}
	return Frame{Header: h, Raw: raw}, nil
}

// Digest returns a hash over the checksums of all frames of a showing, whatever the
// order in which its views came.
func Digest(views []View) string {
	var lines []string
	for _, v := range views {
		for _, f := range v.Frames {
			lines = append(lines, fmt.Sprintf("%s %d %08x %d", v.Name, f.Header.Index, f.Header.CRC32C, len(f.Raw.Data)))
		}
	}
	sort.Strings(lines)
	h := sha256.New()
	for _, l := range lines {
		fmt.Fprintln(h, l)
	}
	return hex.EncodeToString(h.Sum(nil)[:16])
}
