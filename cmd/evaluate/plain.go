package main

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/cv"
)

// plainK is the threshold of the plain chain, in sigmas of its filtered picture.
const plainK = 6

// plainUnits returns how many false defects a chain of OpenCV functions finds on each of
// the first n units that conform. It knows neither calibration nor region.
func (t *trial) plainUnits(n int) ([]float64, error) {
	c := t.renderer.Scene().Camera
	flat := raster.NewPlane(c.Width, c.Height)
	for i := range flat.Pix {
		flat.Pix[i] = 1
	}
	chain, err := cv.NewTunedChain(raster.NewPlane(c.Width, c.Height), flat, nil, plainK, plainK)
	if err != nil {
		return nil, err
	}
	defer chain.Close()
	out := make([]float64, n)
	for i := range n {
		u := t.drawn(i, conformingUnits)
		f, err := t.renderer.Frame(&u, t.view)
		if err != nil {
			return nil, err
		}
		found, err := chain.Run(f.Raw)
		if err != nil {
			return nil, err
		}
		for _, o := range found {
			if !t.onObject(pipeline.Defect{Box: pipeline.Box{X0: o.X0, Y0: o.Y0, X1: o.X1, Y1: o.Y1}}, u.Objects) {
				out[i]++
			}
		}
	}
	return out, nil
}

// boundsOf returns the half-open box of spans that stand row by row from the top.
func boundsOf(spans []raster.Span) (x0, y0, x1, y1 int) {
	x0, y0, x1, y1 = spans[0].X0, spans[0].Y, spans[0].X1, spans[len(spans)-1].Y+1
	for _, s := range spans {
		x0, x1 = min(x0, s.X0), max(x1, s.X1)
	}
	return x0, y0, x1, y1
}
