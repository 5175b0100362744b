package main

import (
	"fmt"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"io"
	"math"
	"slices"

	"golang.org/x/image/font"
	"golang.org/x/image/font/basicfont"
	"golang.org/x/image/math/fixed"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// leastSide is the longer side that a picture has at least, px; smaller planes are shown
// with each of their pixels as a square.
const leastSide = 480

// enlargement returns how many times larger a plane is shown.
func enlargement(width, height int) int {
	return max((leastSide+max(width, height)-1)/max(width, height), 1)
}

// enlarged repeats each pixel k times along and across.
func enlarged(p *raster.Plane, k int) *raster.Plane {
	if k == 1 {
		return p
	}
	out := raster.NewPlane(k*p.Width, k*p.Height)
	for y := range out.Height {
		row, from := out.Row(y), p.Row(y/k)
		for x := range row {
			row[x] = from[x/k]
		}
	}
	return out
}

// enlargedRegion is the region of a frame that is shown enlarged; nil is nil.
func enlargedRegion(r *pipeline.Region, k int) *pipeline.Region {
	if r == nil || k == 1 {
		return r
	}
	var zones []pipeline.Zone
	for _, z := range r.Zones {
		big := pipeline.Zone{Name: z.Name}
		for _, s := range z.Spans {
			for y := range k {
				big.Spans = append(big.Spans, raster.Span{Y: k*s.Y + y, X0: k * s.X0, X1: k * s.X1})
			}
		}
		zones = append(zones, big)
	}
	m := r.Mask()
	return pipeline.NewRegion(k*m.Width, k*m.Height, 0, 0, 0, zones)
}

func enlargedDefects(list []pipeline.Defect, k int) []pipeline.Defect {
	out := slices.Clone(list)
	for i := range out {
		b := &out[i].Box
		b.X0, b.Y0, b.X1, b.Y1 = k*b.X0, k*b.Y0, k*b.X1, k*b.Y1
	}
	return out
}

// keyHeight is the strip below a plane that says what its greys mean, px.
const keyHeight = 22

// writePlane writes a plane as a PNG, black to white from its 0.5 to its 99.9 percentile,
// above a key of name, levels and unit.
func writePlane(w io.Writer, name string, p pipeline.NamedPlane) error {
	k := enlargement(p.Pixels.Width, p.Pixels.Height)
	big := enlarged(p.Pixels, k)
	low, high := levels(p.Pixels)
	img := image.NewGray(image.Rect(0, 0, big.Width, big.Height+keyHeight))
	for y := range big.Height {
		for x, v := range big.Row(y) {
			img.SetGray(x, y, color.Gray{grey(v, low, high)})
		}
	}
	const bar = 100
	for x := range bar {
		for y := range keyHeight - 8 {
			img.SetGray(6+x, big.Height+4+y, color.Gray{uint8(255 * x / bar)})
		}
	}
	text := fmt.Sprintf("%.4g to %.4g %s  %s", low, high, p.Unit, name)
	(&font.Drawer{Dst: img, Src: image.NewUniform(color.Gray{220}), Face: basicfont.Face7x13, Dot: fixed.P(bar+14, big.Height+15)}).DrawString(text)
	draw.Draw(img, image.Rect(0, big.Height, big.Width, big.Height+1), image.NewUniform(color.Gray{128}), image.Point{}, draw.Src)
	return png.Encode(w, img)
}

func grey(v, low, high float32) uint8 {
	return uint8(255 * min(max((v-low)/(high-low), 0), 1))
}

// levels are the 0.5 and 99.9 percentiles of the pixels; of a plane of one value, that
// value and a little above it.
func levels(p *raster.Plane) (low, high float32) {
	var all []float32
	for y := range p.Height {
		all = append(all, p.Row(y)...)
	}
	slices.Sort(all)
	low, high = all[len(all)*5/1000], all[len(all)-1-len(all)/1000]
	return low, max(high, low+max(1e-6, 1e-6*float32(math.Abs(float64(low)))))
}
