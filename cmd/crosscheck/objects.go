package main

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/fused"
)

// thing is a connected set of pixels above the low threshold, measured.
type thing struct {
	raster.Blemish
	spans []raster.Span
}

// found is what both ways find in one frame.
type found struct {
	item             *pipeline.Item // with the planes of the reference
	signal, filtered *raster.Plane
	reference, fused []thing
}

// find takes a frame through the reference and through the fused pass.
func (c *chain) find(f pipeline.Frame) (found, error) {
	item, err := c.run(f)
	if err != nil {
		return found{}, err
	}
	mask, snr, noise := item.Region.Mask(), item.Planes[pipeline.SNRPlane].Pixels, item.Planes[pipeline.NoisePlane].Pixels
	out := found{item: item, signal: raster.NewPlane(snr.Width, snr.Height), filtered: raster.NewPlane(snr.Width, snr.Height)}
	raster.Subtract(out.signal, item.Planes[pipeline.CorrectedPlane].Pixels, item.Planes[pipeline.BackgroundPlane].Pixels)
	raster.MatchedFilter(out.filtered, out.signal, mask)
	blobs := raster.Label(snr, kLow, kLow)
	measurer := raster.NewMeasurer(out.signal, noise, mask, blobs)
	for i, b := range blobs {
		out.reference = append(out.reference, thing{measurer.Measure(i), b.Spans})
	}
	out.fused, err = c.pass(f.Raw, item)
	return out, err
}

// pass takes a frame through the fused pass, from its counts.
func (c *chain) pass(raw raster.Raw, item *pipeline.Item) ([]thing, error) {
	if c.correction == nil {
		made, err := fused.NewCorrection(raw.Format, raw.Width, raw.Height, fused.Planes{Dark: c.calibration.Dark, Stray: c.calibration.Stray,
			Response: c.calibration.Response, Bad: item.BadMask})
		if err != nil {
			return nil, err
		}
		c.correction = made
	}
	r, err := c.correction.Find(raw, item.Region.Inside().Spans(), fused.Settings{Low: kLow, High: kLow, Polarity: fused.Bright,
		MinAreaPx: 1, Grid: raster.DefaultGrid(), Bands: 1})
	if err != nil {
		return nil, err
	}
	var out []thing
	for _, b := range r.Blobs {
		out = append(out, thing{b.Blemish, b.Spans})
	}
	return out, nil
}

// object is one connected set of pixels above the low threshold, in objects.json.
type object struct {
	AreaPx     int     `json:"area_px"`
	FilteredX  float64 `json:"filtered_x"` // centre of gravity of the filtered signal over its pixels
	FilteredY  float64 `json:"filtered_y"`
	XPx        float64 `json:"x_px"` // centre as lapgate reports it
	YPx        float64 `json:"y_px"`
	DiameterPx float64 `json:"diameter_px"`
	LengthPx   float64 `json:"length_px"`
	WidthPx    float64 `json:"width_px"`
	PeakSigma  float64 `json:"peak_sigma"`
	PeakX      int     `json:"peak_x"` // where the reference's snr is highest in it
	PeakY      int     `json:"peak_y"`
}

func (f found) objects(list []thing) []object {
	var out []object
	for _, b := range list {
		o := object{AreaPx: b.AreaPx, XPx: b.X, YPx: b.Y, DiameterPx: b.Diameter, LengthPx: b.Length, WidthPx: b.Width, PeakSigma: b.PeakSNR}
		o.FilteredX, o.FilteredY = gravity(f.filtered, b.spans)
		o.PeakX, o.PeakY = highest(f.item.Planes[pipeline.SNRPlane].Pixels, b.spans)
		out = append(out, o)
	}
	return out
}

func gravity(p *raster.Plane, spans []raster.Span) (x, y float64) {
	sum := 0.
	for _, s := range spans {
		for u := s.X0; u < s.X1; u++ {
			v := float64(p.At(u, s.Y))
			sum, x, y = sum+v, x+v*float64(u), y+v*float64(s.Y)
		}
	}
	return x / sum, y / sum
}

func highest(p *raster.Plane, spans []raster.Span) (x, y int) {
	best := float32(0)
	for _, s := range spans {
		for u := s.X0; u < s.X1; u++ {
			if v := p.At(u, s.Y); v > best {
				best, x, y = v, u, s.Y
			}
		}
	}
	return x, y
}
