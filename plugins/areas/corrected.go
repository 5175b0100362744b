package areas

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// corrected returns the corrected counts: the plane of the stage flatfield, or where a
// fused pass wrote none, (raw − dark − stray) / response here. Bad pixels are left as they
// are: the cells leave them out.
func corrected(item *pipeline.Item) (*raster.Plane, error) {
	if p, ok := item.Planes[pipeline.CorrectedPlane]; ok {
		return p.Pixels, nil
	}
	raw, err := item.Raw()
	c := item.Calibration
	if err != nil || c == nil {
		return raw, err
	}
	for _, p := range []*raster.Plane{c.Dark, c.Stray, c.Response} {
		if p != nil && !p.SameSize(raw) {
			return nil, pipeline.Invalid("calibration: got planes of %d × %d px, the frame has %d × %d", p.Width, p.Height, raw.Width, raw.Height)
		}
	}
	out := raster.NewPlane(raw.Width, raw.Height)
	for y := range raw.Height {
		correctRow(out.Row(y), raw.Row(y), c, y)
	}
	return out, nil
}

func correctRow(dst, raw []float32, c *pipeline.Calibration, y int) {
	copy(dst, raw)
	for _, p := range []*raster.Plane{c.Dark, c.Stray} {
		if p == nil {
			continue
		}
		for x, v := range p.Row(y) {
			dst[x] -= v
		}
	}
	if c.Response == nil {
		return
	}
	for x, r := range c.Response.Row(y) {
		if r > 0 {
			dst[x] /= r
		}
	}
}
