// Clipped sigma of a cell's filtered samples, in terms of the kernels included before.
#include "parts.h"

enum { LEAST_SAMPLES = 24, CLIP_PASSES = 8 };

// sample_sigma returns the clipped sigma (DN) of rows × columns samples of unit units per
// DN, or −1 when fewer than LEAST_SAMPLES count: raster's clipper.moments, with floor in
// DN. packed holds as many.
static double sample_sigma(const pg_frame *f, const T *v, int pitch, int rows, int columns, T *packed, double unit, double floor) {
	int n = 0;
	for (int k = 0; k < rows; k++)
		for (int x = 0; x < columns; x++) {
			packed[n] = v[(int64_t)k * pitch + x];
			n += packed[n] != OUTSIDE;
		}
	if (n < LEAST_SAMPLES)
		return -1;
	double mean, sigma, last = -1, m[3];
	middles(packed, n, &mean, &sigma);
	sigma = 1.4826 * (sigma + floor * unit);
	int shift = 0;
	while (!f->use_float && (2 * f->clip * sigma + __builtin_fabs(mean)) / (1 << shift) > PG_REACH * 16 / __builtin_sqrt((double)n))
		shift++;
	double step = 1 << shift;
	for (int i = 0; i < CLIP_PASSES; i++) {
		double low = (mean - f->clip * sigma) / step, high = (mean + f->clip * sigma) / step;
		sample_moments(packed, n, (BOUND)low, (BOUND)high, shift, m);
		if (m[0] < 1 || m[0] == last)
			break;
		last = m[0];
		mean = m[1] / m[0] * step;
		double variance = m[2] / m[0] * step * step - mean * mean - ROUNDING;
		sigma = variance > 0 ? __builtin_sqrt(variance) / f->shrink : 0;
	}
	return sigma / unit;
}
