package lines

// #cgo noescape ln_part
// #cgo nocallback ln_part
// #cgo noescape ln_sum
// #cgo nocallback ln_sum
// #cgo noescape ln_settle
// #cgo nocallback ln_settle
// #cgo noescape ln_profile
// #cgo nocallback ln_profile
// #include "lines.h"
import "C"

import (
	"math"
	"unsafe"

	"lapgate/pipeline/raster"
)

// stretch is a straight piece of line from cross ca at position a to cb at b, both
// included: axis 0 runs along y with x across, axis 1 along x with y across.
type stretch struct {
	axis   int
	a, b   int
	ca, cb float64
}

func (k stretch) c() C.ln_stretch {
	return C.ln_stretch{axis: C.int32_t(k.axis), a: C.int32_t(k.a), b: C.int32_t(k.b), ca: C.double(k.ca), cb: C.double(k.cb)}
}

func (k stretch) slope() float64 {
	if k.b == k.a {
		return 0
	}
	return (k.cb - k.ca) / float64(k.b-k.a)
}

// at returns the cross position at m.
func (k stretch) at(m int) float64 { return k.ca + k.slope()*float64(m-k.a) }

// length is from the outer edges of the end pixels, px.
func (k stretch) length() float64 { return float64(k.b-k.a+1) * math.Hypot(1, k.slope()) }

// resized returns the stretch on the same line from a to b.
func (k stretch) resized(a, b int) stretch {
	return stretch{axis: k.axis, a: a, b: b, ca: k.at(a), cb: k.at(b)}
}

func (k stretch) point(m float64, c float64) raster.Point {
	if k.axis == 0 {
		return raster.Point{X: c, Y: m}
	}
	return raster.Point{X: m, Y: c}
}

// ends are half a pixel out from the middles of the end pixels.
func (k stretch) ends() (p, q raster.Point) {
	half := k.slope() / 2
	return k.point(float64(k.a)-0.5, k.ca-half), k.point(float64(k.b)+0.5, k.cb+half)
}

// between returns the stretch over the pixels from p to q whose middles lie between them,
// along the axis to which the direction is nearer; ok is false where there is none.
func between(p, q raster.Point) (k stretch, ok bool) {
	m0, c0, m1, c1 := p.Y, p.X, q.Y, q.X
	if math.Abs(q.X-p.X) > math.Abs(q.Y-p.Y) {
		k.axis = 1
		m0, c0, m1, c1 = p.X, p.Y, q.X, q.Y
	}
	if m1 < m0 {
		m0, c0, m1, c1 = m1, c1, m0, c0
	}
	k.a, k.b = int(math.Ceil(m0)), int(math.Ceil(m1))-1
	if k.b < k.a || m1 <= m0 {
		return k, false
	}
	slope := (c1 - c0) / (m1 - m0)
	k.ca, k.cb = c0+slope*(float64(k.a)-m0), c0+slope*(float64(k.b)-m0)
	return k, true
}

// upright returns the stretch along the axis to which its direction is nearer.
func (k stretch) upright() stretch {
	if math.Abs(k.slope()) <= 1.02 {
		return k
	}
	p, q := k.ends()
	if turned, ok := between(p, q); ok {
		return turned
	}
	return k
}

// total is what sums along a line make: Σ weight·value, in sigmas, and Σ weight².
type total struct{ sum, weight float64 }

func (t total) plus(o total) total { return total{t.sum + o.sum, t.weight + o.weight} }

// rounding is the variance of a pixel of unit noise in odd steps.
const rounding = 1 + 4./(12*C.LN_UNIT*C.LN_UNIT)

// sigmas is the sum over its spread in white noise; 0 without pixels.
func (t total) sigmas(sign int) float64 {
	if t.weight <= 0 {
		return 0
	}
	return float64(sign) * t.sum / math.Sqrt(rounding*t.weight)
}

func (f *finder) sum(k stretch) total {
	t := C.ln_sum(f.work.c, k.c(), f.weights.of(k.slope()))
	return total{float64(t.sum), float64(t.weight)}
}

// profile returns what each position of a stretch adds; empty where it leaves the picture.
func (f *finder) profile(k stretch) []total {
	out := make([]total, max(k.b-k.a+1, 1))
	n := C.ln_profile(f.work.c, k.c(), f.weights.of(k.slope()), (*C.ln_total)(unsafe.Pointer(unsafe.SliceData(out))))
	return out[:n]
}

// settle moves both ends across by up to reach steps to where the sum stands out most.
func (f *finder) settle(k stretch, reach int, step float64, sign int) (stretch, total) {
	var t C.ln_total
	s := C.ln_settle(f.work.c, k.c(), f.weights.of(k.slope()), C.int32_t(reach), C.double(step), C.int32_t(sign), &t)
	k.ca, k.cb = float64(s.ca), float64(s.cb)
	return k, total{float64(t.sum), float64(t.weight)}
}

// part returns the first and the last position of the part of a stretch that stands out
// most; ok is false where the stretch leaves the picture or is too short.
func (f *finder) part(k stretch, sign int, noise scatter) (first, last int, ok bool) {
	var i, j C.int32_t
	n := C.ln_part(f.work.c, k.c(), f.weights.of(k.slope()), C.int32_t(sign), noise.c(), &i, &j)
	return int(i), int(j), n >= leastPositions
}
