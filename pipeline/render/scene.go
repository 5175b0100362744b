package render

import (
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Format is the version of the scene file that this package reads.
const Format = 1

// Scene is a scene file: everything a run of rendered units depends on. Equal scenes
// give equal bytes.
type Scene struct {
	Format         int               `yaml:"format"` // 1; 0 = the reader of the file has checked it
	Seed           uint64            `yaml:"seed"`
	Start          string            `yaml:"start"`            // RFC 3339; capture of each line's first unit
	SecondsPerUnit float64           `yaml:"seconds_per_unit"` // between two units of one line
	Units          int               `yaml:"units"`
	UnitsPerLot    int               `yaml:"units_per_lot"` // a lot is one process on one line
	SerialPattern  string            `yaml:"serial_pattern"`
	LotPattern     string            `yaml:"lot_pattern"`
	Part           Part              `yaml:"part"`
	Camera         Camera            `yaml:"camera"`
	Lamp           Lamp              `yaml:"lamp"`
	Reference      Reference         `yaml:"reference"`
	Views          []View            `yaml:"views"`
	Lines          []Line            `yaml:"lines"`
	Processes      []Process         `yaml:"processes"`
	Limits         Limits            `yaml:"limits"`
	Calibration    CalibrationFrames `yaml:"calibration"`
	Spoilers       []Spoiler         `yaml:"spoilers"`
}

// Part is the article: a flat round disc.
type Part struct {
	Number          string  `yaml:"number"`
	Revision        string  `yaml:"revision"`
	Surface         string  `yaml:"surface"`
	DiameterMM      float64 `yaml:"diameter_mm"`
	ClearApertureMM float64 `yaml:"clear_aperture_mm"` // diameter in which limits hold and defects lie
	MaxShiftPx      float64 `yaml:"max_shift_px"`      // of the part's centre from the frame's, each way
	Turned          bool    `yaml:"turned"`            // each unit lies at an angle of its own
	Notch           Notch   `yaml:"notch"`             // a datum in the edge
}

// Camera is the sensor with its optics. One camera, with one fixed pattern, serves
// every line of a scene.
type Camera struct {
	ID             string       `yaml:"id"`
	Width          int          `yaml:"width"`
	Height         int          `yaml:"height"`
	UMPerPx        float64      `yaml:"um_per_px"`
	PixelFormat    string       `yaml:"pixel_format"` // PFNC name, such as Mono8
	ExposureUS     float64      `yaml:"exposure_us"`
	GainDB         float64      `yaml:"gain_db"`
	BlackLevelDN   float64      `yaml:"black_level_dn"`
	GainDNPerE     float64      `yaml:"gain_dn_per_e"`   // system gain K
	DarkNoiseE     float64      `yaml:"dark_noise_e"`    // σ_d, electrons
	ResponseSpread float64      `yaml:"response_spread"` // relative standard deviation of the pixel gain
	DarkSpreadDN   float64      `yaml:"dark_spread_dn"`  // standard deviation of the dark offset
	HotPixels      int          `yaml:"hot_pixels"`
	HotPixelDN     Distribution `yaml:"hot_pixel_dn"` // above the black level
	DeadPixels     int          `yaml:"dead_pixels"`  // they see no light
	BlurPx         float64      `yaml:"blur_px"`      // sigma of the Gaussian point spread
}

// Lamp is the range of lamp power, 1 = nominal; each unit's is drawn uniformly.
type Lamp struct {
	MinPower float64 `yaml:"min_power"`
	MaxPower float64 `yaml:"max_power"`
}

// Reference is a diffuse patch that every lamp lights, as a pixel rectangle. Zero
// width = none. A view says how bright it is.
type Reference struct {
	XPx      int `yaml:"x_px"`
	YPx      int `yaml:"y_px"`
	WidthPx  int `yaml:"width_px"`
	HeightPx int `yaml:"height_px"`
}

// The lights.
const (
	LightRing = "ring" // dark field from all sides
	LightBar  = "bar"  // dark field from one side
	LightBack = "back" // from behind: the part is a silhouette
)

// View is what the camera sees under one light.
type View struct {
	Name              string  `yaml:"name"`
	Light             string  `yaml:"light"`
	AzimuthDeg        float64 `yaml:"azimuth_deg"`        // bar: where the light comes from, +x towards +y in pixels
	DirectionExponent int     `yaml:"direction_exponent"` // bar: even; a scratch scatters by |cos|^this of its normal to the light
	DirectionFloor    float64 `yaml:"direction_floor"`    // bar: share that scatters whatever the direction
	Strength          float64 `yaml:"strength"`           // of everything on the part, relative to the scene's DN; 0 is read as 1
	LevelDN           float64 `yaml:"level_dn"`           // back: the bright field
	FixtureDN         float64 `yaml:"fixture_dn"`         // the nest around the part
	StrayDN           float64 `yaml:"stray_dn"`           // mean; it falls from the left to the right
	ReferenceDN       float64 `yaml:"reference_dn"`       // the reference patch
	Vignetting        float64 `yaml:"vignetting"`         // share of light lost in the far corner
	VignettingXPx     float64 `yaml:"vignetting_x_px"`    // of its centre from the frame's
	VignettingYPx     float64 `yaml:"vignetting_y_px"`
	ResponseDN        float64 `yaml:"response_dn"` // the diffuser of response frames, at its brightest
	RotationDeg       float64 `yaml:"rotation_deg"`
	Mirror            bool    `yaml:"mirror"`
}

// Line is one line with one station.
type Line struct {
	Name         string  `yaml:"name"`
	Station      string  `yaml:"station"`
	DefectFactor float64 `yaml:"defect_factor"` // multiplies the numbers of all populations; 0 is read as 1
}

// Process is one way of making the part, and the surfaces it gives.
type Process struct {
	Name           string       `yaml:"name"`
	Share          float64      `yaml:"share"` // of the lots; shares are relative to each other
	HazeDN         Distribution `yaml:"haze_dn"`
	HazeTexture    float64      `yaml:"haze_texture"`     // relative standard deviation of the slow texture
	TextureScalePx float64      `yaml:"texture_scale_px"` // 0 is read as 128
	Lay            Lay          `yaml:"lay"`
	RimDN          float64      `yaml:"rim_dn"` // brightest, on the edge itself
	RimWidthUM     float64      `yaml:"rim_width_um"`
	Populations    []Population `yaml:"populations"`
}

// The lays.
const (
	LayNone       = "none"
	LayConcentric = "concentric"
	LayStraight   = "straight"
)

// Lay is the fine texture that a process leaves.
type Lay struct {
	Pattern     string       `yaml:"pattern"` // none, concentric or straight; empty = none
	PeriodUM    float64      `yaml:"period_um"`
	AmplitudeDN Distribution `yaml:"amplitude_dn"` // root mean square, before blur
}

// Limits are what the truth calls conforming, inside the clear aperture but for chips.
// Zero = no limit.
type Limits struct {
	DigDiameterUM   float64 `yaml:"dig_diameter_um"`
	DigAreaUM2      float64 `yaml:"dig_area_um2"` // sum over all digs
	ScratchWidthUM  float64 `yaml:"scratch_width_um"`
	ScratchLengthUM float64 `yaml:"scratch_length_um"`
	StainDiameterUM float64 `yaml:"stain_diameter_um"`
	EdgeChipUM      float64 `yaml:"edge_chip_um"` // inwards from the edge
}

// CalibrationFrames is how many calibration frames there are per view.
type CalibrationFrames struct {
	Dark     int      `yaml:"dark"`
	Stray    int      `yaml:"stray"`
	Response int      `yaml:"response"`
	Part     int      `yaml:"part"`    // of a part without a defect, for focus and scale
	Targets  []Target `yaml:"targets"` // plates with dots, for scale, distortion and sizing
}

// format returns the pixel format; Check has refused unknown names before.
func (c Camera) format() raster.PixelFormat {
	f, _ := raster.ParsePixelFormat(c.PixelFormat)
	return f
}

func (s Scene) start() time.Time {
	t, _ := time.Parse(time.RFC3339, s.Start) // Check has parsed it before
	return t.UTC()
}

// geometry returns the mapping of a view with the part's centre at the pixel given.
func (s Scene) geometry(v View, x, y float64) pipeline.Geometry {
	return pipeline.Planar{UMPerPx: s.Camera.UMPerPx, RotationDeg: v.RotationDeg, Mirror: v.Mirror}.WithOrigin(x, y)
}

func (v View) strength() float64 {
	if v.Strength == 0 {
		return 1
	}
	return v.Strength
}
