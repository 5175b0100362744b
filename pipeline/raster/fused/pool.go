package fused

// #cgo CFLAGS: -O3 -std=c11 -Wall -Wextra
// #cgo LDFLAGS: -lm
// #include "objects.h"
import "C"

import (
	"errors"
	"runtime"
	"sync"
)

var errMemory = errors.New("fused: no memory left for the rows of a frame")

// band owns the C memory of one band of rows.
type band struct{ c *C.pg_band }

// pool keeps bands between frames. Those of another shape than asked for are dropped.
type pool struct{ free sync.Pool }

func (p *pool) get(width, cell int, float bool) (*band, error) {
	want := C.int32_t(0)
	if float {
		want = 1
	}
	if b, ok := p.free.Get().(*band); ok && int(b.c.cell) == cell && b.c.is_float == want {
		return b, nil
	}
	c := C.pg_band_new(C.int32_t(width), C.int32_t(cell), want)
	if c == nil {
		return nil, errMemory
	}
	b := &band{c}
	runtime.AddCleanup(b, func(c *C.pg_band) { C.pg_band_free(c) }, c)
	return b, nil
}

func (p *pool) put(bands []*band) {
	for _, b := range bands {
		p.free.Put(b)
	}
}
