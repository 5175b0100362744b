// The part of a line that stands out most.
#include <math.h>

#include "work.h"

enum { COARSE = 32, MOST_COARSE = 48 }; // steps of a first look: a stretch has up to 32 + 8

double ln_over(const double *scatter, double positions) {
	const double s0 = scatter[0], s1 = scatter[1], s2 = scatter[2];
	if (s0 <= 1 && s1 <= 1 && s2 <= 1)
		return fmax(s0, s1);
	const double across = LN_ROWS / (2 * positions);
	const double whole = 1 + (s0 - 1) * positions / LN_ROWS, half = 1 + (s1 - 1) * fmin(positions * 2 / LN_ROWS, across);
	const double few = 1 + (s2 - 1) * fmin(fmin(positions / 16, 1), across);
	return fmax(fmax(whole, half), fmax(few, fmin(s0, 1)));
}

// run is the running totals of a stretch, those of what is looked for above 0.
typedef struct {
	const int32_t *sums, *squares;
	const double *scatter; // NULL: as white noise
	int n, sign;
} run;

// square returns the square of a sum over its variance, with its sign.
LN_INLINE double square(double sum, double weight, double over) { return weight > 0 ? sum * fabs(sum) / (weight * over) : -INFINITY; }

static double value(const run *r, int i, int j) {
	if (j - i < LN_PART)
		return -INFINITY;
	const double over = r->scatter ? ln_over(r->scatter, j - i) : 1;
	return square(r->sign * (r->sums[j] - r->sums[i]), r->squares[j] - r->squares[i], over);
}

// row returns the squares of n parts with the same start.
LN_KERNEL void row(double *restrict out, const double *restrict sums, const double *restrict squares, const double *restrict over, double sum, double weight, int n) {
	for (int m = 0; m < n; m++)
		out[m] = square(sums[m] - sum, squares[m] - weight, over[m]);
}

// coarse looks at parts whose starts and lengths beyond LN_PART are whole steps.
static double coarse(const run *r, int step, double best, int *first, int *end) {
	double sums[MOST_COARSE], squares[MOST_COARSE], over[MOST_COARSE], out[MOST_COARSE];
	int n = 0;
	for (int b = LN_PART; b <= r->n; b += step, n++) {
		sums[n] = r->sign * r->sums[b];
		squares[n] = r->squares[b];
		over[n] = r->scatter ? ln_over(r->scatter, b) : 1;
	}
	for (int k = 0; k < n; k++) {
		row(out, sums + k, squares + k, over, r->sign * r->sums[k * step], r->squares[k * step], n - k);
		for (int m = 0; m < n - k; m++)
			if (out[m] > best) {
				best = out[m];
				*first = k * step;
				*end = LN_PART + (k + m) * step;
			}
	}
	return best;
}

// fine moves one end of the part by up to a step, and further while that helps.
static double fine(const run *r, int step, double best, int *moved, int other) {
	for (int i = *moved - step < 0 ? 0 : *moved - step; i <= *moved + step && i <= r->n; i++) {
		const double v = value(r, i < other ? i : other, i < other ? other : i);
		if (v > best) {
			best = v;
			*moved = i;
		}
	}
	return best;
}

int ln_part(ln_work *w, ln_stretch s, const int16_t *weights, int32_t sign, const double *scatter, int32_t *first, int32_t *last) {
	const int flat = ln_over(scatter, 1) == ln_over(scatter, 1e4);
	run r = {w->totals, w->totals + w->positions, flat ? 0 : scatter, 0, sign};
	r.n = ln_run(w, s, weights, w->totals, w->totals + w->positions);
	if (r.n < LN_PART)
		return 0;
	const int step = r.n / COARSE < 4 ? 4 : r.n / COARSE;
	int i = 0, j = r.n;
	double best = coarse(&r, step, value(&r, 0, r.n), &i, &j);
	for (int turn = 0; turn < 2; turn++) {
		best = fine(&r, step, best, &i, j);
		best = fine(&r, step, best, &j, i);
	}
	*first = i;
	*last = j - 1;
	return r.n;
}
