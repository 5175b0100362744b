package pipeline

import "lapgate/pipeline/raster"

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
