// The middle of some values, and the mean of their middle half.
#include <string.h>

#include "lines.h"

enum { LANES = 8, LAST_TURN = 100 };

// count returns how many of v lie below a limit.
LN_KERNEL int32_t count(const float *restrict v, int32_t n, float limit) {
	int32_t below = 0;
	for (int32_t i = 0; i < n; i++)
		below += v[i] < limit;
	return below;
}

typedef float floats __attribute__((vector_size(4 * LANES)));
typedef int32_t masks __attribute__((vector_size(4 * LANES)));

// between returns the sum of v from low on below high, and of their squares. Both are taken
// in lanes, in the same order by all clones.
LN_KERNEL double between(const float *v, int32_t n, float low, float high, double *squares) {
	floats sum = {0}, square = {0};
	int32_t i = 0;
	for (; i + LANES <= n; i += LANES) {
		floats x;
		memcpy(&x, v + i, sizeof x);
		x = (floats)((masks)x & (x >= low) & (x < high));
		sum += x;
		square += x * x;
	}
	double all = 0;
	*squares = 0;
	for (; i < n; i++)
		if (v[i] >= low && v[i] < high)
			all += v[i], *squares += v[i] * v[i];
	for (int k = 0; k < LANES; k++)
		all += sum[k], *squares += square[k];
	return all;
}

// split returns a limit between low and high, or beyond them if need be, below which k
// values lie, and how many really do: fewer where the next ones are equal. It is looked for
// where the values would be if they lay evenly, at every third turn halfway.
static float split(const float *v, int32_t n, int32_t k, float low, float high, int32_t *below) {
	int32_t over = count(v, n, high);
	*below = count(v, n, low);
	for (float by = high - low; *below > k && by < __FLT_MAX__; by *= 2)
		*below = count(v, n, low -= by);
	for (float by = high - low; over < k && by < __FLT_MAX__; by *= 2)
		over = count(v, n, high += by);
	for (int i = 0; i < LAST_TURN && *below != k; i++) {
		const float share = i % 3 == 2 || over == *below ? 0.5f : ((float)(k - *below) + 0.5f) / (float)(over - *below + 1);
		const float middle = low + share * (high - low);
		const int32_t c = count(v, n, middle);
		if (c > k) {
			high = middle;
			over = c;
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
