// How far the line sums of a tile scatter, slope by slope: lay scatters those along it.
#include "work.h"

enum { STRETCH = 64 };

// squares sums the squares of a[x] + b[x], none counted above cap.
LN_KERNEL int64_t squares(const int16_t *restrict a, const int16_t *restrict b, int n, int cap) {
	int64_t all = 0;
	const int16_t most = (int16_t)cap, least = (int16_t)-cap;
	for (int x0 = 0; x0 < n; x0 += STRETCH) {
		const int x1 = x0 + STRETCH < n ? x0 + STRETCH : n;
		int32_t sum = 0; // 64 · 3968² < 2³⁰
		for (int x = x0; x < x1; x++) {
			int16_t v = (int16_t)(a[x] + b[x]);
			v = v > most ? most : v;
			v = v < least ? least : v;
			sum += (int32_t)v * v;
		}
		all += sum;
	}
	return all;
}

LN_KERNEL int64_t total(const int16_t *restrict a, const int16_t *restrict b, int n) {
	int32_t sum = 0;
	for (int x = 0; x < n; x++)
		sum += a[x] + b[x];
	return sum;
}

// What cutting off at 2.5 sigmas leaves of the variance of a normal variable whose far
// values count as 2.5: 1 − 2·(2.5·φ(2.5) + Q(2.5)) + 2·2.5²·Q(2.5).
#define CUT 2.5
#define LEFT 0.9775

// A set of sums to be measured: of lines of some slope over the whole strip (b not NULL) or
// over a half of it, with the numbers of pixels if some do not count.
typedef struct {
	const int16_t *a, *b, *na, *nb;
	int width, pixels; // columns, and pixels of each sum
} sums;

static const int16_t none[LN_PITCH];

// variance returns the variance of the sums per pixel; what lies far out, as defects do,
// hardly counts.
static double variance(const sums *s) {
	if (s->width < LN_LEAST)
		return LN_WHITE;
	const int16_t *b = s->b ? s->b : none;
	const double n = s->na ? (double)total(s->na, s->nb ? s->nb : none, s->width) : (double)s->width * s->pixels;
	if (n < LN_LEAST * s->pixels / 2.)
		return LN_WHITE;
	double v = (double)squares(s->a, b, s->width, LN_MOST_SUM) / n;
	for (int i = 0; i < 4 && v > LN_WHITE * (1 + LN_NEAR_WHITE); i++) {
		double cap = CUT * __builtin_sqrt(v * s->pixels);
		v = (double)squares(s->a, b, s->width, cap < LN_MOST_SUM ? (int)cap : LN_MOST_SUM) / (n * LEFT);
	}
	return v;
}

static float relative(double v) {
	v /= LN_WHITE;
	return v > 0.05 ? (float)v : 0.05f;
}

// whole returns the sums of lines of slope 2t that do not leave the picture sideways, half
// those over the upper half alone.
static sums whole(const ln_tile *k, int t) {
	const ln_tree *s = k->w->sums, *c = k->w->counts;
	const int from = k->x < 0 ? -k->x : 0, beyond = k->x + k->width + 2 * t - k->length;
	sums out = {.a = s->half[0][t] + from, .b = s->half[1][t] + from + t, .width = k->width - from - (beyond > 0 ? beyond : 0), .pixels = LN_ROWS};
	if (k->holed) {
		out.na = c->half[0][t] + from;
		out.nb = c->half[1][t] + from + t;
	}
	return out;
}

static sums half(const ln_tile *k, int t) {
	sums out = whole(k, t);
	out.b = out.nb = 0;
	out.pixels = LN_ROWS / 2;
	return out;
}

// sixteenth is over 16 rows of the lower half, of slope t of these.
static sums sixteenth(const ln_tile *k, int t) {
	const int from = k->x < 0 ? -k->x : 0, beyond = k->x + k->width + 16 - k->length;
	sums out = {.a = k->w->sums->sixteen[0][t] + from, .width = k->width - from - (beyond > 0 ? beyond : 0), .pixels = 16};
	if (k->holed)
		out.na = k->w->counts->sixteen[0][t] + from;
	return out;
}

void ln_spread(const ln_tile *k) {
	for (int b = 0; b < LN_BINS; b++) {
		const sums all = whole(k, b * (LN_BIN / 2)), upper = half(k, b * (LN_BIN / 2)), few = sixteenth(k, b * 16 / LN_BINS);
		k->spread[b] = relative(variance(&all));
		k->spread[LN_BINS + b] = relative(variance(&upper));
		k->spread[2 * LN_BINS + b] = b & 1 ? k->spread[2 * LN_BINS + b - 1] : relative(variance(&few));
	}
}
