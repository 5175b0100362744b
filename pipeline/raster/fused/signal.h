// Signal and noise of a stretch of a row in floats, as the reference has them.
#ifndef LAPGATE_SIGNAL_H
#define LAPGATE_SIGNAL_H

#include "correct.h"
#include "parts.h"
#include "spans.h"

// stretch is the end of the pixels from x on that lie between the same nodes.
PG_INLINE int stretch(const pg_frame *f, const pg_grid *g, int ix, int x1) {
	int end = ix < g->columns - 2 ? (ix + 1) * f->cell + (f->cell + 1) / 2 : x1;
	return end < x1 ? end : x1;
}

// less_level subtracts the level from v[x0 … x1) of row y.
static inline void less_level(const pg_frame *f, const pg_grid *g, float *restrict v, int y, int x0, int x1) {
	double fy, fx;
	int iy = pg_node(y, f->cell, g->rows, &fy), jy = iy + 1 < g->rows ? iy + 1 : iy;
	const double *a = g->level + (int64_t)iy * g->columns, *b = g->level + (int64_t)jy * g->columns;
	for (int x = x0; x < x1;) {
		int ix = pg_node(x, f->cell, g->columns, &fx), jx = ix + 1 < g->columns ? ix + 1 : ix, end = stretch(f, g, ix, x1);
		double left = (1 - fy) * a[ix] + fy * b[ix], right = (1 - fy) * a[jx] + fy * b[jx];
		for (int i = x; i < end; i++)
			v[i] -= (float)(left + (fx + (double)(i - x) / f->cell) * (right - left));
		x = end;
	}
}

PG_INLINE double held(double f) { return f < 0 ? 0 : f > 1 ? 1 : f; }

// noise_row writes the noise of row y to v[x0 … x1).
static inline void noise_row(const pg_frame *f, const pg_grid *g, float *restrict v, int y, int x0, int x1) {
	double fy, fx;
	int iy = pg_node(y, f->cell, g->rows, &fy), jy = iy + 1 < g->rows ? iy + 1 : iy;
	const double *a = g->noise + (int64_t)iy * g->columns, *b = g->noise + (int64_t)jy * g->columns;
	fy = held(fy);
	for (int x = x0; x < x1;) {
		int ix = pg_node(x, f->cell, g->columns, &fx), jx = ix + 1 < g->columns ? ix + 1 : ix, end = stretch(f, g, ix, x1);
		double left = (1 - fy) * a[ix] + fy * b[ix], right = (1 - fy) * a[jx] + fy * b[jx];
		for (int i = x; i < end; i++)
			v[i] = (float)(left + held(fx + (double)(i - x) / f->cell) * (right - left));
		x = end;
	}
}

// signal_row writes corrected counts above level to s[x0 … x1), 0 outside the region and
// the frame; s can be written from 8 px before the frame to 8 behind. tmp holds a row.
static inline void signal_row(const pg_frame *f, const pg_grid *g, float *restrict s, uint16_t *restrict tmp, int y, int x0, int x1) {
	for (int x = x0; x < x1; x++)
		s[x] = 0;
	int n;
	const pg_span *p = spans_of(f, y, &n);
	int first = 0;
	for (int last = n; first < last;) {
		int m = (first + last) / 2;
		if (p[m].x1 <= x0)
			first = m + 1;
		else
			last = m;
	}
	for (int i = first; i < n && p[i].x0 < x1; i++) {
		int a = p[i].x0 > x0 ? p[i].x0 : x0, b = p[i].x1 < x1 ? p[i].x1 : x1;
		if (f->use_float)
			pg_correct(f, s, tmp, y, a, b);
		else
			pg_correct_int(f, s, tmp, y, a, b);
		if (f->bad_start)
			for (int k = f->bad_start[y]; k < f->bad_start[y + 1] && f->bad_x[k] < b; k++)
				if (f->bad_x[k] >= a)
					s[f->bad_x[k]] = pg_replaced(f, f->bad_x[k], y);
		less_level(f, g, s, y, a, b);
	}
}

#endif
