package report

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"html/template"
	"image"
	"image/color"
	"image/png"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// pictureSide is about how many pixels the longer side of a picture on the page has.
const pictureSide = 720

// calibrationPicture is a plane as the page shows it.
type calibrationPicture struct {
	Name, Note string
	Data       template.URL
	Low, High  string // what is drawn black and white
}

// calibrationPictures draws the planes that there are and the map of bad pixels.
func calibrationPictures(c *pipeline.Calibration) ([]calibrationPicture, error) {
	var out []calibrationPicture
	for _, p := range []struct {
		name, note, unit string
		plane            *raster.Plane
	}{
		{"Gain map", "response of each pixel with the light's fall-off, mean 1", "", c.Response},
		{"Stray light", "what reaches the sensor without a part", " DN", c.Stray},
		{"Dark", "lamp off", " DN", c.Dark},
	} {
		if p.plane == nil {
			continue
		}
		small := shrink(p.plane)
		low, high := tails(small)
		data, err := pngURL(small.Width, small.Height, func(x, y int) color.Gray {
			return color.Gray{uint8(255*min(max((small.At(x, y)-low)/max(high-low, 1e-6), 0), 1) + 0.5)}
		})
		if err != nil {
			return nil, err
		}
		out = append(out, calibrationPicture{p.name, p.note, data, fmt.Sprintf("%.4g%s", low, p.unit), fmt.Sprintf("%.4g%s", high, p.unit)})
	}
	bad, err := badPixelMap(c)
	return append(out, bad), err
}

// shrink returns the means of whole square blocks.
func shrink(p *raster.Plane) *raster.Plane {
	step := max(1, (max(p.Width, p.Height)+pictureSide-1)/pictureSide)
	out := raster.NewPlane(max(p.Width/step, 1), max(p.Height/step, 1))
	for y := range out.Height {
		for x := range out.Width {
			sum, n := float32(0), float32(0)
			for v := y * step; v < min((y+1)*step, p.Height); v++ {
				for _, s := range p.Row(v)[x*step : min((x+1)*step, p.Width)] {
					sum, n = sum+s, n+1
				}
			}
			out.Set(x, y, sum/n)
		}
	}
	return out
}

// tails returns the 0.5 and 99.5 percentiles.
func tails(p *raster.Plane) (low, high float32) {
	s := slices.Sorted(slices.Values(p.Pix))
	k := len(s) / 200
	return s[k], s[len(s)-1-k]
}

// badPixelMap marks each bad pixel with a spot that can be seen.
func badPixelMap(c *pipeline.Calibration) (calibrationPicture, error) {
	w, h := c.Capture.Width, c.Capture.Height
	step := max(1, (max(w, h)+pictureSide-1)/pictureSide)
	out := raster.NewPlane(max(w/step, 1), max(h/step, 1))
	for _, b := range c.BadPixels {
		for dy := -1; dy <= 1; dy++ {
			for dx := -1; dx <= 1; dx++ {
				if x, y := b.X/step+dx, b.Y/step+dy; x >= 0 && y >= 0 && x < out.Width && y < out.Height {
					out.Set(x, y, 1)
				}
			}
		}
	}
	data, err := pngURL(out.Width, out.Height, func(x, y int) color.Gray { return color.Gray{uint8(245 - 245*out.At(x, y))} })
	return calibrationPicture{Name: "Bad pixels", Note: fmt.Sprintf("%d of %d, each drawn as a spot of %d × %d px", len(c.BadPixels), w*h, 3*step, 3*step), Data: data}, err
}

func pngURL(width, height int, at func(x, y int) color.Gray) (template.URL, error) {
	img := image.NewGray(image.Rect(0, 0, width, height))
	for y := range height {
		for x := range width {
			img.SetGray(x, y, at(x, y))
		}
	}
	var out bytes.Buffer
	if err := png.Encode(&out, img); err != nil {
		return "", err
	}
	return template.URL("data:image/png;base64," + base64.StdEncoding.EncodeToString(out.Bytes())), nil
}
