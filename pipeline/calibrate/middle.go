package calibrate

import "lapgate/pipeline/raster"

// middle returns the element that would stand at len(v)/2 if v were sorted, and
// reorders v (raster.Nth). v is not empty and holds no NaN.
func middle(v []float32) float32 { return raster.Nth(v, len(v)/2) }

// medianOf returns the median of a plane.
func medianOf(p *raster.Plane) float64 { return float64(middle(p.Clone().Pix)) }
