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

// Where the spread lies this near that of white noise it is taken to be it: a tile knows
// it to some 3 %.
#define NEAR_WHITE 0.1

// variance returns the variance of the sums with slope 2t per pixel; what lies far out,
// as defects do, hardly counts.
static double variance(const ln_tile *k, int t) {
	const int16_t *a = k->w->sums->half[0][t], *b = k->w->sums->half[1][t] + t;
	double n = (double)k->width * LN_ROWS;
	if (k->holed)
		n = (double)total(k->w->counts->half[0][t], k->w->counts->half[1][t] + t, k->width);
	if (n < 64 * LN_LEAST)
		return LN_WHITE;
	double v = (double)squares(a, b, k->width, LN_MOST_SUM) / n;
	for (int i = 0; i < 4 && v > LN_WHITE * (1 + NEAR_WHITE); i++) {
		double cap = CUT * __builtin_sqrt(v * LN_ROWS);
		v = (double)squares(a, b, k->width, cap < LN_MOST_SUM ? (int)cap : LN_MOST_SUM) / (n * LEFT);
	}
	return v;
}

void ln_spread(const ln_tile *k) {
	for (int b = 0; b < LN_BINS; b++) {
		double v = variance(k, b * (LN_BIN / 2)) / LN_WHITE;
		k->spread[b] = v > 1 - NEAR_WHITE && v < 1 + NEAR_WHITE ? 1.f : v > 0.05 ? (float)v : 0.05f;
	}
}
