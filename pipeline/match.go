package pipeline

import "math"

// exposureTolerance is the relative difference of two exposures that are the same
// setting: cameras round to their line time.
const exposureTolerance = 1e-3

// Match refuses a frame that was not taken as the calibration was: camera (where both
// name one), size, significant bits, gain, black level, offset, binning and exposure
// (within 0.1 %). The packing may differ, for the counts are the same. The error names
// field, got and wanted.
func (c *Calibration) Match(h FrameHeader) error {
	if h.CameraID != "" && c.Camera != "" && h.CameraID != c.Camera {
		return Invalid("camera: got %s, want %s as calibrated", h.CameraID, c.Camera)
	}
	return MatchCapture(c.Capture, h.Capture)
}

// MatchCapture refuses camera settings that are not those wanted; the error names the
// field.
func MatchCapture(want, got Capture) error {
	switch {
	case got.Width != want.Width || got.Height != want.Height:
		return Invalid("size: got %d × %d pixels, want %d × %d", got.Width, got.Height, want.Width, want.Height)
	case got.Format.SignificantBits() != want.Format.SignificantBits():
		return Invalid("pixel_format: got %s (%d bits), want %s (%d bits)",
			got.Format, got.Format.SignificantBits(), want.Format, want.Format.SignificantBits())
	case got.OffsetX != want.OffsetX || got.OffsetY != want.OffsetY:
		return Invalid("offset: got (%d, %d), want (%d, %d)", got.OffsetX, got.OffsetY, want.OffsetX, want.OffsetY)
	case max(got.BinningX, 1) != max(want.BinningX, 1) || max(got.BinningY, 1) != max(want.BinningY, 1):
		return Invalid("binning: got %d × %d, want %d × %d",
			max(got.BinningX, 1), max(got.BinningY, 1), max(want.BinningX, 1), max(want.BinningY, 1))
	case !(math.Abs(got.ExposureUS-want.ExposureUS) <= exposureTolerance*want.ExposureUS):
		return Invalid("exposure_us: got %g, want %g", got.ExposureUS, want.ExposureUS)
	}
	return matchSignal(want, got)
}

// matchSignal compares what cameras round to steps of about 0.01.
func matchSignal(want, got Capture) error {
	const step = 0.005
	if !(math.Abs(got.GainDB-want.GainDB) <= step) {
		return Invalid("gain_db: got %g, want %g", got.GainDB, want.GainDB)
	}
	if !(math.Abs(got.BlackLevel-want.BlackLevel) <= step) {
		return Invalid("black_level: got %g, want %g", got.BlackLevel, want.BlackLevel)
	}
	return nil
}
