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

func newScene() scene { return drawScene(sceneWidth, sceneHeight) }

// drawScene draws the scene, or a smaller one with as many objects for its area.
func drawScene(width, height int) scene {
	rng := rand.New(rand.NewPCG(12, 12))
	s := scene{dark: raster.NewPlane(width, height), gain: raster.NewPlane(width, height), bad: raster.NewMask(width, height)}
	for i := range s.dark.Pix {
		s.dark.Pix[i] = float32(4 + 0.3*rng.NormFloat64())
		s.gain.Pix[i] = float32(1 + 0.01*rng.NormFloat64())
	}
	for range s.share(1470) {
		s.bad.Set(rng.IntN(width), rng.IntN(height), true)
	}
	s.raw = s.frame(12)
	return s
}

// frame draws another part before the same camera.
func (s scene) frame(seed uint64) raster.Raw {
	rng := rand.New(rand.NewPCG(seed, 13))
	width, height := s.dark.Width, s.dark.Height
	light := raster.NewPlane(width, height)
	for y := range height {
		for x := range width {
			dx, dy := float64(x)/float64(width)-0.5, float64(y)/float64(height)-0.5
			light.Set(x, y, float32(33-30*(dx*dx+dy*dy)))
		}
	}
	s.blobs(light, rng)
	raw := raster.NewRaw(raster.Mono8, width, height)
	for i, l := range light.Pix {
		v := float64(l/s.gain.Pix[i]+s.dark.Pix[i]) + 1.6*rng.NormFloat64()
		raw.Data[i] = byte(min(max(math.Round(v), 0), 255))
		if s.bad.Bits[i] {
			raw.Data[i] = 255
		}
	}
	return raw
}

// share is how many of n in the whole scene lie in one of its size.
func (s scene) share(n int) int {
	return n * s.dark.Width * s.dark.Height / (sceneWidth * sceneHeight)
}

func (s scene) blobs(light *raster.Plane, rng *rand.Rand) {
	width, height := float64(light.Width), float64(light.Height)
	spot := func(cx, cy, sigma, peak float64) {
		r := int(4*sigma) + 1
		for y := max(int(cy)-r, 0); y <= min(int(cy)+r, light.Height-1); y++ {
			for x := max(int(cx)-r, 0); x <= min(int(cx)+r, light.Width-1); x++ {
				dx, dy := float64(x)-cx, float64(y)-cy
				light.Pix[y*light.Stride+x] += float32(peak * math.Exp(-(dx*dx+dy*dy)/(2*sigma*sigma)))
			}
		}
	}
	for range s.share(140) {
		spot(rng.Float64()*width, rng.Float64()*height, 0.8+3.2*rng.Float64(), 10*math.Pow(18, rng.Float64()))
	}
	for range s.share(20) {
		x, y, a := rng.Float64()*width, rng.Float64()*height, rng.Float64()*math.Pi
		for t := range int(60 + 440*rng.Float64()) {
			spot(x+float64(t)*math.Cos(a), y+float64(t)*math.Sin(a), 0.8, 8)
		}
	}
}

// calibration returns the scene's patterns as a calibration.
func (s scene) calibration() *pipeline.Calibration {
	response := raster.NewPlane(s.raw.Width, s.raw.Height)
	for i, g := range s.gain.Pix {
		response.Pix[i] = 1 / g
	}
	c := &pipeline.Calibration{Hash: "bench", Capture: pipeline.Capture{Format: raster.Mono8, Width: s.raw.Width, Height: s.raw.Height, ExposureUS: 1000},
		Dark: s.dark, Response: response, Noise: pipeline.NoiseModel{GainDNPerE: 0.1, DarkDN: 1}, Scale: pipeline.Scale{UMPerPx: 10, Source: "stated"}}
	for y := range s.raw.Height {
		for x := range s.raw.Width {
			if s.bad.At(x, y) {
				c.BadPixels = append(c.BadPixels, pipeline.PixelAt{X: x, Y: y})
			}
		}
	}
	return c
}
