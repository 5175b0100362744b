// Clipped sigma of a cell's filtered samples, in terms of the kernels included before.
#include <string.h>

#include "parts.h"

enum { LEAST_SAMPLES = 24, CLIP_PASSES = 8 };

// pack copies the samples that count, row by row, and returns how many they are.
PG_INLINE int pack(T *packed, const T *v, int pitch, int rows, int columns) {
	int n = 0;
	for (int k = 0; k < rows; k++, v += pitch) {
		T least = v[0];
		for (int x = 1; x < columns; x++)
			least = v[x] < least ? v[x] : least;
		if (least != OUTSIDE) {
			memmove(packed + n, v, sizeof(T) * (size_t)columns);
			n += columns;
			continue;
		}
		for (int x = 0; x < columns; x++) {
			packed[n] = v[x];
			n += packed[n] != OUTSIDE;
		}
	}
	return n;
}

// sample_sigma returns the clipped sigma (DN) of rows × columns samples of unit units per
// DN, or −1 when fewer than LEAST_SAMPLES count: raster's clipper.moments, with floor in
// DN. packed holds as many, or is NULL where all of them count. guess is the median of the
// distances to the median of a cell like it, and becomes that of this one.
PG_WHOLE double sample_sigma(const pg_frame *f, T *v, int pitch, int rows, int columns, T *packed, double unit, double floor, double *guess) {
	int n = packed || pitch != columns ? pack(packed ? packed : v, v, pitch, rows, columns) : rows * columns;
	packed = packed ? packed : v;
	if (n < LEAST_SAMPLES)
		return -1;
	double mean = 0, sigma = *guess, last = -1, m[3];
	middles(packed, n, &mean, &sigma);
	*guess = sigma;
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
