package inspectpb

import (
	"maps"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// FromIdentity encodes an identity.
func FromIdentity(id pipeline.Identity) *Identity {
	return &Identity{
		Part: id.Part, Revision: id.Revision, Surface: id.Surface, Process: id.Process, Lot: id.Lot, Unit: id.Unit,
		Line: id.Line, Station: id.Station, Attempt: clamp32(id.Attempt), Purpose: FromPurpose(id.Purpose),
	}
}

// ToIdentity decodes an identity. It refuses a missing one and an unknown purpose; an
// empty unit and attempt 0, which ask the server for one, pass.
func ToIdentity(id *Identity) (pipeline.Identity, error) {
	if id == nil {
		return pipeline.Identity{}, pipeline.Invalid("identity: not given, want at least part, line, station and purpose")
	}
	purpose, err := ToPurpose(id.Purpose)
	if err != nil {
		return pipeline.Identity{}, err
	}
	return pipeline.Identity{
		Part: id.Part, Revision: id.Revision, Surface: id.Surface, Process: id.Process, Lot: id.Lot, Unit: id.Unit,
		Line: id.Line, Station: id.Station, Attempt: int(id.Attempt), Purpose: purpose,
	}, nil
}

// FromFrameHeader encodes a header.
func FromFrameHeader(h pipeline.FrameHeader) *FrameHeader {
	return &FrameHeader{
		Identity: FromIdentity(h.Identity), Tags: maps.Clone(h.Tags), View: h.View,
		Index: clamp32(h.Index), Count: clamp32(h.Count), CameraId: h.CameraID,
		PixelFormat: uint32(h.Format), Width: clamp32(h.Width), Height: clamp32(h.Height), Stride: clamp32(h.Stride),
		ExposureUs: h.ExposureUS, GainDb: h.GainDB, BlackLevel: h.BlackLevel,
		OffsetX: clamp32(h.OffsetX), OffsetY: clamp32(h.OffsetY), BinningX: clamp32(h.BinningX), BinningY: clamp32(h.BinningY),
		FrameCounter: h.FrameCounter, Captured: FromTime(h.Captured), Crc32C: h.CRC32C, RequestId: h.RequestID,
		AnswerWithinMs: clamp32(h.AnswerWithinMS), SensorC: clonePointer(h.SensorC), Spooled: h.Spooled,
	}
}

// ToFrameHeader decodes a header. It refuses what cannot be decoded and numbers that
// are not finite; whether the rest can be true is for FrameHeader.Check.
func ToFrameHeader(h *FrameHeader) (pipeline.FrameHeader, error) {
	if h == nil {
		return pipeline.FrameHeader{}, pipeline.Invalid("header: not given, want the frame's header before its pixels")
	}
	id, err := ToIdentity(h.Identity)
	if err != nil {
		return pipeline.FrameHeader{}, err
	}
	captured, err := ToTime("captured", h.Captured)
	if err != nil {
		return pipeline.FrameHeader{}, err
	}
	return pipeline.FrameHeader{
		Identity: id, Capture: capture(h), Tags: maps.Clone(h.Tags), View: h.View,
		Index: int(h.Index), Count: int(h.Count), CameraID: h.CameraId, Stride: int(h.Stride),
		FrameCounter: h.FrameCounter, SensorC: clonePointer(h.SensorC), Captured: captured, CRC32C: h.Crc32C,
		RequestID: h.RequestId, AnswerWithinMS: int(h.AnswerWithinMs), Spooled: h.Spooled,
	}, finite(h)
}

func capture(h *FrameHeader) pipeline.Capture {
	return pipeline.Capture{
		Format: raster.PixelFormat(h.PixelFormat), Width: int(h.Width), Height: int(h.Height),
		ExposureUS: h.ExposureUs, GainDB: h.GainDb, BlackLevel: h.BlackLevel,
		OffsetX: int(h.OffsetX), OffsetY: int(h.OffsetY), BinningX: int(h.BinningX), BinningY: int(h.BinningY),
	}
}

// finite refuses numbers that would compare as equal to every calibration.
func finite(h *FrameHeader) error {
	for _, n := range []struct {
		field string
		value float64
	}{
		{"exposure_us", h.ExposureUs}, {"gain_db", h.GainDb}, {"black_level", h.BlackLevel}, {"sensor_c", h.GetSensorC()},
	} {
		if math.IsNaN(n.value) || math.IsInf(n.value, 0) {
			return pipeline.Invalid("%s: got %g, want a finite number", n.field, n.value)
		}
	}
	return nil
}

func clonePointer(p *float64) *float64 {
	if p == nil {
		return nil
	}
	v := *p
	return &v
}
