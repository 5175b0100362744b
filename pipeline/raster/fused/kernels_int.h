// Row kernels in 16-bit integers for counts of 8 to 12 bits. Written so that a compiler
// turns each loop into vector code; no result depends on how wide the vectors are.
#include <string.h>

#include "correct.h"
#include "parts.h"

typedef int16_t T;
typedef int BOUND;
#define WIDEST 32767
#define OUTSIDE INT16_MIN
#define SAMPLE_SCALE 4 // sampled block means keep two bits more
#define CLAMP 8191 // what the filters' sums hold: see taps

#define VALUE_LOOP(D, V)                      \
	for (int x = x0; x < x1; x++) {           \
		top = r[x] > top ? r[x] : top;        \
		int16_t d = (int16_t)(r[x] * factor); \
		D;                                    \
		V;                                    \
	}
#define LESS_OFFSET d = (int16_t)(d - o[x])
#define TIMES_GAIN v[x] = (int16_t)((((int32_t)d * g[x] >> 14) + 1) >> 1)

#define VALUE_CASES                                \
	const int16_t factor = (int16_t)f->factor;     \
	if (o && g)                                    \
		VALUE_LOOP(LESS_OFFSET, TIMES_GAIN)        \
	else if (o)                                    \
		VALUE_LOOP(LESS_OFFSET, v[x] = d)          \
	else if (g)                                    \
		VALUE_LOOP((void)0, TIMES_GAIN)            \
	else                                           \
		VALUE_LOOP((void)0, v[x] = d)              \
	return top;

PG_KERNEL int value_bytes(const pg_frame *f, T *restrict v, const uint8_t *restrict r, const int16_t *restrict o,
                          const int16_t *restrict g, int x0, int x1) {
	uint8_t top = 0;
	VALUE_CASES
}

PG_KERNEL int value_words(const pg_frame *f, T *restrict v, const uint16_t *restrict r, const int16_t *restrict o,
                          const int16_t *restrict g, int x0, int x1) {
	uint16_t top = 0;
	VALUE_CASES
}

// row_value writes the corrected counts of row y and returns the highest count.
PG_INLINE int row_value(const pg_frame *f, T *restrict v, uint16_t *restrict tmp, int y, int x0, int x1) {
	int64_t at = (int64_t)y * f->width;
	const int16_t *o = f->offset ? f->offset + at : 0, *g = f->gain ? f->gain + at : 0;
	if (f->layout == PG_BYTES)
		return value_bytes(f, v, pg_row(f, y), o, g, x0, x1);
	return value_words(f, v, pg_unpack(f, tmp, y, x0, x1), o, g, x0, x1);
}

PG_INLINE T to_value(const pg_frame *f, double dn) {
	double v = dn * f->scale + 32768.5;
	return (int16_t)((v < 1.5 ? 1 : v > 65535 ? 65535 : (int32_t)v) - 32768);
}

// value_one is what row_value writes for one pixel.
static int value_one(const pg_frame *f, int x, int y) {
	int64_t at = (int64_t)y * f->width + x;
	int16_t d = (int16_t)(pg_count(f, pg_row(f, y), x) * (uint32_t)f->factor);
	d = f->offset ? (int16_t)(d - f->offset[at]) : d;
	return f->gain ? (((int32_t)d * f->gain[at] >> 14) + 1) >> 1 : d;
}

// replaced is the median of the good ones of the eight neighbours of a bad pixel.
static T replaced(const pg_frame *f, int x, int y, unsigned good) {
	static const int8_t dx[8] = {-1, 0, 1, -1, 1, -1, 0, 1}, dy[8] = {-1, -1, -1, 0, 0, 1, 1, 1};
	int near[8], n = 0;
	for (int k = 0; k < 8; k++) {
		if (!(good >> k & 1))
			continue;
		int c = value_one(f, x + dx[k], y + dy[k]), i = n++;
		for (; i > 0 && near[i - 1] > c; i--)
			near[i] = near[i - 1];
		near[i] = c;
	}
	return n == 0 ? to_value(f, pg_replaced(f, x, y)) : (T)((near[n / 2] + near[(n - 1) / 2]) / 2);
}

// inside is v − mid where v lies from low to low + range, and 0 elsewhere; *n counts down
// by one.
PG_INLINE int16_t inside(int16_t v, int16_t low, uint16_t range, int16_t mid, int16_t *n) {
	int16_t in = (int16_t)((uint16_t)(v - low) <= range ? -1 : 0);
	*n = (int16_t)(*n + in);
	return (int16_t)((int16_t)(v - mid) & in);
}

