package main

import (
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// plainBlurPx is the sigma of the blur that the plain chain takes for the background, and
// plainK its threshold in robust sigmas of the whole frame.
const (
	plainBlurPx = 24
	plainK      = 6
)

// plainUnits returns how many false defects a plain chain finds on each of the first n
// units that conform: the frame less its blur, everything above 6 robust sigmas of the
// frame, connected. It knows neither calibration nor region.
func (t *trial) plainUnits(n int) ([]float64, error) {
	out := make([]float64, n)
	for i := range n {
		u := t.drawn(i, conformingUnits)
		f, err := t.renderer.Frame(&u, t.view)
		if err != nil {
			return nil, err
		}
		p, err := f.Raw.Plane()
		if err != nil {
			return nil, err
		}
		for _, b := range plainBlobs(p) {
			x0, y0, x1, y1 := boundsOf(b.Spans)
			if !t.onObject(pipeline.Defect{Box: pipeline.Box{X0: x0, Y0: y0, X1: x1, Y1: y1}}, u.Objects) {
				out[i]++
			}
		}
	}
	return out, nil
}

func plainBlobs(p *raster.Plane) []raster.Blob {
	d := raster.NewPlane(p.Width, p.Height)
	raster.Subtract(d, p, blurred(p, plainBlurPx))
	limit := float32(plainK * robustSigma(d.Pix))
	return raster.Label(d, limit, limit)
}

// robustSigma is 1.4826 times the median absolute value.
func robustSigma(v []float32) float64 {
	a := make([]float32, len(v))
	for i, x := range v {
		a[i] = max(x, -x)
	}
	slices.Sort(a)
	return 1.4826 * float64(a[len(a)/2])
}

// blurred returns p under a Gaussian; beyond the frame its edge goes on.
func blurred(p *raster.Plane, sigma float64) *raster.Plane {
	reach := int(3 * sigma)
	kernel, sum := make([]float32, 2*reach+1), float32(0)
	for i := range kernel {
		kernel[i] = float32(math.Exp(-float64((i-reach)*(i-reach)) / (2 * sigma * sigma)))
		sum += kernel[i]
	}
	for i := range kernel {
		kernel[i] /= sum
	}
	rows, out := raster.NewPlane(p.Width, p.Height), raster.NewPlane(p.Width, p.Height)
	for y := range p.Height {
		src, dst := p.Row(y), rows.Row(y)
		for x := range dst {
			for k, w := range kernel {
				dst[x] += w * src[min(max(x+k-reach, 0), p.Width-1)]
			}
		}
	}
	for y := range p.Height {
		dst := out.Row(y)
		for k, w := range kernel {
			for x, v := range rows.Row(min(max(y+k-reach, 0), p.Height-1)) {
				dst[x] += w * v
			}
		}
	}
	return out
}

// boundsOf returns the half-open box of spans that stand row by row from the top.
func boundsOf(spans []raster.Span) (x0, y0, x1, y1 int) {
	x0, y0, x1, y1 = spans[0].X0, spans[0].Y, spans[0].X1, spans[len(spans)-1].Y+1
	for _, s := range spans {
		x0, x1 = min(x0, s.X0), max(x1, s.X1)
	}
	return x0, y0, x1, y1
}
