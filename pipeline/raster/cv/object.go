//go:build gocv_specific_modules

package cv

import (
	"math"

	"lapgate/pipeline/raster"
)

// Object is one object of the tuned chain. Lengths are in px, heights in DN.
type Object struct {
	Component
	Length, Width, Angle float64 // 4√λ of the weighted second moments; degrees
	Flux, Peak           float64
	PeakSNR, SNR         float64
}

// measure returns the components that reach the high threshold.
func (c *TunedChain) measure(n int) ([]Object, error) {
	labels, err := c.labels.DataPtrUint16()
	if err != nil {
		return nil, err
	}
	snr, err := c.snr.DataPtrFloat32()
	if err != nil {
		return nil, err
	}
	signal, err := c.signal.DataPtrFloat32()
	if err != nil {
		return nil, err
	}
	noise, err := c.noise.DataPtrFloat32()
	if err != nil {
		return nil, err
	}
	p := pixels{c.width, labels, snr, signal, noise}
	var out []Object
	for i := 1; i < n; i++ {
		if o := (Object{Component: componentAt(c.stats, c.centroids, i)}); p.measure(&o, uint16(i), c.high) {
			out = append(out, o)
		}
	}
	return out, nil
}

type pixels struct {
	width              int
	labels             []uint16
	snr, signal, noise []float32
}

// measure fills o from the pixels of one label; false when none reaches high.
func (p pixels) measure(o *Object, label uint16, high float32) bool {
	var s, x, y, xx, yy, xy, variance float64
	for v := o.Y0; v < o.Y1; v++ {
		for u := o.X0; u < o.X1; u++ {
			i := v*p.width + u
			if p.labels[i] != label {
				continue
			}
			o.PeakSNR = max(o.PeakSNR, float64(p.snr[i])/(raster.MatchedGain*meanToSigma))
			w, dx, dy := float64(p.signal[i]), float64(u-o.X0), float64(v-o.Y0)
			o.Peak = max(o.Peak, w)
			n := float64(p.noise[i]) * meanToSigma
			variance += n * n
			s, x, y = s+w, x+w*dx, y+w*dy
			xx, yy, xy = xx+w*dx*dx, yy+w*dy*dy, xy+w*dx*dy
		}
	}
	if o.PeakSNR < float64(high) || s <= 0 {
		return false
	}
	o.Flux, o.SNR = s, s/math.Sqrt(max(variance, 1e-30))
	o.axes(x/s, y/s, xx/s, yy/s, xy/s)
	return true
}

// axes sets centre and axes from the moments about the box's corner.
func (o *Object) axes(x, y, xx, yy, xy float64) {
	a, b, c := xx-x*x+1./12, yy-y*y+1./12, xy-x*y
	half, root := (a+b)/2, math.Hypot((a-b)/2, c)
	o.Length, o.Width = 4*math.Sqrt(max(half+root, 0)), 4*math.Sqrt(max(half-root, 0))
	o.Angle = math.Atan2(c, (a-b)/2) / 2 * 180 / math.Pi
	o.X, o.Y = x+float64(o.X0), y+float64(o.Y0)
}