// moments_block adds number, sum and sum of squares about mid of the values from low to
// high in four rows of at most 64 pixels; values within mid ± PG_REACH do not overflow. One
// sum of squares for each row: a compiler turns those into multiply-add steps.
PG_INLINE void moments_block(const T *restrict a, const T *restrict b, const T *restrict c, const T *restrict d, int x0, int x1, T low,
                             T high, T mid, double *restrict out) {
	const uint16_t range = (uint16_t)(high - low);
	int16_t n = 0;
	int32_t sum = 0, p = 0, q = 0, r = 0, s = 0;
	for (int x = x0; x < x1; x++) {
		int16_t count = 0;
		int16_t e = inside(a[x], low, range, mid, &count), f = inside(b[x], low, range, mid, &count);
		int16_t g = inside(c[x], low, range, mid, &count), h = inside(d[x], low, range, mid, &count);
		n = (int16_t)(n - count);
		sum += (int16_t)(e + f + g + h);
		p += (int32_t)e * e;
		q += (int32_t)f * f;
		r += (int32_t)g * g;
		s += (int32_t)h * h;
	}
	out[0] += n;
	out[1] += sum;
	out[2] += p + q + r + s;
}

// row_signal writes value − level within ±CLAMP. The level
// is top + slope·fy; slope carries shift + 1 more bits and fy 14, and round differs from
// row to row, so that rounding does not add up under the filter.
PG_INLINE void signal_part(T *restrict s, const T *restrict v, const T *restrict top, const T *restrict slope, int16_t fy, int16_t round,
                           int shift, T least, T most, int negate, int x0, int x1) {
	for (int x = x0; x < x1; x++) {
		int16_t step = (int16_t)((((int32_t)slope[x] * fy >> 14) + 1) >> 1);
		int16_t level = (int16_t)(top[x] + (int16_t)((int16_t)(step + round) >> shift));
		int16_t w = v[x] > most ? most : v[x];
		w = w < least ? least : w;
		int16_t d = (int16_t)(negate ? level - w : w - level);
		d = d > CLAMP ? CLAMP : d;
		s[x] = d < -CLAMP ? -CLAMP : d;
	}
}

#define SIGNAL_PART(SHIFT, NEGATE) \
	case SHIFT * 2 + NEGATE: \
		signal_part(s, v, top, slope, fy, round, SHIFT, least, most, NEGATE, from, from + 64); \
		break;

PG_KERNEL void row_signal(T *restrict s, const T *restrict v, const T *restrict top, const T *restrict slope, double fraction,
                          int shift, int y, T least, T most, int negate, int x0, int x1, const pg_stream *next) {
	const int16_t fy = (int16_t)(fraction * 16384 + (fraction < 0 ? -0.5 : 0.5));
	static const int16_t order[4] = {1, 5, 3, 7};
	const int16_t round = (int16_t)(order[y & 3] << shift >> 3);
	int from = x0;
	for (; from + 64 <= x1; from += 64) {
		pg_ask(next, from);
		switch (shift * 2 + (negate != 0)) {
			SIGNAL_PART(0, 0) SIGNAL_PART(0, 1) SIGNAL_PART(1, 0) SIGNAL_PART(1, 1) SIGNAL_PART(2, 0)
			SIGNAL_PART(2, 1) SIGNAL_PART(3, 0) SIGNAL_PART(3, 1) SIGNAL_PART(4, 0) SIGNAL_PART(4, 1)
		}
	}
	signal_part(s, v, top, slope, fy, round, shift, least, most, negate, from, x1);
}

// taps is the binomial filter (a + e + 4(b + d) + 6c)/16, rounded; all terms within
// ±CLAMP keep every partial sum within 16 bits: 4095.5 + 16382 + 12286.5 + 3 ≤ 32767.
PG_INLINE T taps(T a, T b, T c, T d, T e) {
	int16_t ae = (int16_t)(a + e), bd = (int16_t)(b + d);
	return (int16_t)((int16_t)((ae >> 2) + bd + (c + (c >> 1)) + 3) >> 2);
}

PG_INLINE int32_t threshold(double v) { return v < 1 ? 1 : v > 32766 ? 32766 : (int32_t)v; }

// bounds_of is the integer range mean ± reach.
PG_INLINE void bounds_of(const pg_frame *f, double mean, double reach, T *low, T *high, T *mid) {
	*mid = to_value(f, mean);
	double r = reach * f->scale + 0.5;
	int32_t w = r > PG_REACH ? PG_REACH : (int32_t)r, a = *mid - w, b = *mid + w;
	*low = (int16_t)(a < -32767 ? -32767 : a);
	*high = (int16_t)(b > 32767 ? 32767 : b);
}

