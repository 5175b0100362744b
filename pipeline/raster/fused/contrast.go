package fused

// #include "contrast.h"
import "C"

import (
	"errors"
	"fmt"
	"sync"
	"unsafe"

	"lapgate/pipeline/raster"
)

// Contrast returns the pixels of a region in units of their noise: corrected counts above
// the level, over the noise, both by a grid that Find measured on this frame. It is 0
// outside the region and where a pixel is bad. The rows are worked on in bands at once.
func (c *Correction) Contrast(raw raster.Raw, region []raster.Span, g *raster.Grid, bands int) (*raster.Plane, error) {
	if err := raw.Check(); err != nil {
		return nil, err
	}
	columns, rows := (c.width+g.CellPx-1)/g.CellPx, (c.height+g.CellPx-1)/g.CellPx
	switch {
	case raw.Format != c.format || raw.Width != c.width || raw.Height != c.height:
		return nil, fmt.Errorf("frame: got %s of %d × %d px, the correction is for %s of %d × %d", raw.Format, raw.Width, raw.Height,
			c.format, c.width, c.height)
	case g.Columns != columns || g.Rows != rows || len(g.Level) != columns*rows || len(g.Noise) != columns*rows:
		return nil, fmt.Errorf("grid: got %d × %d cells, want %d × %d", g.Columns, g.Rows, columns, rows)
	}
	j := newJob(c, raw, region, Settings{Grid: raster.GridSettings{CellPx: g.CellPx, ClipSigma: 3}})
	defer j.pin.Unpin()
	j.frame.scale, j.frame.use_float = C.double(c.scale), 0
	if !c.integer {
		j.frame.scale, j.frame.use_float = 1, 1
	}
	out := raster.NewPlane(c.width, c.height)
	errs := make([]error, max(bands, 1))
	var wait sync.WaitGroup
	for i := range errs {
		wait.Go(func() {
			errs[i] = firstError(C.pg_contrast(j.frame, (*C.double)(unsafe.SliceData(g.Level)), (*C.double)(unsafe.SliceData(g.Noise)),
				C.int32_t(columns), C.int32_t(rows), C.int32_t(i*c.height/len(errs)), C.int32_t((i+1)*c.height/len(errs)),
				(*C.float)(unsafe.SliceData(out.Pix))))
		})
	}
	wait.Wait()
	return out, errors.Join(errs...)
}
