package main

import (
	"math"
	"math/rand/v2"
	"sync"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// scene is a frame of 12 megapixels with haze and vignetting, noise of 1.6 DN, fixed
// patterns, 1 470 bad pixels, 140 blobs and 20 scratches.
type scene struct {
	raw  raster.Raw
	dark *raster.Plane
	gain *raster.Plane // to multiply with
	bad  *raster.Mask
}

const sceneWidth, sceneHeight = 4000, 3000

// sceneOnce returns a function that draws the scene when it is first called.
func sceneOnce() func() *scene {
	return sync.OnceValue(func() *scene { s := newScene(); return &s })
}

func newScene() scene {
	rng := rand.New(rand.NewPCG(12, 12))
	s := scene{raw: raster.NewRaw(raster.Mono8, sceneWidth, sceneHeight), dark: raster.NewPlane(sceneWidth, sceneHeight),
		gain: raster.NewPlane(sceneWidth, sceneHeight), bad: raster.NewMask(sceneWidth, sceneHeight)}
	light := raster.NewPlane(sceneWidth, sceneHeight)
	for y := range sceneHeight {
		for x := range sceneWidth {
			dx, dy := float64(x)/sceneWidth-0.5, float64(y)/sceneHeight-0.5
			light.Set(x, y, float32(33-30*(dx*dx+dy*dy)))
			s.dark.Set(x, y, float32(4+0.3*rng.NormFloat64()))
			s.gain.Set(x, y, float32(1+0.01*rng.NormFloat64()))
		}
	}
	s.blobs(light, rng)
	for y := range sceneHeight {
		for x := range sceneWidth {
			v := float64(light.At(x, y)/s.gain.At(x, y)+s.dark.At(x, y)) + 1.6*rng.NormFloat64()
			s.raw.Data[y*sceneWidth+x] = byte(min(max(math.Round(v), 0), 255))
		}
	}
	for range 1470 {
		x, y := rng.IntN(sceneWidth), rng.IntN(sceneHeight)
		s.bad.Set(x, y, true)
		s.raw.Data[y*sceneWidth+x] = 255
	}
	return s
}

func (s scene) blobs(light *raster.Plane, rng *rand.Rand) {
	spot := func(cx, cy, sigma, peak float64) {
		r := int(4*sigma) + 1
		for y := max(int(cy)-r, 0); y <= min(int(cy)+r, sceneHeight-1); y++ {
			for x := max(int(cx)-r, 0); x <= min(int(cx)+r, sceneWidth-1); x++ {
				dx, dy := float64(x)-cx, float64(y)-cy
				light.Pix[y*light.Stride+x] += float32(peak * math.Exp(-(dx*dx+dy*dy)/(2*sigma*sigma)))
			}
		}
	}
	for range 140 {
		spot(rng.Float64()*sceneWidth, rng.Float64()*sceneHeight, 0.8+3.2*rng.Float64(), 10*math.Pow(18, rng.Float64()))
	}
	for range 20 {
		x, y, a := rng.Float64()*sceneWidth, rng.Float64()*sceneHeight, rng.Float64()*math.Pi
		for t := range int(60 + 440*rng.Float64()) {
			spot(x+float64(t)*math.Cos(a), y+float64(t)*math.Sin(a), 0.8, 8)
		}
	}
}

// calibration returns the scene's patterns as a calibration.
func (s scene) calibration() *pipeline.Calibration {
	response := raster.NewPlane(sceneWidth, sceneHeight)
	for i, g := range s.gain.Pix {
		response.Pix[i] = 1 / g
	}
	c := &pipeline.Calibration{Hash: "bench", Capture: pipeline.Capture{Format: raster.Mono8, Width: sceneWidth, Height: sceneHeight, ExposureUS: 1000},
		Dark: s.dark, Response: response, Noise: pipeline.NoiseModel{GainDNPerE: 0.1, DarkDN: 1}, Scale: pipeline.Scale{UMPerPx: 10, Source: "stated"}}
	for y := range sceneHeight {
		for x := range sceneWidth {
			if s.bad.At(x, y) {
				c.BadPixels = append(c.BadPixels, pipeline.PixelAt{X: x, Y: y})
			}
		}
	}
	return c
}
