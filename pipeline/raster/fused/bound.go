package fused

// #include "bound.h"
import "C"

import "lapgate/pipeline/raster"

// Read reads what Find reads of frame and correction on one thread, in 16-bit integers and
// with no other work: the time it takes is a lower bound for Find's. The frame must be one
// that Find accepts. It returns a sum, so that the reading is not left out.
func (c *Correction) Read(raw raster.Raw, s Settings) uint64 {
	j := newJob(c, raw, nil, s)
	defer j.pin.Unpin()
	return uint64(C.pg_read(j.frame))
}
