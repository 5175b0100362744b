// Row kernels in floats, for counts of up to 16 bits and for corrections that 16-bit
// integers do not hold. Same functions as kernels_int.h; values are in DN.
#include <stdlib.h>

#include "correct.h"
#include "parts.h"

typedef float T;
typedef float BOUND;
#define WIDEST 1e30f
#define OUTSIDE (-3e38f)

PG_KERNEL int row_value(const pg_frame *f, T *restrict v, uint16_t *restrict tmp, int y, int x0, int x1) {
	pg_correct(f, v, tmp, y, x0, x1);
	int top = 0;
	if (f->layout == PG_BYTES) {
		const uint8_t *r = pg_row(f, y);
		for (int x = x0; x < x1; x++)
			top = r[x] > top ? r[x] : top;
	} else {
		const uint16_t *r = pg_unpack(f, tmp, y, x0, x1);
		for (int x = x0; x < x1; x++)
			top = r[x] > top ? r[x] : top;
	}
	return top;
}

static T replaced(const pg_frame *f, int x, int y, unsigned good) {
	(void)good;
	return pg_replaced(f, x, y);
}

// moments_block sums in eight lanes, so that the order of the sums is the same however wide
// the vectors are.
PG_INLINE void moments_block(const T *restrict a, const T *restrict b, const T *restrict c, const T *restrict d, int x0, int x1, T low,
                             T high, T mid, double *restrict out) {
	const T *rows[4] = {a, b, c, d};
	float n[8] = {0}, sum[8] = {0}, sum2[8] = {0};
	for (int k = 0; k < 4; k++) {
		const T *r = rows[k];
		int x = x0;
		for (; x + 8 <= x1; x += 8)
			for (int i = 0; i < 8; i++) {
				float in = r[x + i] >= low && r[x + i] <= high ? 1.f : 0.f, e = in > 0 ? r[x + i] - mid : 0.f;
				n[i] += in;
				sum[i] += e;
				sum2[i] += e * e;
			}
		for (; x < x1; x++)
			if (r[x] >= low && r[x] <= high) {
				n[0] += 1;
				sum[0] += r[x] - mid;
				sum2[0] += (r[x] - mid) * (r[x] - mid);
			}
	}
	for (int i = 0; i < 8; i++) {
		out[0] += n[i];
		out[1] += sum[i];
		out[2] += sum2[i];
	}
}

PG_KERNEL void row_signal(T *restrict s, const T *restrict v, const T *restrict top, const T *restrict slope,
                          double fraction, int shift, int y, T least, T most, int negate, int x0, int x1, const pg_stream *next) {
	const float fy = (float)fraction, sign = negate ? -1.f : 1.f;
	(void)shift, (void)y, (void)least, (void)most, (void)next;
	for (int x = x0; x < x1; x++)
		s[x] = sign * (v[x] - (top[x] + fy * slope[x]));
}

PG_INLINE T taps(T a, T b, T c, T d, T e) { return (a + e) * (1.f / 16) + (b + d) * (4.f / 16) + c * (6.f / 16); }

PG_INLINE T to_value(const pg_frame *f, double dn) {
	(void)f;
	return (float)dn;
}

PG_INLINE float threshold(double v) { return v < 1e-30 ? 1e-30f : (float)v; }

PG_INLINE void bounds_of(const pg_frame *f, double mean, double reach, T *low, T *high, T *mid) {
	(void)f;
	*mid = (float)mean;
	*low = (float)(mean - reach);
	*high = (float)(mean + reach);
}

PG_KERNEL void ramp(T *restrict top, T *restrict slope, int x0, int x1, double a, double b, double c, double d, double fx,
                    int cell, double scale, int shift) {
	(void)scale, (void)shift;
	for (int i = 0; i < x1 - x0; i++) {
		double fraction = fx + (double)i / cell;
		double upper = a + fraction * (b - a);
		top[x0 + i] = (float)upper;
		slope[x0 + i] = (float)(c + fraction * (d - c) - upper);
	}
}

static void sample_moments(const T *restrict v, int n, float low, float high, int shift, double *restrict out) {
	(void)shift;
	out[0] = out[1] = out[2] = 0;
	for (int x = 0; x < n; x++)
		if (v[x] >= low && v[x] <= high) {
			out[0] += 1;
			out[1] += v[x];
			out[2] += v[x] * v[x];
		}
}

static int by_value(const void *a, const void *b) {
	float x = *(const float *)a, y = *(const float *)b;
	return x < y ? -1 : x > y;
}

// middles sorts v.
static void middles(T *v, int n, double *median, double *deviation) {
	qsort(v, (size_t)n, sizeof(float), by_value);
	double m = v[n / 2];
	int below = 0, above = 0; // the nearest n/2 + 1 to the median, from the median outwards
	for (int k = 0; k < n / 2; k++) {
		int left = n / 2 - below - 1, right = n / 2 + above + 1;
		if (right >= n || (left >= 0 && m - v[left] < v[right] - m))
			below++;
		else
			above++;
	}
	*median = m;
	*deviation = __builtin_fmax(m - v[n / 2 - below], v[n / 2 + above] - m);
}

PG_INLINE T to_sample(float v) { return v; }
#define SAMPLE_SCALE 1
#define ROUNDING 0
