// Package raster holds images and the arithmetic on them in plain Go: the slow,
// obvious reference. It knows nothing of parts, recipes or limits.
//
// Coordinates are pixels, 0-based, x to the right, y down; the centre of the
// first pixel is (0, 0).
package raster
