package lines

// #cgo CFLAGS: -O3 -std=c11 -Wall -Wextra
// #cgo LDFLAGS: -lm
// #include "lines.h"
import "C"

import (
	"errors"
	"runtime"
	"unsafe"

	"lapgate/pipeline/raster"
)

var errMemory = errors.New("lines: no memory left for the search of a picture")

// work is the picture in steps of a fraction of sigma, and the memory of its search.
type work struct {
	c             *C.ln_work
	width, height int
	thickness     float64 // of the lines looked for, px of this picture
	weights       *weights
	sampled       sampled
}

func newWork(width, height int, thickness float64) (*work, error) {
	c := C.ln_work_new(C.int32_t(width), C.int32_t(height))
	if c == nil {
		return nil, errMemory
	}
	w := &work{c: c, width: width, height: height, thickness: thickness, weights: newWeights(thickness)}
	runtime.AddCleanup(w, func(c *C.ln_work) { C.ln_work_free(c) }, c)
	return w, nil
}

// load takes the plane; what lies outside the region's spans, or is bad (nil = nothing),
// does not count. With half the picture has half the plane's sides, rounded down.
func (w *work) load(p *raster.Plane, region []raster.Span, bad *raster.Mask, half bool) {
	step, flag := 1, C.int32_t(0)
	if half {
		step, flag = 2, 1
	}
	for y := range w.height {
		a := p.Row(y * step)
		b := a
		if half {
			b = p.Row(y*2 + 1)
		}
		C.ln_quantise(w.c, C.int32_t(y), (*C.float)(unsafe.SliceData(a)), (*C.float)(unsafe.SliceData(b)), flag)
	}
	w.cut(region, p.Width, p.Height, step)
	if bad != nil {
		w.cutBad(bad, step)
	}
}

// cut makes what the spans leave out not count; they are in the order of rows.
func (w *work) cut(region []raster.Span, width, height, step int) {
	y, x := 0, 0
	gap := func(y, x0, x1 int) {
		if x1 > x0 {
			w.erase(y/step, x0/step, (x1+step-1)/step)
		}
	}
	for _, s := range region {
		for ; y < s.Y && y < height; y, x = y+1, 0 {
			gap(y, x, width)
		}
		gap(y, x, s.X0)
		x = max(x, s.X1)
	}
	for ; y < height; y, x = y+1, 0 {
		gap(y, x, width)
	}
}

func (w *work) cutBad(bad *raster.Mask, step int) {
	for y := range bad.Height {
		row := bad.Row(y)
		for x := indexTrue(row, 0); x >= 0; x = indexTrue(row, x+1) {
			w.erase(y/step, x/step, x/step+1)
		}
	}
}

func (w *work) erase(y, x0, x1 int) {
	C.ln_erase(w.c, C.int32_t(y), C.int32_t(x0), C.int32_t(x1))
}

// hits searches all strips and returns the lines through one that stand out, and how the
// sums spread. They are in C's memory until the next search.
func (w *work) hits(s Settings) ([]C.ln_hit, *spread, error) {
	C.ln_clear(w.c)
	sp := newSpread(w.width, w.height)
	for axis := range sp.axes {
		a := &sp.axes[axis]
		for i, first := range a.first {
			if C.ln_strip(w.c, C.int32_t(axis), C.int32_t(first), C.double(s.Seed), C.int32_t(s.Polarity), (*C.float)(unsafe.SliceData(a.of(i)))) != 0 {
				return nil, nil, errMemory
			}
		}
		a.settle()
	}
	var n C.int32_t
	p := C.ln_hits(w.c, &n)
	return unsafe.Slice((*C.ln_hit)(p), int(n)), sp, nil
}

func (w *work) eraseAlong(k stretch, reach int) {
	C.ln_erase_along(w.c, k.c(), C.int32_t(reach))
}
