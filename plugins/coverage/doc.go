// Package coverage is the stage that says how small a dig and how faint a scratch would
// have been found in every cell of the background grid, and from that how much of the
// region was inspected. It finds nothing itself.
//
// A disc of diameter d and contrast c, seen through a point spread of sigma b (px), the
// pixel's own width (1/12 px² of variance) and the matched filter (1 px²), peaks at
//
//	c · (1 − exp(−d² / 8s²)),  s² = (b² + 1/12 + 1) / g²
//
// and a long scratch of width w at c · erf(w / (2√2 s)); g, about 0.95, is what the nearest
// pixel shows in the mean over all places between pixels. The cell's smallest are those
// whose peak reaches k_high · noise · raster.MatchedGain; they are found with probability
// one half. Where the calibration has a sizing curve and no contrast is stated, c is that
// of a dig of this diameter on the curve. All contrasts are multiplied by the light that
// the stage proof measured, so a weak lamp covers less. A cell with rows or blocks of one
// value, which no living sensor sends, is not inspected, however quiet it is.
package coverage
