// The middle of some values, and the mean of their middle half.
#include "lines.h"

enum { LANES = 16, LAST_BISECTION = 40 };

// count returns how many of v lie below a limit.
LN_KERNEL int32_t count(const float *restrict v, int32_t n, float limit) {
	int32_t below = 0;
	for (int32_t i = 0; i < n; i++)
		below += v[i] < limit;
	return below;
}

// A sum is taken in lanes, in the same order by all clones.
typedef struct {
	float lane[LANES], square[LANES];
} lanes;

LN_KERNEL void total(const float *restrict v, int32_t n, float low, float high, lanes *restrict out) {
	lanes t = {{0}, {0}};
	int32_t i = 0;
	for (; i + LANES <= n; i += LANES)
		for (int k = 0; k < LANES; k++) {
			const float x = v[i + k] >= low && v[i + k] < high ? v[i + k] : 0;
			t.lane[k] += x;
			t.square[k] += x * x;
		}
	for (; i < n; i++)
		if (v[i] >= low && v[i] < high)
			t.lane[0] += v[i], t.square[0] += v[i] * v[i];
	*out = t;
}

// between returns the sum of v from low on below high, and of their squares.
static double between(const float *v, int32_t n, float low, float high, double *squares) {
	lanes t;
	double sum = 0;
	total(v, n, low, high, &t);
	*squares = 0;
	for (int k = 0; k < LANES; k++)
		sum += t.lane[k], *squares += t.square[k];
	return sum;
}

// split returns a limit between low and high, or beyond them if need be, below which k
// values lie, and how many really do: fewer where the next ones are equal.
static float split(const float *v, int32_t n, int32_t k, float low, float high, int32_t *below) {
	for (float by = high - low; (*below = count(v, n, low)) > k && by < __FLT_MAX__; by *= 2)
		low -= by;
	for (float by = high - low; count(v, n, high) < k && by < __FLT_MAX__; by *= 2)
		high += by;
	for (int i = 0; i < LAST_BISECTION && *below != k; i++) {
		const float middle = 0.5f * (low + high);
		const int32_t c = count(v, n, middle);
		if (c > k) {
			high = middle;
			continue;
		}
		low = middle;
		*below = c;
	}
	return low;
}

// A quarter of any values lies no more than √3 of their sigmas from the mean on its side,
// 1/√3 beyond it (Cantelli's inequality); a little more for rounding.
#define FAR 1.74
#define NEAR 0.59

typedef struct {
	double mean, sigma;
} moments;

static moments moments_of(const float *v, int32_t n) {
	double squares;
	const double mean = between(v, n, -__FLT_MAX__, __FLT_MAX__, &squares) / n, variance = squares / n - mean * mean;
	return (moments){mean, __builtin_sqrt(variance > 0 ? variance : 0) + 1e-6 * __builtin_fabs(mean) + 1e-12};
}

double ln_middle(const float *v, int32_t n) {
	if (n < 1)
		return 0;
	const moments m = moments_of(v, n);
	const int32_t first = n / 4, end = n - n / 4;
	int32_t under, within;
	double squares;
	const float low = split(v, n, first, (float)(m.mean - FAR * m.sigma), (float)(m.mean + NEAR * m.sigma), &under);
	const float high = split(v, n, end, (float)(m.mean - NEAR * m.sigma), (float)(m.mean + FAR * m.sigma), &within);
	const double sum = between(v, n, low, high, &squares);
	return (sum - (first - under) * (double)low + (end - within) * (double)high) / (end - first);
}

LN_KERNEL float lowest_from(const float *restrict v, int32_t n, float limit) {
	float low = __FLT_MAX__;
	for (int32_t i = 0; i < n; i++)
		low = v[i] >= limit && v[i] < low ? v[i] : low;
	return low;
}

float ln_median(const float *v, int32_t n) {
	const moments m = moments_of(v, n);
	int32_t below;
	return lowest_from(v, n, split(v, n, n / 2, (float)(m.mean - 1.01 * m.sigma), (float)(m.mean + 1.01 * m.sigma), &below));
}
