package pipeline

import (
	"math"

	"lapgate/pipeline/raster"
)

// NoiseModel gives the temporal noise of a pixel: variance in DN² at a mean of y DN
// above dark = DarkDN² + GainDNPerE·y (EMVA Standard 1288, linear model; the
// quantisation noise is part of DarkDN).
type NoiseModel struct {
	GainDNPerE float64 `json:"gain_dn_per_e"` // system gain K, DN per electron; 0 = unknown
	DarkDN     float64 `json:"dark_dn"`       // standard deviation of one dark pixel in DN
}

// Scale is how large a pixel is on the part, and how that is known.
type Scale struct {
	UMPerPx       float64 `json:"um_per_px"`
	UncertaintyUM float64 `json:"uncertainty_um"` // standard uncertainty per px; 0 = not stated
	Source        string  `json:"source"`         // "stated", or serial and date of the target's certificate
}

// PixelAt is a pixel by column and row.
type PixelAt struct{ X, Y int }

// Calibration is the set for one camera, light and mode. Corrected counts are
// (raw − dark − stray) / response. Planes are never changed after loading.
type Calibration struct {
	Camera, Light, Mode string
	Hash                string // sha256 of its content
	Capture             Capture
	Dark                *raster.Plane // DN; lamp off
	Stray               *raster.Plane // DN; nil = none was taken
	Response            *raster.Plane // gain and light fall-off, mean 1 over good pixels; nil = none was taken
	BadPixels           []PixelAt
	Noise               NoiseModel
	Scale               Scale
	MadeAt              string // RFC 3339
}

// Match refuses a frame that was not taken as the calibration was; the error names
// the field, what the frame has and what the calibration has.
func (c *Calibration) Match(f Capture) error {
	want := c.Capture
	switch {
	case f.Format != want.Format:
		return Invalid("pixel_format: frame has %s, calibration has %s", f.Format, want.Format)
	case f.Width != want.Width || f.Height != want.Height:
		return Invalid("size: frame has %d × %d px, calibration has %d × %d", f.Width, f.Height, want.Width, want.Height)
	case f.OffsetX != want.OffsetX || f.OffsetY != want.OffsetY:
		return Invalid("offset: frame has (%d, %d) px, calibration has (%d, %d)", f.OffsetX, f.OffsetY, want.OffsetX, want.OffsetY)
	case max(f.BinningX, 1) != max(want.BinningX, 1) || max(f.BinningY, 1) != max(want.BinningY, 1):
		return Invalid("binning: frame has %d × %d, calibration has %d × %d", max(f.BinningX, 1), max(f.BinningY, 1), max(want.BinningX, 1), max(want.BinningY, 1))
	}
	return matchNumbers(f, want)
}

// captureTolerance is the relative difference up to which two camera settings are
// the same number, written by two programs.
const captureTolerance = 1e-6

func matchNumbers(f, want Capture) error {
	numbers := []struct {
		name, unit string
		got, want  float64
	}{
		{"exposure_us", "µs", f.ExposureUS, want.ExposureUS},
		{"gain_db", "dB", f.GainDB, want.GainDB},
		{"black_level", "DN", f.BlackLevel, want.BlackLevel},
	}
	for _, n := range numbers {
		if math.Abs(n.got-n.want) > captureTolerance*max(math.Abs(n.want), 1) {
			return Invalid("%s: frame has %g %s, calibration has %g", n.name, n.got, n.unit, n.want)
		}
	}
	return nil
}
