package stagepb

import (
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// FromCalibration encodes what a stage may know of a calibration; nil is nil.
func FromCalibration(c *pipeline.Calibration, pack Pack) (*Calibration, error) {
	if c == nil {
		return nil, nil
	}
	out := &Calibration{Hash: c.Hash, UmPerPx: c.Scale.UMPerPx, UmPerPxUncertainty: c.Scale.UncertaintyUM, GainDnPerE: c.Noise.GainDNPerE, DarkDn: c.Noise.DarkDN,
		BadPixels: each(c.BadPixels, func(p pipeline.PixelAt) *PixelAt { return &PixelAt{X: int32(p.X), Y: int32(p.Y)} })}
	for _, p := range []struct {
		name, unit string
		from       *raster.Plane
		to         **Plane
	}{{"dark", "DN", c.Dark, &out.Dark}, {"stray", "DN", c.Stray, &out.Stray}, {"response", "", c.Response, &out.Response}} {
		if p.from == nil {
			continue
		}
		var err error
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
	out := &pipeline.Calibration{Hash: c.GetHash(), Scale: pipeline.Scale{UMPerPx: c.GetUmPerPx(), UncertaintyUM: c.GetUmPerPxUncertainty()},
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
