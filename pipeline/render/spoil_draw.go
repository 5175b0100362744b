package render

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline/raster"
)

// spoil draws the spoilers that are seen on the part.
func (st stage) spoil(plane *raster.Plane, r *Renderer) {
	if _, empty := st.unit.spoiled(SpoilEmptyNest, st.view.Name); empty {
		return
	}
	for _, sp := range st.unit.Spoilers {
		add := st.spoilLight(sp, r)
		if add == nil || st.view.Light == LightBack && sp.Kind != SpoilBroken {
			continue
		}
		st.eachOfPart(plane, st.radial(), add)
	}
}

// spoilLight returns what a spoiler makes of the light of one pixel; nil = nothing.
func (st stage) spoilLight(sp Spoiler, r *Renderer) func(v, cover, dx, dy float32) float32 {
	value := float32(sp.Value * st.view.strength())
	rnd := r.unitStream(*st.unit, sp.Kind)
	switch sp.Kind {
	case SpoilMatt:
		grain := st.grain(0.04*value, rnd)
		half := float32(grain.Width / 2)
		return func(v, cover, dx, dy float32) float32 {
			return max(v+cover*grain.At(int(dx+half), int(dy+half)), 0)
		}
	case SpoilGrain:
		grain := st.grain(value, rnd)
		half := float32(grain.Width / 2)
		return func(v, cover, dx, dy float32) float32 {
			return max(v+cover*grain.At(int(dx+half), int(dy+half)), 0)
		}
	case SpoilFingerprint:
		return st.fingerprint(value, rnd.Float64(), rnd.Float64())
	case SpoilQuarterStain:
		sin, cos := math.Sincos(2 * math.Pi * rnd.Float64())
		s, c := float32(sin), float32(cos)
		return func(v, cover, dx, dy float32) float32 {
			return v + value*cover*softStep((c*dx+s*dy)/8)*softStep((c*dy-s*dx)/8)
		}
	case SpoilOilFilm:
		return st.oilFilm(value, newTexture(rnd, plateau(st.scene.Camera.Width), plateau(st.scene.Camera.Height), 300))
	case SpoilBroken:
		return st.broken(sp.Value, 2*math.Pi*rnd.Float64())
	}
	return nil
}

// grain returns white noise of the root mean square given, seen through the blur, that is
// larger than the part.
func (st stage) grain(rms float32, rnd *rand.Rand) *raster.Plane {
	side := 3 * int(st.radius+8)
	p := &patch{w: side, h: side, pix: make([]float32, side*side)}
	for i := range p.pix {
		p.pix[i] = float32(rnd.NormFloat64())
	}
	p.blur(max(st.blur, 0.5))
	sum := 0.0
	for _, v := range p.pix {
		sum += float64(v * v)
	}
	scale := rms / float32(math.Sqrt(sum/float64(len(p.pix))))
	for i := range p.pix {
		p.pix[i] *= scale
	}
	return &raster.Plane{Pix: p.pix, Width: side, Height: side, Stride: side}
}

// plateau leaves room around a frame for a texture that is asked off its border.
func plateau(side int) int { return side + 64 }

func softStep(t float32) float32 { return float32(1 / (1 + math.Exp(-float64(t)))) }

// fingerprint returns ridges about 450 µm apart that curve about a point beside an
// oval of 9 by 13 mm somewhere on the part.
func (st stage) fingerprint(value float32, turn, out float64) func(v, cover, dx, dy float32) float32 {
	scale := 1 / st.scene.Camera.UMPerPx
	sin, cos := math.Sincos(2 * math.Pi * turn)
	cx, cy := 0.4*out*st.radius*cos, 0.4*out*st.radius*sin
	period, wide, tall := 450*scale, 4500*scale, 6500*scale
	return func(v, cover, dx, dy float32) float32 {
		x, y := float64(dx)-cx, float64(dy)-cy
		x, y = cos*x+sin*y, cos*y-sin*x
		oval := x*x/(wide*wide) + y*y/(tall*tall)
		if oval > 1.3 {
			return v
		}
		path := math.Hypot(x, 0.8*(y+0.5*tall)) + 0.8*period*math.Sin(x/(3*period))*math.Cos(y/(4*period))
		ridge := 0.5 + 0.5*math.Cos(2*math.Pi*path/period)
		return v + value*cover*float32(ridge*ridge)*softStep(float32((1-oval)*12))
	}
}

// oilFilm returns slow interference fringes: the sine of a random thickness.
func (st stage) oilFilm(value float32, thickness *texture) func(v, cover, dx, dy float32) float32 {
	row, last := make([]float32, len(thickness.first)), -1
	return func(v, cover, dx, dy float32) float32 {
		x, y := int(float64(dx)+st.x+0.5), int(float64(dy)+st.y+0.5)
		if y != last {
			thickness.row(row, y, 1)
			last = y
		}
		phase := float64(9 * row[x])
		return max(v+math.Sqrt2*value*cover*float32(math.Sin(phase)), 0)
	}
}

// broken returns the part cut off along a chord at the given depth; the fracture is as
// bright as the rim.
func (st stage) broken(depthMM, azimuth float64) func(v, cover, dx, dy float32) float32 {
	sin, cos := math.Sincos(azimuth)
	c, s := float32(cos), float32(sin)
	chord := float32(st.radius - depthMM*1000/st.scene.Camera.UMPerPx)
	outside, bright := float32(st.view.FixtureDN), float32(st.unit.Process.RimDN*st.view.strength())
	if st.view.Light == LightBack {
		outside, bright = float32(st.view.LevelDN), 0
	}
	wide := float32(math.Sqrt(st.scene.Camera.pointVariance(st.blur))) * math.Sqrt2
	return func(v, cover, dx, dy float32) float32 {
		d := (c*dx + s*dy - chord) / wide
		keep := float32(math.Erfc(float64(d)) / 2)
		return v*keep + outside*(1-keep) + bright*cover*float32(math.Exp(-float64(d*d)/4))
	}
}
