package region

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"image/color"
	"image/png"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// readMask reads a PNG and returns its SHA-256 too.
func readMask(name string, read func(string) ([]byte, error)) (*raster.Mask, string, error) {
	if read == nil {
		return nil, "", pipeline.Invalid("mask_file: got %q, but no files can be read here", name)
	}
	data, err := read(name)
	if err != nil {
		return nil, "", pipeline.Invalid("mask_file %s: %v", name, err)
	}
	mask, err := decodeMask(name, data)
	sum := sha256.Sum256(data)
	return mask, hex.EncodeToString(sum[:]), err
}

// decodeMask puts the pixels that are not black (and not transparent) inside.
func decodeMask(name string, data []byte) (*raster.Mask, error) {
	config, err := png.DecodeConfig(bytes.NewReader(data))
	if err != nil {
		return nil, pipeline.Invalid("mask_file %s: want a PNG: %v", name, err)
	}
	if config.Width > raster.MaxSide || config.Height > raster.MaxSide {
		return nil, pipeline.Invalid("mask_file %s: got %d × %d px, want sides up to %d", name, config.Width, config.Height, raster.MaxSide)
	}
	picture, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		return nil, pipeline.Invalid("mask_file %s: want a PNG: %v", name, err)
	}
	b := picture.Bounds()
	mask := raster.NewMask(b.Dx(), b.Dy())
	for y := range mask.Height {
		for x := range mask.Width {
			grey := color.Gray16Model.Convert(picture.At(b.Min.X+x, b.Min.Y+y)).(color.Gray16)
			mask.Set(x, y, grey.Y > 0)
		}
	}
	return mask, nil
}

// ringSpans returns the pixels whose centres lie from ri (exclusive, unless 0) to ro px from (cx, cy).
func ringSpans(width, height int, cx, cy, ri, ro float64) []raster.Span {
	var out []raster.Span
	for y := max(int(math.Ceil(cy-ro)), 0); y <= min(int(math.Floor(cy+ro)), height-1); y++ {
		dy := float64(y) - cy
		half := math.Sqrt(max(ro*ro-dy*dy, 0))
		x0, x1 := max(int(math.Ceil(cx-half)), 0), min(int(math.Floor(cx+half))+1, width)
		hole := ri*ri - dy*dy
		if ri == 0 || hole < 0 {
			out = appendSpan(out, y, x0, x1)
			continue
		}
		h := math.Sqrt(hole)
		out = appendSpan(out, y, x0, min(int(math.Ceil(cx-h)), x1))
		out = appendSpan(out, y, max(int(math.Floor(cx+h))+1, x0), x1)
	}
	return out
}

func appendSpan(out []raster.Span, y, x0, x1 int) []raster.Span {
	if x0 >= x1 {
		return out
	}
	return append(out, raster.Span{Y: y, X0: x0, X1: x1})
}

// polygonMask holds the pixels whose centres lie in the polygon (even–odd rule).
func polygonMask(width, height int, p []Corner) *raster.Mask {
	m := raster.NewMask(width, height)
	for y := range height {
		for x := range width {
			m.Set(x, y, inPolygon(p, float64(x), float64(y)))
		}
	}
	return m
}

func inPolygon(p []Corner, x, y float64) bool {
	in := false
	for i, a := range p {
		b := p[(i+1)%len(p)]
		if (a.YPx > y) != (b.YPx > y) && x < a.XPx+(y-a.YPx)/(b.YPx-a.YPx)*(b.XPx-a.XPx) {
			in = !in
		}
	}
	return in
}

// polygonArea is the shoelace formula, px².
func polygonArea(p []Corner) float64 {
	sum := 0.
	for i, a := range p {
		b := p[(i+1)%len(p)]
		sum += a.XPx*b.YPx - b.XPx*a.YPx
	}
	return math.Abs(sum) / 2
}

func outlineOf(p []Corner) *pipeline.Outline {
	o := &pipeline.Outline{}
	for _, c := range p {
		o.Corners = append(o.Corners, pipeline.Point{X: c.XPx, Y: c.YPx})
	}
	return o
}
