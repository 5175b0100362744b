package calibrate

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// FormatVersion is the version of the folder that is written, and the only one read.
const FormatVersion = 1

// document is calibration.json.
type document struct {
	Format      int    `json:"format"`
	Hash        string `json:"hash"` // sha256 of this document with an empty hash
	Camera      string `json:"camera"`
	Light       string `json:"light"`
	Mode        string `json:"mode"`
	MadeAt      string `json:"made_at"`
	PixelFormat string `json:"pixel_format"`
	Width       int    `json:"width"`
	Height      int    `json:"height"`
	settings
	UMPerPx       float64      `json:"um_per_px"`
	UncertaintyUM float64      `json:"um_per_px_uncertainty"` // standard uncertainty; 0 = not stated
	ScaleSource   string       `json:"scale_source"`
	GainDNPerE    float64      `json:"system_gain_dn_per_e"` // 0 = unknown
	DarkNoiseDN   float64      `json:"dark_noise_dn"`
	DarkNoiseE    float64      `json:"dark_noise_e"` // from the two above, for the reader
	Planes        []planeEntry `json:"planes"`
	BadPixels     [][2]int     `json:"bad_pixels"` // x, y
	Provenance    Provenance   `json:"provenance"`

	Distortion   *pipeline.Distortion        `json:"distortion,omitempty"`
	Sizing       *pipeline.Sizing            `json:"sizing,omitempty"`
	Sensor       *pipeline.SensorTemperature `json:"sensor_temperature,omitempty"`
	Reference    *pipeline.ReferencePatch    `json:"reference_patch,omitempty"`
	PartEdge     *pipeline.PartEdge          `json:"part_edge,omitempty"`
	FixedPattern []pipeline.PatternPixel     `json:"fixed_pattern,omitempty"`
}

// planeEntry names a file of little-endian float32, row by row without gaps.
type planeEntry struct {
	Name   string `json:"name"` // dark, stray or response
	File   string `json:"file"`
	Unit   string `json:"unit"`
	SHA256 string `json:"sha256"`
	plane  *raster.Plane
}

func documentOf(m Made) document {
	c := m.Calibration
	d := document{
		Format: FormatVersion, Camera: c.Camera, Light: c.Light, Mode: c.Mode, MadeAt: c.MadeAt,
		PixelFormat: c.Capture.Format.String(), Width: c.Capture.Width, Height: c.Capture.Height,
		settings: settingsOf(c.Capture),
		UMPerPx:  c.Scale.UMPerPx, UncertaintyUM: c.Scale.UncertaintyUM, ScaleSource: c.Scale.Source,
		GainDNPerE: c.Noise.GainDNPerE, DarkNoiseDN: c.Noise.DarkDN, DarkNoiseE: DarkNoiseE(c.Noise),
		BadPixels: [][2]int{}, Provenance: m.Provenance,
		Distortion: c.Distortion, Sizing: c.Sizing, Sensor: c.Sensor, Reference: c.Reference, PartEdge: c.PartEdge, FixedPattern: c.FixedPattern,
	}
	for _, p := range []planeEntry{
		{Name: "dark", Unit: "DN", plane: c.Dark}, {Name: "stray", Unit: "DN", plane: c.Stray}, {Name: "response", Unit: "1", plane: c.Response},
	} {
		if p.plane != nil {
			p.File = p.Name + ".f32"
			sum := sha256.Sum256(planeBytes(p.plane))
			p.SHA256 = hex.EncodeToString(sum[:])
			d.Planes = append(d.Planes, p)
		}
	}
	for _, b := range c.BadPixels {
		d.BadPixels = append(d.BadPixels, [2]int{b.X, b.Y})
	}
	return d
}

// hash returns "sha256:…" over the JSON of the document with an empty hash. The planes
// are in it by their own sums; previews are not content.
func (d document) hash() (string, error) {
	d.Hash = ""
	text, err := json.Marshal(d)
	if err != nil {
		return "", fmt.Errorf("calibration: %w", err)
	}
	sum := sha256.Sum256(text)
	return "sha256:" + hex.EncodeToString(sum[:]), nil
}

func hashOf(m Made) (string, error) { return documentOf(m).hash() }

// calibration returns what the document says; the planes are read after it.
func (d document) calibration() (*pipeline.Calibration, error) {
	f, err := raster.ParsePixelFormat(d.PixelFormat)
	if err != nil {
		return nil, err
	}
	c := &pipeline.Calibration{
		Camera: d.Camera, Light: d.Light, Mode: d.Mode, Hash: d.Hash, MadeAt: d.MadeAt,
		Capture: d.onto(pipeline.Capture{Format: f, Width: d.Width, Height: d.Height}),
		Noise:   pipeline.NoiseModel{GainDNPerE: d.GainDNPerE, DarkDN: d.DarkNoiseDN},
		Scale:   pipeline.Scale{UMPerPx: d.UMPerPx, UncertaintyUM: d.UncertaintyUM, Source: d.ScaleSource},

		Distortion: d.Distortion, Sizing: d.Sizing, Sensor: d.Sensor, Reference: d.Reference, PartEdge: d.PartEdge, FixedPattern: d.FixedPattern,
	}
	if c.Distortion != nil {
		if err := c.Distortion.Check(math.Hypot(float64(d.Width), float64(d.Height)) / 2); err != nil {
			return nil, err
		}
	}
	for _, b := range d.BadPixels {
		if b[0] < 0 || b[0] >= d.Width || b[1] < 0 || b[1] >= d.Height {
			return nil, pipeline.Invalid("bad_pixels: got (%d, %d), want a pixel of %d × %d", b[0], b[1], d.Width, d.Height)
		}
		c.BadPixels = append(c.BadPixels, pipeline.PixelAt{X: b[0], Y: b[1]})
	}
	return c, raster.Raw{Format: f, Width: d.Width, Height: d.Height, Stride: f.RowBytes(d.Width)}.CheckDimensions()
}

func parseDocument(text []byte) (document, error) {
	var head struct {
		Format int `json:"format"`
	}
	if err := json.Unmarshal(text, &head); err != nil {
		return document{}, err
	}
	if head.Format != FormatVersion {
		return document{}, pipeline.Invalid("format: got %d, want %d: use a program of the same age, or calibrate again", head.Format, FormatVersion)
	}
	var d document
	in := json.NewDecoder(bytes.NewReader(text))
	in.DisallowUnknownFields()
	if err := in.Decode(&d); err != nil {
		return d, err
	}
	want, err := d.hash()
	if err == nil && want != d.Hash {
		err = pipeline.Invalid("hash: got %s, want %s over the content: it was changed since it was made; calibrate again", d.Hash, want)
	}
	return d, err
}

func planeBytes(p *raster.Plane) []byte {
	out := make([]byte, 0, 4*p.Width*p.Height)
	for y := range p.Height {
		for _, v := range p.Row(y) {
			out = binary.LittleEndian.AppendUint32(out, math.Float32bits(v))
		}
	}
	return out
}

// planeOf turns bytes into a plane and refuses what is not finite or, where it is
// divided by, not above zero.
func planeOf(data []byte, width, height int, divided bool) (*raster.Plane, error) {
	p := raster.NewPlane(width, height)
	for i := range p.Pix {
		v := math.Float32frombits(binary.LittleEndian.Uint32(data[4*i:]))
		if f := float64(v); math.IsNaN(f) || math.IsInf(f, 0) || divided && v <= 0 {
			return nil, pipeline.Invalid("value %g at pixel (%d, %d), want a finite number, and above 0 in a response", f, i%width, i/width)
		}
		p.Pix[i] = v
	}
	return p, nil
}
