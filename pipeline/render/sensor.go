package render

import (
	"math"
	"math/rand/v2"
	"strconv"

	"lapgate/pipeline/raster"
)

// noiseDN returns the standard deviation of one raw pixel that receives signal DN
// above dark: shot noise, dark noise and the rounding to whole counts (1/12).
func (c Camera) noiseDN(signal float64) float64 {
	dark := c.GainDNPerE * c.DarkNoiseE
	return math.Sqrt(c.GainDNPerE*max(signal, 0) + dark*dark + 1.0/12)
}

// pointVariance is the variance of the point spread with the pixel's own width, px².
func (c Camera) pointVariance(blurPx float64) float64 { return blurPx*blurPx + 1.0/12 }

// sensor is the fixed pattern of a camera.
type sensor struct {
	camera Camera
	gain   *raster.Plane // pixel gain, mean 1; 0 where dead
	offset *raster.Plane // DN without light
	seed   uint64
}

func newSensor(c Camera, seed uint64) *sensor {
	s := &sensor{camera: c, gain: raster.NewPlane(c.Width, c.Height), offset: raster.NewPlane(c.Width, c.Height), seed: seed}
	gains, offsets := stream(seed, "camera", c.ID, "gain"), stream(seed, "camera", c.ID, "offset")
	for i := range s.gain.Pix {
		s.gain.Pix[i] = float32(1 + c.ResponseSpread*gains.NormFloat64())
		s.offset.Pix[i] = float32(c.BlackLevelDN + c.DarkSpreadDN*offsets.NormFloat64())
	}
	hot, dead := stream(seed, "camera", c.ID, "hot"), stream(seed, "camera", c.ID, "dead")
	for range c.HotPixels {
		s.offset.Pix[hot.IntN(len(s.offset.Pix))] += float32(c.HotPixelDN.draw(hot))
	}
	for range c.DeadPixels {
		s.gain.Pix[dead.IntN(len(s.gain.Pix))] = 0
	}
	return s
}

// expose turns light into counts. light is the scene before vignetting; gain and stray
// are the view's maps; power multiplies all light.
func (s *sensor) expose(light *raster.Plane, m viewMaps, power float64, r *rand.Rand) []uint16 {
	counts := make([]uint16, len(light.Pix))
	k, p := float32(s.camera.GainDNPerE), float32(power)
	dark := k * float32(s.camera.DarkNoiseE)
	dark *= dark
	top := float32(s.camera.format().MaxCount())
	for i, v := range light.Pix {
		signal := p * (v*m.gain.Pix[i] + m.stray.Pix[i])
		sigma := float32(math.Sqrt(float64(k*max(signal, 0) + dark)))
		v = s.offset.Pix[i] + signal + sigma*float32(r.NormFloat64()) + 0.5
		counts[i] = uint16(min(max(v, 0), top))
	}
	return counts
}

// frameStream is the temporal noise of one frame.
func (s *sensor) frameStream(what, view string, n int) *rand.Rand {
	return stream(s.seed, "noise", what, view, strconv.Itoa(n))
}

// viewMaps is what the fixed pattern and a view's light make of a scene.
type viewMaps struct {
	gain  *raster.Plane // vignetting × pixel gain
	stray *raster.Plane // stray light × pixel gain, DN
}

func (s *sensor) mapsOf(scene Scene, v View) viewMaps {
	m := viewMaps{gain: s.gain.Clone(), stray: s.gain.Clone()}
	for y := range m.gain.Height {
		gain, stray := m.gain.Row(y), m.stray.Row(y)
		for x := range gain {
			gain[x] *= float32(scene.vignettingAt(v, float64(x), float64(y)))
			stray[x] *= float32(scene.strayAt(v, float64(x)))
		}
	}
	return m
}