// ramp writes the level at x0 … x1: bilinear between the nodes a, b (upper row) and c, d
// (lower row), in DN, where x0 lies fx cells right of the left ones. Level is rounded by
// an order that changes with x, see row_signal.
PG_KERNEL void ramp(T *restrict top, T *restrict slope, int x0, int x1, double a, double b, double c, double d, double fx,
                    int cell, double scale, int shift) {
	const float left = (float)(a * scale), across = (float)((b - a) * scale), fine = (float)(2 << shift), step = 1.f / (float)cell;
	const float down = (float)((c - a) * scale) * fine, twist = (float)((d - c - b + a) * scale) * fine, start = (float)fx;
	for (int i = 0; i < x1 - x0; i++) {
		float fraction = start + (float)i * step, order = (float)((i & 1) * 4 + (i & 2) + 1) * (1.f / 8);
		top[x0 + i] = (int16_t)((int32_t)(left + across * fraction + order + 32768.f) - 32768);
		slope[x0 + i] = (int16_t)((int32_t)(down + twist * fraction + 32768.5f) - 32768);
	}
}

enum { PART = 4096 }; // samples that a count in 16 bits holds

// moments_part adds number, sum and sum of squares of up to PART samples (shifted down by
// shift) from low to high.
PG_INLINE void moments_part(const T *restrict v, int n, int16_t low, int16_t high, int shift, int32_t *restrict out) {
	int16_t count = 0;
	int32_t sum = 0, sum2 = 0;
	for (int x = 0; x < n; x++) {
		int16_t d = (int16_t)(v[x] >> shift);
		int16_t in = (int16_t)((d < low ? 0 : -1) & (d > high ? 0 : -1));
		d = (int16_t)(d & in);
		count = (int16_t)(count - in);
		sum += d;
		sum2 += (int32_t)d * d;
	}
	out[0] += count;
	out[1] += sum;
	out[2] += sum2;
}

// sample_moments writes those of n samples. Most are not shifted.
PG_INLINE void sample_moments(const T *restrict v, int n, int low, int high, int shift, double *restrict out) {
	int32_t sums[3] = {0};
	for (int x = 0; x < n; x += PART)
		if (shift == 0)
			moments_part(v + x, n - x < PART ? n - x : PART, (int16_t)low, (int16_t)high, 0, sums);
		else
			moments_part(v + x, n - x < PART ? n - x : PART, (int16_t)low, (int16_t)high, shift, sums);
	for (int k = 0; k < 3; k++)
		out[k] = sums[k];
}

typedef int16_t lanes __attribute__((vector_size(32)));

// outside_lanes counts the samples below a or above b; n is a multiple of 16, up to PART.
PG_INLINE int outside_lanes(const T *v, int n, int16_t a, int16_t b) {
	lanes count = {0}, w;
	uint64_t four[4];
	for (int x = 0; x < n; x += 16) {
		memcpy(&w, v + x, sizeof w);
		count -= (w < a) | (w > b);
	}
	memcpy(four, &count, sizeof four); // no count of a lane, and no sum of four, fills its 16 bits
	return (int)((four[0] + four[1] + four[2] + four[3]) * 0x0001000100010001ull >> 48);
}

// count_between counts the samples from low to high.
PG_INLINE int count_between(const T *restrict v, int n, int low, int high) {
	const int16_t a = (int16_t)(low < -32767 ? -32767 : low), b = (int16_t)(high > 32767 ? 32767 : high);
	int out = n;
	for (int x0 = 0; x0 < n; x0 += PART) {
		const int m = n - x0 < PART ? n - x0 : PART, whole = m & ~15;
		out -= outside_lanes(v + x0, whole, a, b);
		for (int x = x0 + whole; x < x0 + m; x++)
			out -= v[x] < a || v[x] > b;
	}
	return out;
}

// least_with returns the least t with more than n/2 of the samples below centre + t, or
// when mirrored within centre ± t. It is looked for first at guess ± reach.
PG_INLINE int least_with(const T *v, int n, int centre, int mirrored, int guess, int reach, int most) {
	int a = guess - reach, b = guess + reach; // doubled until t lies between
	for (; b < most && count_between(v, n, mirrored ? centre - b : -32767, centre + b) <= n / 2; reach *= 2)
		a = b + 1, b += 2 * reach;
	for (; a > -most && count_between(v, n, mirrored ? centre - a : -32767, centre + a) > n / 2; reach *= 2)
		b = a, a -= 2 * reach;
	while (a < b) {
		int m = a + (b - a) / 2;
		if (count_between(v, n, mirrored ? centre - m : -32767, centre + m) > n / 2)
			b = m;
		else
			a = m + 1;
	}
	return a;
}

// middles finds the median of n samples and the median of their distances to it, both the
// upper of the middle two; they are looked for first about what they hold.
PG_INLINE void middles(T *v, int n, double *median, double *deviation) {
	*median = least_with(v, n, 0, 0, (int)*median, 2, 32768);
	*deviation = least_with(v, n, (int)*median, 1, (int)*deviation, 2, 65536);
}

PG_INLINE T to_sample(float v) { return (int16_t)(v < -32767.f ? -32767.f : v > 32767.f ? 32767.f : v); }

// ROUNDING is the variance that rounding leaves in a filtered value: about 0.087 in each
// direction, of the first one 70/256 behind the second.
#define ROUNDING 0.11
