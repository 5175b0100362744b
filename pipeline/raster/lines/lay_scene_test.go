package lines

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline/raster"
)

// layNoise is white noise with lay in it, 16 tones of a normal spread of 15 % about
// 1/period, together in units of a pixel's sigma. With a centre it is concentric, else its
// lines run along angle (rad).
func layNoise(width, height int, seed uint64, rms, period, angle float64, centre *raster.Point) *raster.Plane {
	p, r := noise(width, height, seed), rand.New(rand.NewPCG(seed, 99))
	var f, phase [16]float64
	for k := range f {
		f[k], phase[k] = 2*math.Pi*math.Abs(1+0.15*r.NormFloat64())/period, 2*math.Pi*r.Float64()
	}
	reach := math.Hypot(float64(width), float64(height))
	profile := make([]float64, int(8*reach)+2)
	for i := range profile {
		for k := range f {
			profile[i] += rms * math.Sqrt(2./16) * math.Sin(phase[k]+f[k]*float64(i)/4)
		}
	}
	sin, cos := math.Sincos(angle)
	for y := range height {
		for x := range width {
			d := float64(y)*cos - float64(x)*sin
			if centre != nil {
				d = math.Hypot(float64(x)-centre.X, float64(y)-centre.Y)
			}
			v := float64(p.At(x, y)) + profile[int(4*(d+reach))]
			p.Set(x, y, float32(v/math.Sqrt(1+rms*rms)))
		}
	}
	return p
}
