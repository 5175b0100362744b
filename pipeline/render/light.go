package render

import (
	"math"

	"lapgate/pipeline/raster"
)

// bar is the direction a one-sided light comes from, as a unit vector in pixels, with
// the law of how directed scatter depends on it. The zero value is light from all sides.
type bar struct {
	x, y     float64
	floor    float64
	halves   int // half the exponent; 0 = no direction
	oneSided bool
}

func (v View) bar() bar {
	if v.Light != LightBar {
		return bar{}
	}
	sin, cos := math.Sincos(v.AzimuthDeg * math.Pi / 180)
	return bar{x: cos, y: sin, floor: v.DirectionFloor, halves: v.DirectionExponent / 2, oneSided: true}
}

// weight returns how strongly a line with normal (nx, ny), a unit vector, scatters:
// floor + (1 − floor)·|cos|^exponent of the angle between its normal and the light.
func (b bar) weight(nx, ny float64) float64 {
	if !b.oneSided {
		return 1
	}
	c2 := nx*b.x + ny*b.y
	c2 *= c2
	w := 1.0
	for range b.halves {
		w *= c2
	}
	return b.floor + (1-b.floor)*w
}

// along returns the weight along an arc by the angle through which it has turned.
func (b bar) along(a arc) func(turn float64) float64 {
	if !b.oneSided {
		return nil
	}
	return func(turn float64) float64 {
		sin, cos := math.Sincos(turn)
		return b.weight(cos*a.acrossX-sin*a.alongX, cos*a.acrossY-sin*a.alongY)
	}
}

// vignettingAt returns the share of the light that reaches (x, y):
// 1 − vignetting·(distance from its centre / farthest corner's)².
func (s Scene) vignettingAt(v View, x, y float64) float64 {
	w, h := float64(s.Camera.Width-1), float64(s.Camera.Height-1)
	cx, cy := w/2+v.VignettingXPx, h/2+v.VignettingYPx
	far := math.Hypot(max(cx, w-cx), max(cy, h-cy))
	return 1 - v.Vignetting*((x-cx)*(x-cx)+(y-cy)*(y-cy))/(far*far)
}

// strayAt returns the stray light at (x, y) in DN: StrayDN in the middle, 1.3 of it at
// the left border, 0.7 at the right.
func (s Scene) strayAt(v View, x float64) float64 {
	return v.StrayDN * (1.3 - 0.6*x/float64(s.Camera.Width-1))
}

// addReference draws the reference patch, which hides what lies under it.
func (s Scene) addReference(plane *raster.Plane, v View) {
	r := s.Reference
	for y := r.YPx; y < r.YPx+r.HeightPx; y++ {
		row := plane.Row(y)
		for x := r.XPx; x < r.XPx+r.WidthPx; x++ {
			row[x] = float32(v.ReferenceDN)
		}
	}
}
