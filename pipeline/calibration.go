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

	// What follows is there only where its frames were taken.
	Distortion   *Distortion
	Sizing       *Sizing
	Sensor       *SensorTemperature
	Reference    *ReferencePatch
	PartEdge     *PartEdge
	FixedPattern []PatternPixel
}

// SensorTemperature is what the frames of a calibration said of their camera.
type SensorTemperature struct {
	MeanC  float64 `json:"mean_c"` // °C
	LowC   float64 `json:"low_c"`
	HighC  float64 `json:"high_c"`
	Frames int     `json:"frames"` // that said it
}

// ReferencePatch is a diffuse patch that the lamp lights in every frame.
type ReferencePatch struct {
	Box      Box     `json:"box"`
	LevelDN  float64 `json:"level_dn"`  // mean above dark over the patch's good pixels
	SpreadDN float64 `json:"spread_dn"` // standard deviation of that from frame to frame
	Frames   int     `json:"frames"`    // from which it was taken
}

// PartEdge is the outline of a conforming part as the calibrated view shows it.
type PartEdge struct {
	WidthPx    float64 `json:"width_px"` // 10–90 %
	DiameterPx float64 `json:"diameter_px"`
	Frames     int     `json:"frames"`
}

// PatternPixel is a pixel that stands out of its 5 × 5 neighbours: by DarkDN without
// light, and with light by Response times its level.
type PatternPixel struct {
	X        int     `json:"x"`
	Y        int     `json:"y"`
	DarkDN   float64 `json:"dark_dn"`
	Response float64 `json:"response"`
}
