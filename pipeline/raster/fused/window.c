// Cutting the surroundings of a blob out of a frame.
#include "window.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "correct.h"
#include "signal.h"

enum { GROW = 2, MARGIN = 4 };

// strips finds the strip of each row; returns the pixels in all of them.
static int64_t strips(window *w) {
	for (int k = 0; k < w->rows; k++)
		w->x0[k] = INT32_MAX, w->x1[k] = 0;
	for (int64_t i = 0; i < w->count; i++)
		for (int y = w->runs[i].y - MARGIN; y <= w->runs[i].y + MARGIN; y++) {
			int k = y - w->y0;
			if (k < 0 || k >= w->rows)
				continue;
			int a = w->runs[i].x0 - MARGIN, b = w->runs[i].x1 + MARGIN;
			w->x0[k] = a < w->x0[k] ? a : w->x0[k];
			w->x1[k] = b > w->x1[k] ? b : w->x1[k];
		}
	int64_t n = 0;
	for (int k = 0; k < w->rows; k++) {
		w->x0[k] = w->x0[k] < 0 ? 0 : w->x0[k];
		w->x1[k] = w->x1[k] > w->f->width ? w->f->width : w->x1[k];
		w->at[k] = n - w->x0[k];
		n += w->x1[k] - w->x0[k];
	}
	return n;
}

// mark sets what of x0 … x1 in row y lies in the strips.
static void mark(const window *w, uint8_t *dst, int y, int x0, int x1, uint8_t v) {
	int k = y - w->y0;
	if (k < 0 || k >= w->rows)
		return;
	x0 = x0 > w->x0[k] ? x0 : w->x0[k], x1 = x1 < w->x1[k] ? x1 : w->x1[k];
	if (x0 < x1)
		memset(dst + w->at[k] + x0, v, (size_t)(x1 - x0));
}

// from_patch copies the signal of x0 … x1 in row y where the patch has all of it.
static int from_patch(const pg_patch *p, float *dst, int y, int x0, int x1) {
	if (!p->start)
		return 0;
	for (int32_t i = p->start[2 * y]; i < p->start[2 * y + 1]; i++)
		if (p->spans[i].x0 <= x0 && p->spans[i].x1 >= x1) {
			memcpy(dst + x0, p->values + p->first[i] + (x0 - p->spans[i].x0), sizeof(float) * (size_t)(x1 - x0));
			return 1;
		}
	return 0;
}

// ask asks for the memory of the strips, so that their misses overlap.
static void ask(const window *w) {
	for (int k = 0; k < w->rows; k++)
		pg_ask_span(w->f, w->y0 + k, w->x0[k], w->x1[k]);
}

PG_WHOLE void load(window *w, const pg_blobs *b, int64_t blob, uint16_t *tmp) {
	for (int k = 0; k < w->rows; k++) {
		int y = w->y0 + k, n;
		const pg_span *p = spans_of(w->f, y, &n);
		for (int i = 0; i < n; i++)
			mark(w, w->usable, y, p[i].x0, p[i].x1, 1);
		for (int64_t i = b->row_start[y]; i < b->row_start[y + 1]; i++) {
			const pg_run *r = b->runs.at + b->by_row[i];
			if (b->owner[b->by_row[i]] != blob && r->x1 > w->x0[k] && r->x0 < w->x1[k])
				mark(w, w->usable, y, r->x0, r->x1, 0);
		}
		if (!from_patch(&b->patch, w->signal + w->at[k], y, w->x0[k], w->x1[k]))
			signal_row(w->f, w->g, w->signal + w->at[k], tmp, y, w->x0[k], w->x1[k]);
	}
}

// turn makes the blob positive and clears what is not usable.
static void turn(window *w, int64_t n) {
	float sum = 0;
	for (int64_t i = 0; i < w->count; i++) {
		const float *s = w->signal + w->at[w->runs[i].y - w->y0];
		for (int x = w->runs[i].x0; x < w->runs[i].x1; x++)
			sum += s[x];
	}
	w->sign = sum < 0 ? -1 : 1;
	for (int64_t i = 0; i < n; i++)
		w->signal[i] = w->usable[i] ? (float)w->sign * w->signal[i] : 0;
}

