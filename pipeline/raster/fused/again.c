// Candidates looked for once more, where the first look misjudged level or noise.
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "objects.h"
#include "parts.h"
#include "spans.h"

// BESIDE is how far beyond a part its pixels are filtered, so that the cut through the
// region does not count in it.
#define BESIDE 8

// uncovered reports whether the thresholds that g gave at a node may have missed what the
// grid truth calls for; it allows for a hundredth of the threshold.
static int uncovered(const pg_frame *f, const pg_grid *g, const pg_grid *truth, int64_t i) {
	if (truth->inside[i] == 0)
		return 0;
	double used = pg_cautious(f, f->low, g->noise[i], g->slack), off = fabs(g->level[i] - truth->level[i]) + (f->use_float ? 0 : 0.5 / f->scale);
	return used > 1.01 * f->low * PG_GAIN * truth->noise[i] - off;
}

// columns writes for each grid row which cells x0 … x1 are to be passed again, those
// around uncovered nodes; returns in how many rows there are any.
static int32_t columns(const pg_frame *f, const pg_grid *g, const pg_grid *truth, int32_t *x0, int32_t *x1) {
	int32_t n = 0;
	for (int row = 0; row < g->rows; row++)
		x0[row] = g->columns, x1[row] = 0;
	for (int32_t row = 0; row < g->rows; row++)
		for (int32_t i = 0; i < g->columns; i++)
			for (int k = row - 1; k <= row + 1 && uncovered(f, g, truth, (int64_t)row * g->columns + i); k++) {
				if (k < 0 || k >= g->rows)
					continue;
				n += x0[k] >= x1[k];
				x0[k] = i - 1 < x0[k] ? i - 1 : x0[k];
				x1[k] = i + 2 > x1[k] ? i + 2 : x1[k];
			}
	for (int row = 0; row < g->rows; row++)
		x0[row] = x0[row] < 0 ? 0 : x0[row], x1[row] = x1[row] > g->columns ? g->columns : x1[row];
	return n;
}

// narrowed is f with the part of its region from x0 to x1 in rows y0 to y1, and BESIDE px
// more of it all around. start and spans hold it.
static pg_frame narrowed(const pg_frame *f, int32_t *start, pg_span *spans, int y0, int y1, int x0, int x1) {
	pg_frame out = *f;
	int32_t n = 0;
	for (int y = 0; y < f->height; y++) {
		int m;
		const pg_span *p = spans_of(f, y, &m);
		start[y] = n;
		for (int i = 0; i < m && y >= y0 - BESIDE && y < y1 + BESIDE; i++) {
			int a = p[i].x0 > x0 - BESIDE ? p[i].x0 : x0 - BESIDE, b = p[i].x1 < x1 + BESIDE ? p[i].x1 : x1 + BESIDE;
			if (a < b)
				spans[n++] = (pg_span){y, a, b};
		}
	}
	start[f->height] = n;
	out.span_start = start, out.spans = spans;
	return out;
}

// add_part adds what of n runs from at on lies in row y from x0 to x1; returns where the
// row ends, or −1 when there is no memory.
static int64_t add_part(pg_runs *out, const pg_run *at, int64_t i, int64_t n, int y, int x0, int x1) {
	for (; i < n && (int)at[i].y == y; i++) {
		int a = at[i].x0 > x0 ? at[i].x0 : x0, b = at[i].x1 < x1 ? at[i].x1 : x1;
		if (a < b && pg_run_add(out, y, a, b, at[i].high))
			return -1;
	}
	return i;
}

// weave puts the runs found into the place of those of old in rows y0 to y1 and columns
// x0 to x1.
static int weave(pg_runs *old, const pg_runs *found, int y0, int y1, int x0, int x1) {
	pg_runs part = {0};
	int64_t first = 0, i, k = 0;
	while (first < old->count && (int)old->at[first].y < y0)
		first++;
	i = first;
	for (int y = y0; y < y1; y++) {
		int64_t next = add_part(&part, old->at, i, old->count, y, 0, x0), same = add_part(&part, found->at, k, found->count, y, x0, x1);
		if (next < 0 || same < 0 || add_part(&part, old->at, i, old->count, y, x1, UINT16_MAX) < 0) {
			free(part.at);
			return PG_NO_MEMORY;
		}
		i = next, k = same;
	}
	while (old->room < old->count - (i - first) + part.count)
		if (pg_grow(old)) {
			free(part.at);
			return PG_NO_MEMORY;
		}
	memmove(old->at + first + part.count, old->at + i, sizeof(pg_run) * (size_t)(old->count - i));
	if (part.count > 0)
		memcpy(old->at + first, part.at, sizeof(pg_run) * (size_t)part.count);
	old->count += part.count - (i - first);
	free(part.at);
	return PG_OK;
}

int pg_again(const pg_frame *f, const pg_grid *g, const pg_grid *truth, pg_band *band, pg_blobs *b, int32_t *rows) {
	const size_t ints = 2 * (size_t)g->rows + (size_t)f->height + 1, all = (size_t)f->span_start[f->height] + 1;
	int32_t *x0 = malloc(sizeof(int32_t) * ints);
	if (!x0)
		return PG_NO_MEMORY;
	int32_t *x1 = x0 + g->rows, *start = x1 + g->rows;
	*rows = columns(f, g, truth, x0, x1);
	pg_span *spans = *rows > 0 ? malloc(sizeof(pg_span) * all) : 0;
	int e = *rows > 0 && !spans ? PG_NO_MEMORY : PG_OK;
	for (int32_t row = 0; row < g->rows && !e; row++) {
		if (x0[row] >= x1[row])
			continue;
		int y0 = row * f->cell, y1 = y0 + f->cell < f->height ? y0 + f->cell : f->height;
		int a = x0[row] * f->cell, c = x1[row] * f->cell < f->width ? x1[row] * f->cell : f->width;
		pg_frame part = narrowed(f, start, spans, y0, y1, a, c);
		e = pg_pass(&part, truth, 0, band, row, row + 1);
		e = e ? e : weave(&b->candidates, &band->runs, y0, y1, a, c);
	}
	if (spans) { // beside the grid of the first look, which is still there
		int64_t bytes = pg_blobs_bytes(b) + (int64_t)(sizeof(int32_t) * ints + sizeof(pg_span) * all) + 5 * 8 * (int64_t)g->columns * g->rows;
		b->peak = bytes > b->peak ? bytes : b->peak;
	}
	free(spans);
	free(x0);
	return e;
}
