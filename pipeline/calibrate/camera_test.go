package calibrate

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// camera is the synthetic camera of the EMVA 1288 linear model: electrons are Poisson
// (normal with variance = mean, good to 1e-3 above 500 e⁻) with normal dark noise, then
// gain, offset and rounding.
type camera struct {
	width, height int
	format        raster.PixelFormat
	gain          float64 // DN/e⁻
	darkE         float64 // e⁻
	offset        float64 // DN
	efficiency    float64
	rnd           *rand.Rand
}

func newCamera(width, height int) *camera {
	return &camera{
		width: width, height: height, format: raster.Mono12,
		gain: 0.25, darkE: 8, offset: 20, efficiency: 0.6, rnd: rand.New(rand.NewPCG(7, 11)),
	}
}

// photons of 2 500 per pixel give 375 DN above dark, 9 % of 12 bits; the tests use 6 000.
const diffuser = 6000.0

func flat(photons float64) func(x, y int) float64 { return func(int, int) float64 { return photons } }

// vignetted falls by 30 % from the middle to the corners.
func (c *camera) vignetted(photons float64) func(x, y int) float64 {
	return func(x, y int) float64 {
		dx, dy := float64(x)/float64(c.width)-0.5, float64(y)/float64(c.height)-0.5
		return photons * (1 - 0.6*(dx*dx+dy*dy))
	}
}

func (c *camera) counts(photons func(x, y int) float64) []uint16 {
	out := make([]uint16, c.width*c.height)
	for i := range out {
		mean := c.efficiency * photons(i%c.width, i/c.width)
		electrons := mean + math.Sqrt(mean+c.darkE*c.darkE)*c.rnd.NormFloat64()
		dn := math.Round(c.offset + c.gain*electrons)
		out[i] = uint16(max(min(dn, float64(c.format.MaxCount())), 0))
	}
	return out
}

var stated = pipeline.Capture{ExposureUS: 1000, GainDB: 6, BlackLevel: 20, BinningX: 1, BinningY: 1}

func (c *camera) frame(name string, counts []uint16) Frame {
	return Frame{Name: name, Capture: stated, Raw: raster.Pack(c.format, counts, c.width, c.height)}
}

func (c *camera) take(kind string, n int, photons func(x, y int) float64) []Frame {
	var out []Frame
	for i := range n {
		out = append(out, c.frame(kind+string(rune('0'+i))+".pgm", c.counts(photons)))
	}
	return out
}

func request() Request {
	return Request{
		Camera: "cam-1", Light: "ring", Mode: "dark_field", Capture: stated,
		Scale:  pipeline.Scale{UMPerPx: 10, UncertaintyUM: 0.02, Source: "stated"},
		MadeAt: "2030-01-02T03:04:05Z", Rules: DefaultRules(),
	}
}
