package render

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// stage is one unit before the camera in one view.
type stage struct {
	scene    Scene
	view     View
	unit     *Unit
	geometry pipeline.Geometry
	x, y     float64 // the part's centre, px
	radius   float64 // px
	blur     float64 // sigma, px
	light    bar
}

func (r *Renderer) stageOf(u *Unit, v View) stage {
	c := r.scene.Camera
	st := stage{scene: r.scene, view: v, unit: u, blur: c.BlurPx, light: v.bar(), radius: u.DiameterMM * 500 / c.UMPerPx}
	st.x, st.y = float64(c.Width-1)/2+u.ShiftXPx, float64(c.Height-1)/2+u.ShiftYPx
	st.geometry = r.scene.geometry(v, st.x, st.y)
	if sigma, ok := u.spoiled(SpoilDefocus, v.Name); ok {
		st.blur = sigma
	}
	return st
}

// radialStep is how finely what depends on the radius alone is tabulated, px.
const radialStep = 1.0 / 8

// radial is the part by distance from its centre: how much of a pixel it covers, and
// its rim, both seen through the blur.
type radial struct {
	cover, rim []float32
	plain      int // below this index the part covers all and there is no rim
}

func (st stage) radial() radial {
	s := math.Sqrt(st.scene.Camera.pointVariance(st.blur))
	width := st.unit.Process.RimWidthUM / st.scene.Camera.UMPerPx
	wide := math.Hypot(width, s)
	margin := blurReach*wide + 2
	n := int((st.radius+margin)/radialStep) + 2
	t := radial{cover: make([]float32, n), rim: make([]float32, n), plain: int((st.radius - margin) / radialStep)}
	for i := range n {
		d := float64(i)*radialStep - st.radius
		t.cover[i] = float32(math.Erfc(d/(s*math.Sqrt2)) / 2)
		if width > 0 {
			t.rim[i] = float32(st.unit.Process.RimDN * width / wide * math.Exp(-d*d/(2*wide*wide)))
		}
	}
	return t
}

// background draws the nest and the part without objects.
func (st stage) background(r *Renderer) *raster.Plane {
	c := st.scene.Camera
	plane := raster.NewPlane(c.Width, c.Height)
	outside := float32(st.view.FixtureDN)
	if st.view.Light == LightBack {
		outside = float32(st.view.LevelDN)
	}
	for i := range plane.Pix {
		plane.Pix[i] = outside
	}
	if _, empty := st.unit.spoiled(SpoilEmptyNest, st.view.Name); empty {
		return plane
	}
	t := st.radial()
	if st.view.Light == LightBack {
		st.eachOfPart(plane, t, func(v, cover, _, _ float32) float32 { return v * (1 - cover) })
		return plane
	}
	st.surface(plane, t, r)
	return plane
}

// eachOfPart replaces every pixel near the part by what change makes of it, given how
// much of it the part covers and where it is from the part's centre.
func (st stage) eachOfPart(plane *raster.Plane, t radial, change func(v, cover, dx, dy float32) float32) {
	for y := range plane.Height {
		row := plane.Row(y)
		dy, x0, x1 := st.chord(y, len(t.cover), plane.Width)
		for x := x0; x < x1; x++ {
			dx := float32(float64(x) - st.x)
			i := int(float32(math.Sqrt(float64(dx*dx+dy*dy)))*(1/radialStep) + 0.5)
			row[x] = change(row[x], t.cover[min(i, len(t.cover)-1)], dx, dy)
		}
	}
}

// chord returns the pixels of row y within n radial steps of the part's centre.
func (st stage) chord(y, n, width int) (dy float32, x0, x1 int) {
	d := float64(y) - st.y
	reach := float64(n-1) * radialStep
	if math.Abs(d) >= reach {
		return float32(d), 0, 0
	}
	half := math.Sqrt(reach*reach - d*d)
	return float32(d), max(int(math.Ceil(st.x-half)), 0), min(int(st.x+half)+1, width)
}

// surface draws haze, lay and rim over the nest.
func (st stage) surface(plane *raster.Plane, t radial, r *Renderer) {
	u, strength := st.unit, float32(st.view.strength())
	scale := u.Process.TextureScalePx
	if scale == 0 {
		scale = 128
	}
	relief := newTexture(r.unitStream(*u, "texture"), plane.Width, plane.Height, scale)
	lay := st.lay(r)
	slow := make([]float32, plane.Width)
	haze := float32(u.HazeDN) * strength
	for y := range plane.Height {
		dy, x0, x1 := st.chord(y, len(t.cover), plane.Width)
		if x1 <= x0 {
			continue
		}
		relief.row(slow, y, u.Process.HazeTexture)
		row := plane.Row(y)
		for x := x0; x < x1; x++ {
			dx := float32(float64(x) - st.x)
			distance := float32(math.Sqrt(float64(dx*dx + dy*dy)))
			i := min(int(distance*(1/radialStep)+0.5), len(t.cover)-1)
			v := haze * slow[x]
			if lay.profile != nil {
				v += lay.at(dx, dy, distance)
			}
			if v = max(v, 0); i >= t.plain {
				v = v*t.cover[i] + row[x]*(1-t.cover[i]) + strength*t.rim[i]*lay.light.radialWeight(dx, dy, distance)
			}
			row[x] = v
		}
	}
}
