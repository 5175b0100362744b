package stagepb

import (
	"fmt"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// FromFrame encodes a frame, without what names the unit and the request.
func FromFrame(f pipeline.Frame, pack Pack) (*Frame, error) {
	pixels, err := pack(f.Raw.Data)
	h := f.Header
	out := &Frame{PixelFormat: uint32(f.Raw.Format), Width: int32(f.Raw.Width), Height: int32(f.Raw.Height), Stride: int32(f.Raw.Stride),
		ExposureUs: h.ExposureUS, GainDb: h.GainDB, BlackLevel: h.BlackLevel, Index: int32(h.Index), Tags: h.Tags,
		CameraId: h.CameraID, FrameCounter: h.FrameCounter, SensorC: h.SensorC, OffsetX: int32(h.OffsetX), OffsetY: int32(h.OffsetY),
		BinningX: int32(h.BinningX), BinningY: int32(h.BinningY), Pixels: pixels}
	if !h.Captured.IsZero() {
		out.CapturedUnixNs = h.Captured.UnixNano()
	}
	return out, err
}

// ToFrame decodes a frame and checks its size.
func ToFrame(f *Frame, fetch Fetch) (pipeline.Frame, error) {
	raw := raster.Raw{Format: raster.PixelFormat(f.GetPixelFormat()), Width: int(f.GetWidth()), Height: int(f.GetHeight()), Stride: int(f.GetStride())}
	var err error
	if raw.Data, err = fetch(f.GetPixels()); err == nil {
		err = raw.Check()
	}
	if err != nil {
		return pipeline.Frame{}, fmt.Errorf("frame %d: %w", f.GetIndex(), err)
	}
	h := pipeline.FrameHeader{Tags: f.GetTags(), Index: int(f.GetIndex()), Stride: raw.Stride, Capture: pipeline.Capture{Format: raw.Format, Width: raw.Width, Height: raw.Height,
		ExposureUS: f.GetExposureUs(), GainDB: f.GetGainDb(), BlackLevel: f.GetBlackLevel(),
		OffsetX: int(f.GetOffsetX()), OffsetY: int(f.GetOffsetY()), BinningX: int(f.GetBinningX()), BinningY: int(f.GetBinningY())},
		CameraID: f.GetCameraId(), FrameCounter: f.GetFrameCounter(), SensorC: f.SensorC}
	if ns := f.GetCapturedUnixNs(); ns != 0 {
		h.Captured = time.Unix(0, ns).UTC()
	}
	return pipeline.Frame{Header: h, Raw: raw}, nil
}