static void grow(window *w, int64_t n) {
	for (int64_t i = 0; i < w->count; i++)
		for (int dy = -GROW; dy <= GROW; dy++) {
			int reach = dy == GROW || dy == -GROW ? GROW - 1 : GROW;
			mark(w, w->foot, w->runs[i].y + dy, w->runs[i].x0 - reach, w->runs[i].x1 + reach, 1);
		}
	for (int64_t i = 0; i < n; i++)
		w->foot[i] = w->foot[i] & w->usable[i];
	for (int k = 0; k < w->rows; k++) {
		int a = w->x0[k], b = w->x1[k];
		while (a < b && !w->foot[w->at[k] + a])
			a++;
		while (b > a && !w->foot[w->at[k] + b - 1])
			b--;
		w->f0[k] = a, w->f1[k] = b;
		w->m0[k] = w->m1[k] = a;
	}
}

static float binomial_mean(const window *w, int k, int x) {
	float sum = 0, weights = 0;
	for (int v = k > 0 ? k - 1 : 0; v <= k + 1 && v < w->rows; v++)
		for (int u = x - 1; u <= x + 1; u++) {
			if (u < w->x0[v] || u >= w->x1[v] || !w->usable[w->at[v] + u])
				continue;
			float weight = (float)((u == x ? 2 : 1) * (v == k ? 2 : 1));
			sum += weight * w->signal[w->at[v] + u];
			weights += weight;
		}
	return sum / weights;
}

// usable_row reports whether all of x0 … x1 in row k lies in its strip and is usable.
static int usable_row(const window *w, int k, int x0, int x1) {
	return k >= 0 && k < w->rows && x0 >= w->x0[k] && x1 <= w->x1[k] && !memchr(w->usable + w->at[k] + x0, 0, (size_t)(x1 - x0));
}

// mean_row is binomial_mean of the foot pixels of x0 … x1 where all pixels around are usable.
PG_INLINE void mean_row(float *restrict dst, const uint8_t *restrict foot, const float *restrict a, const float *restrict b,
                        const float *restrict c, int x0, int x1) {
	for (int x = x0; x < x1; x++) {
		float sum = a[x - 1];
		sum += 2 * a[x], sum += a[x + 1];
		sum += 2 * b[x - 1], sum += 4 * b[x], sum += 2 * b[x + 1];
		sum += c[x - 1], sum += 2 * c[x], sum += c[x + 1];
		dst[x] = foot[x] ? sum / 16 : 0;
	}
}

PG_WHOLE void smooth(window *w) {
	EACH_ROW(w, k) {
		const int a = w->f0[k], b = w->f1[k];
		if (a >= b)
			continue;
		if (usable_row(w, k - 1, a - 1, b + 1) && usable_row(w, k, a - 1, b + 1) && usable_row(w, k + 1, a - 1, b + 1))
			mean_row(w->smooth + w->at[k], w->foot + w->at[k], w->signal + w->at[k - 1], w->signal + w->at[k], w->signal + w->at[k + 1], a, b);
		else
			for (int x = a; x < b; x++)
				w->smooth[w->at[k] + x] = w->foot[w->at[k] + x] ? binomial_mean(w, k, x) : 0;
	}
}

int window_cut(window *w, const pg_frame *f, const pg_grid *g, const pg_blobs *b, int64_t blob) {
	const pg_blob *o = b->blobs + blob;
	int y0 = o->y0 - MARGIN < 0 ? 0 : o->y0 - MARGIN, y1 = o->y1 + MARGIN > f->height ? f->height : o->y1 + MARGIN;
	*w = (window){.y0 = y0, .rows = y1 - y0, .f = f, .g = g, .runs = b->runs.at + o->first, .count = o->runs};
	w->at = malloc((size_t)w->rows * (sizeof(int64_t) + 6 * sizeof(int32_t)) + sizeof(uint16_t) * (size_t)f->width);
	if (!w->at)
		return PG_NO_MEMORY;
	w->x0 = (int32_t *)(void *)(w->at + w->rows);
	w->x1 = w->x0 + w->rows, w->f0 = w->x1 + w->rows, w->f1 = w->f0 + w->rows;
	w->m0 = w->f1 + w->rows, w->m1 = w->m0 + w->rows;
	int64_t n = strips(w);
	ask(w);
	w->clear = o->x0 > MARGIN && o->y0 > MARGIN && o->x1 + MARGIN < f->width && o->y1 + MARGIN < f->height;
	w->signal = calloc((size_t)n, 3 * sizeof(float) + 2);
	if (!w->signal)
		return PG_NO_MEMORY;
	w->smooth = w->signal + n, w->depth = w->smooth + n;
	w->usable = (uint8_t *)(void *)(w->depth + n);
	w->foot = w->usable + n;
	load(w, b, blob, (uint16_t *)(void *)(w->m1 + w->rows));
	turn(w, n);
	grow(w, n);
	smooth(w);
	return PG_OK;
}

void window_free(window *w) {
	free(w->signal);
	free(w->at);
}
