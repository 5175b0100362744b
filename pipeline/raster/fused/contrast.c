#include "contrast.h"

#include <stdlib.h>

#include "signal.h"

PG_KERNEL void corrected(const pg_frame *f, float *restrict v, uint16_t *restrict tmp, int y, int x0, int x1) {
	if (f->use_float)
		pg_correct(f, v, tmp, y, x0, x1);
	else
		pg_correct_int(f, v, tmp, y, x0, x1);
}

PG_KERNEL void slope(float *restrict v, float start, float step, int n) {
	for (int i = 0; i < n; i++)
		v[i] = start + step * (float)i;
}

// ramps writes a row between the nodes of a grid, linear along it as less_level and
// noise_row have it; with hold no further than the outer nodes.
static void ramps(const pg_frame *f, const pg_grid *g, const double *nodes, int hold, float *v, int y) {
	double fy, fx;
	const int iy = pg_node(y, f->cell, g->rows, &fy), jy = iy + 1 < g->rows ? iy + 1 : iy;
	const double *a = nodes + (int64_t)iy * g->columns, *b = nodes + (int64_t)jy * g->columns;
	fy = hold ? held(fy) : fy;
	for (int x = 0; x < f->width;) {
		const int ix = pg_node(x, f->cell, g->columns, &fx), jx = ix + 1 < g->columns ? ix + 1 : ix;
		int end = stretch(f, g, ix, f->width);
		const double left = (1 - fy) * a[ix] + fy * b[ix], right = (1 - fy) * a[jx] + fy * b[jx];
		double step = (right - left) / f->cell, start = left + fx * (right - left);
		if (hold && (fx < 0 || fx >= 1)) { // up to the first node, and beyond the last one
			const int node = ix * f->cell + f->cell / 2;
			end = fx < 0 && node < end ? node : end;
			start = fx < 0 ? left : right;
			step = 0;
		} else if (hold) { // not beyond the last one
			const int last = jx * f->cell + f->cell / 2;
			end = last < end && last > x ? last : end;
		}
		end = end > x ? end : x + 1;
		end = end < f->width ? end : f->width;
		slope(v + x, (float)start, (float)step, end - x);
		x = end;
	}
}

PG_KERNEL void ratio(float *restrict v, const float *restrict level, const float *restrict noise, int n) {
	for (int x = 0; x < n; x++)
		v[x] = (v[x] - level[x]) / noise[x];
}

static void row_of(const pg_frame *f, const pg_grid *g, float *row, float *level, float *noise, uint16_t *counts, int y) {
	int n;
	const pg_span *p = spans_of(f, y, &n);
	if (n == 0)
		return;
	ramps(f, g, g->level, 0, level, y);
	ramps(f, g, g->noise, 1, noise, y);
	for (int i = 0; i < n; i++) {
		const int a = p[i].x0, b = p[i].x1;
		corrected(f, row, counts, y, a, b);
		ratio(row + a, level + a, noise + a, b - a);
	}
	if (f->bad_start)
		for (int k = f->bad_start[y]; k < f->bad_start[y + 1]; k++)
			row[f->bad_x[k]] = 0;
}

int pg_contrast(const pg_frame *f, const double *level, const double *noise, int32_t columns, int32_t rows, int32_t y0, int32_t y1, float *out) {
	const pg_grid g = {.columns = columns, .rows = rows, .level = (double *)(uintptr_t)level, .noise = (double *)(uintptr_t)noise};
	float *ramp = malloc(2 * sizeof *ramp * (size_t)f->width);
	uint16_t *counts = malloc(sizeof *counts * ((size_t)f->width + 16));
	if (!ramp || !counts) {
		free(ramp);
		free(counts);
		return PG_NO_MEMORY;
	}
	for (int y = y0; y < y1; y++)
		row_of(f, &g, out + (int64_t)y * f->width, ramp, ramp + f->width, counts, y);
	free(ramp);
	free(counts);
	return PG_OK;
}
