package stagepb

import (
	"encoding/json"
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// more is what of a calibration travels as JSON.
type more struct {
	Capture      pipeline.Capture            `json:"capture"`
	Distortion   *pipeline.Distortion        `json:"distortion,omitempty"`
	Sizing       *pipeline.Sizing            `json:"sizing,omitempty"`
	Sensor       *pipeline.SensorTemperature `json:"sensor,omitempty"`
	Reference    *pipeline.ReferencePatch    `json:"reference,omitempty"`
	PartEdge     *pipeline.PartEdge          `json:"part_edge,omitempty"`
	FixedPattern []pipeline.PatternPixel     `json:"fixed_pattern,omitempty"`
}

// FromCalibrations encodes calibrations without their planes and single pixels.
func FromCalibrations(list map[string]*pipeline.Calibration) (map[string]*Calibration, error) {
	var out map[string]*Calibration
	for name, c := range list {
		if c == nil {
			continue
		}
		light := *c
		light.Dark, light.Stray, light.Response, light.BadPixels, light.FixedPattern = nil, nil, nil, nil, nil
		m, err := FromCalibration(&light, InMessage)
		if err != nil {
			return nil, err
		}
		if out == nil {
			out = map[string]*Calibration{}
		}
		out[name] = m
	}
	return out, nil
}

// ToCalibrations decodes calibrations.
func ToCalibrations(list map[string]*Calibration, fetch Fetch) (map[string]*pipeline.Calibration, error) {
	var out map[string]*pipeline.Calibration
	for name, m := range list {
		c, err := ToCalibration(m, fetch)
		if err != nil {
			return nil, fmt.Errorf("view %q: %w", name, err)
		}
		if out == nil {
			out = map[string]*pipeline.Calibration{}
		}
		out[name] = c
	}
	return out, nil
}

// FromCalibration encodes what a stage may know of a calibration; nil is nil.
func FromCalibration(c *pipeline.Calibration, pack Pack) (*Calibration, error) {
	if c == nil {
		return nil, nil
	}
	rest, err := json.Marshal(more{c.Capture, c.Distortion, c.Sizing, c.Sensor, c.Reference, c.PartEdge, c.FixedPattern})
	if err != nil {
		return nil, fmt.Errorf("calibration: %w", err)
	}
	out := &Calibration{Hash: c.Hash, Camera: c.Camera, Light: c.Light, Mode: c.Mode, MoreJson: string(rest), UmPerPx: c.Scale.UMPerPx, UmPerPxUncertainty: c.Scale.UncertaintyUM, GainDnPerE: c.Noise.GainDNPerE, DarkDn: c.Noise.DarkDN,
		BadPixels: each(c.BadPixels, func(p pipeline.PixelAt) *PixelAt { return &PixelAt{X: int32(p.X), Y: int32(p.Y)} })}
	for _, p := range []struct {
		name, unit string
		from       *raster.Plane
		to         **Plane
	}{{"dark", "DN", c.Dark, &out.Dark}, {"stray", "DN", c.Stray, &out.Stray}, {"response", "", c.Response, &out.Response}} {
		if p.from == nil {
			continue
		}
		if *p.to, err = FromPlane(p.name, pipeline.NamedPlane{Unit: p.unit, Pixels: p.from, Step: 1}, pack); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// ToCalibration decodes a calibration; nil is nil. Its planes lie where fetch found them.
func ToCalibration(c *Calibration, fetch Fetch) (*pipeline.Calibration, error) {
	if c == nil {
		return nil, nil
	}
	var m more
	if text := c.GetMoreJson(); text != "" {
		if err := json.Unmarshal([]byte(text), &m); err != nil {
			return nil, fmt.Errorf("calibration: more_json: %w", err)
		}
	}
	out := &pipeline.Calibration{Hash: c.GetHash(), Camera: c.GetCamera(), Light: c.GetLight(), Mode: c.GetMode(),
		Capture: m.Capture, Distortion: m.Distortion, Sizing: m.Sizing, Sensor: m.Sensor, Reference: m.Reference, PartEdge: m.PartEdge, FixedPattern: m.FixedPattern,
		Scale:     pipeline.Scale{UMPerPx: c.GetUmPerPx(), UncertaintyUM: c.GetUmPerPxUncertainty()},
		Noise:     pipeline.NoiseModel{GainDNPerE: c.GetGainDnPerE(), DarkDN: c.GetDarkDn()},
		BadPixels: each(c.GetBadPixels(), func(p *PixelAt) pipeline.PixelAt { return pipeline.PixelAt{X: int(p.GetX()), Y: int(p.GetY())} })}
	for _, p := range []struct {
		from *Plane
		to   **raster.Plane
	}{{c.GetDark(), &out.Dark}, {c.GetStray(), &out.Stray}, {c.GetResponse(), &out.Response}} {
		if p.from == nil {
			continue
		}
		plane, err := ToPlane(p.from, fetch)
		if err != nil {
			return nil, fmt.Errorf("calibration: %w", err)
		}
		*p.to = plane.Pixels
	}
	return out, nil
}
