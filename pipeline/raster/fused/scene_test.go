package fused

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline/raster"
)

// scene is a frame with digs and scratches drawn on haze, as a camera with dark and
// response patterns would take it.
type scene struct {
	raw    raster.Raw
	planes Planes
	mask   *raster.Mask
}

// look is how a scene is drawn. Levels are in counts of 8 bits; the format scales them.
type look struct {
	format        raster.PixelFormat
	width, height int
	noise         float64 // counts of 8 bits
	lay           float64 // amplitude of a lay with a period of 9 px
	haze          float64 // amplitude of crests three cells apart
	digs          int
	scratches     int
	plain         bool // no dark, stray, response, bad pixels
	dark          bool // defects darker than the background
	circle        bool // the region is a disc with a hole
	seed          uint64
}

func draw(l look) scene {
	random := rand.New(rand.NewPCG(l.seed, 7))
	w, h := l.width, l.height
	unit := float64(l.format.MaxCount()) / 255
	light := make([]float64, w*h)
	base := 22.
	if l.dark {
		base = 120
	}
	for y := range h {
		for x := range w {
			u, v := float64(x)/float64(w)-0.5, float64(y)/float64(h)-0.5
			light[y*w+x] = base + 8*math.Cos(2.5*u+0.4) - 6*(u*u+v*v) + l.lay*math.Sin(2*math.Pi*(0.8*float64(x)+0.6*float64(y))/9) +
				l.haze*math.Cos(2*math.Pi*float64(x)/192)*math.Cos(2*math.Pi*float64(y)/192)
		}
	}
	sign := 1.
	if l.dark {
		sign = -1
	}
	for range l.digs {
		spot(light, w, h, random.Float64()*float64(w), random.Float64()*float64(h), 0.8+2.4*random.Float64(),
			sign*l.noise*math.Exp(0.5+3*random.Float64()))
	}
	for range l.scratches {
		x, y, a := random.Float64()*float64(w), random.Float64()*float64(h), 2*math.Pi*random.Float64()
		peak := sign * l.noise * (2 + 6*random.Float64())
		for t := 0.; t < 40+160*random.Float64(); t += 0.5 {
			spot(light, w, h, x+t*math.Cos(a), y+t*math.Sin(a), 0.9, peak*0.25)
		}
	}
	s := scene{mask: raster.NewMask(w, h)}
	for y := range h {
		for x := range w {
			r := math.Hypot(float64(x-w/2), float64(y-h/2))
			s.mask.Set(x, y, !l.circle || r < 0.47*float64(min(w, h)) && r > 20)
		}
	}
	counts := make([]uint16, w*h)
	if !l.plain {
		s.planes = patterns(random, w, h, unit)
	}
	for i, v := range light {
		v *= unit
		if !l.plain {
			v = v*float64(s.planes.Response.Pix[i]) + float64(s.planes.Dark.Pix[i]) + float64(s.planes.Stray.Pix[i])
			if s.planes.Bad.Bits[i] {
				v = 255 * unit * random.Float64()
			}
		}
		counts[i] = uint16(min(max(math.Round(v+l.noise*unit*random.NormFloat64()), 0), float64(l.format.MaxCount())))
	}
	s.raw = raster.Pack(l.format, counts, w, h)
	return s
}

func spot(light []float64, w, h int, x, y, sigma, peak float64) {
	r := int(4*sigma) + 1
	for v := max(int(y)-r, 0); v <= min(int(y)+r, h-1); v++ {
		for u := max(int(x)-r, 0); u <= min(int(x)+r, w-1); u++ {
			d := (float64(u)-x)*(float64(u)-x) + (float64(v)-y)*(float64(v)-y)
			light[v*w+u] += peak * math.Exp(-d/(2*sigma*sigma))
		}
	}
}

func patterns(random *rand.Rand, w, h int, unit float64) Planes {
	p := Planes{Dark: raster.NewPlane(w, h), Stray: raster.NewPlane(w, h), Response: raster.NewPlane(w, h), Bad: raster.NewMask(w, h)}
	for i := range p.Dark.Pix {
		u, v := float64(i%w)/float64(w)-0.5, float64(i/w)/float64(h)-0.5
		p.Dark.Pix[i] = float32(unit * (4 + 0.8*random.NormFloat64()))
		p.Stray.Pix[i] = float32(unit * (1 + u))
		p.Response.Pix[i] = float32((1.1 - 0.6*(u*u+v*v)) * (1 + 0.02*random.NormFloat64()))
		p.Bad.Bits[i] = random.Float64() < 1e-3
	}
	for x := 10; x < min(w, 40) && h > 8; x++ { // a cluster: neighbours are bad too
		p.Bad.Set(x, h/3, true)
		p.Bad.Set(x, h/3+1, true)
		p.Bad.Set(x, h/3+2, true)
	}
	return p
}

// reference is the same job with package raster.
func reference(s scene, set Settings) ([]raster.Blemish, [][]raster.Span, *raster.Grid, *raster.Plane) {
	corrected, err := s.raw.Plane()
	if err != nil {
		panic(err)
	}
	if s.planes.Dark != nil {
		raster.Subtract(corrected, corrected, s.planes.Dark)
		raster.Subtract(corrected, corrected, s.planes.Stray)
		for i := range corrected.Pix {
			corrected.Pix[i] /= s.planes.Response.Pix[i]
		}
		raster.ReplaceBad(corrected, s.planes.Bad)
	}
	plane := func() *raster.Plane { return raster.NewPlane(corrected.Width, corrected.Height) }
	level, noise, signal, snr := plane(), plane(), plane(), plane()
	grid := raster.MeasureGrid(corrected, s.mask, s.planes.Bad, set.Grid)
	grid.Interpolate(level, noise)
	raster.Subtract(signal, corrected, level)
	raster.MatchedFilter(snr, signal, s.mask)
	raster.SNR(snr, snr, noise)
	for i, v := range snr.Pix {
		if set.Polarity == Dark || set.Polarity == Both && v < 0 {
			snr.Pix[i] = -v
		}
	}
	blobs := raster.Label(snr, float32(set.Low), float32(set.High))
	m := raster.NewMeasurer(signal, noise, s.mask, blobs)
	var out []raster.Blemish
	var spans [][]raster.Span
	for i, b := range blobs {
		out, spans = append(out, m.Measure(i)), append(spans, b.Spans)
	}
	return out, spans, grid, snr
}

func usual() Settings {
	return Settings{Low: 3.5, High: 6, Polarity: Bright, MinAreaPx: 1, Grid: raster.DefaultGrid()}
}
