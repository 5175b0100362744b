// The streaming pass, in terms of the row kernels included before it. Rows go in groups
// of four, from the top: values, moments, signal, block sums, the filter along x into a
// ring of eight rows, the filter along y, thresholds, runs.
#include <stdlib.h>
#include <string.h>

#include "grain.h"
#include "parts.h"
#include "spans.h"

enum { GROUP = 4, SEGMENT = 32, PAD = 64 };

typedef struct {
	const pg_frame *f;
	const pg_grid *g;
	pg_grid *out;
	pg_band *b;
	int pitch;
	T *value[GROUP], *ring[8], *filtered[GROUP];
	T *signal, *samples, *top, *slope;
	T *low, *high, *highest; // of segments
	int node_row, shift, threshold_key;
	T least, most;
	double *stats; // number, sum, sum² of each cell
	T *cell_low, *cell_high, *cell_mid;
	pg_span *inner, *spare;
	int32_t *hits, hit_count; // segments with a value above the threshold in the four filtered rows
	uint32_t *bits;           // of each of these, a row after the other: which pixels are
} state;

// hull is the x-range of the region in rows y0 to y1, rounded outwards to whole segments
// and one more; empty when x0 >= x1.
static void hull(const pg_frame *f, int y0, int y1, int *x0, int *x1) {
	*x0 = f->width, *x1 = 0;
	for (int y = y0; y < y1; y++) {
		int n;
		const pg_span *s = spans_of(f, y, &n);
		if (n > 0) {
			*x0 = s[0].x0 < *x0 ? s[0].x0 : *x0;
			*x1 = s[n - 1].x1 > *x1 ? s[n - 1].x1 : *x1;
		}
	}
	if (*x0 >= *x1)
		return;
	*x0 = *x0 < SEGMENT ? 0 : (*x0 / SEGMENT - 1) * SEGMENT;
	*x1 = (*x1 / SEGMENT + 2) * SEGMENT;
	*x1 = *x1 > f->width ? f->width : *x1;
}

// fill_gaps writes v to the pixels of row[x0 … x1) outside the region.
static void fill_gaps(const pg_frame *f, T *row, int y, int x0, int x1, T v) {
	int n, x = x0;
	const pg_span *s = spans_of(f, y, &n);
	for (int i = 0; i <= n; i++) {
		int end = i < n ? s[i].x0 : x1;
		for (; x < end; x++)
			row[x] = v;
		x = i < n && s[i].x1 > x ? s[i].x1 : x;
	}
}

static void mark_bad(const pg_frame *f, T *row, int y, int x0, int x1, T v) {
	if (f->bad_start)
		for (int i = f->bad_start[y]; i < f->bad_start[y + 1]; i++)
			if (f->bad_x[i] >= x0 && f->bad_x[i] < x1)
				row[f->bad_x[i]] = v;
}

static void replace_bad(const pg_frame *f, T *row, int y, int x0, int x1) {
	if (f->bad_start)
		for (int i = f->bad_start[y]; i < f->bad_start[y + 1]; i++)
			if (f->bad_x[i] >= x0 && f->bad_x[i] < x1)
				row[f->bad_x[i]] = replaced(f, f->bad_x[i], y, f->bad_near[i]);
}

// next_top returns the next x from x on whose count is the highest or above, or x1.
static int next_top(const pg_frame *f, const uint8_t *row, int x, int x1) {
	if (f->layout == PG_BYTES) {
		const uint8_t *p = x < x1 ? memchr(row + x, 255, (size_t)(x1 - x)) : 0;
		return p ? (int)(p - row) : x1;
	}
	while (x < x1 && pg_count(f, row, x) < (uint32_t)f->max_count)
		x++;
	return x;
}

static int note_saturated(const pg_frame *f, pg_band *b, int y, int x0, int x1) {
	const uint8_t *row = pg_row(f, y);
	for (int x = next_top(f, row, x0, x1); x < x1; x = next_top(f, row, x + 1, x1)) {
		if (pg_count(f, row, x) > (uint32_t)f->max_count)
			return PG_BAD_COUNT;
		if (pg_run_add(&b->saturated, y, x, x + 1, 0))
			return PG_NO_MEMORY;
	}
	return PG_OK;
}

// load makes the values of four rows from y with OUTSIDE where they do not count. Rows
// that are not to be kept are not searched for saturation.
static int load(state *s, T **rows, int y, int x0, int x1, int keep) {
	const pg_frame *f = s->f;
	for (int k = 0; k < GROUP; k++) {
		if (y + k >= f->height) {
			for (int x = x0; x < x1; x++)
				rows[k][x] = OUTSIDE;
			continue;
		}
		int top = row_value(f, rows[k], s->b->counts, y + k, x0, x1);
		if (top >= f->max_count && (keep || top > f->max_count)) {
			int e = note_saturated(f, s->b, y + k, x0, x1);
			if (e)
				return e;
		}
		fill_gaps(f, rows[k], y + k, x0, x1, OUTSIDE);
		mark_bad(f, rows[k], y + k, x0, x1, OUTSIDE);
	}
	return PG_OK;
}

// level_rows makes top and slope for the node rows around y.
static void level_rows(state *s, int y) {
	const pg_frame *f = s->f;
	const pg_grid *g = s->g;
	double fy;
	int iy = pg_node(y, f->cell, g->rows, &fy);
	if (iy == s->node_row)
		return;
	s->node_row = iy;
	const double *a = g->level + (int64_t)iy * g->columns, *b = iy + 1 < g->rows ? a + g->columns : a;
	double steepest = 0;
	for (int i = 0; i < g->columns; i++) {
		double d = (b[i] - a[i]) * f->scale;
		steepest = d > steepest ? d : -d > steepest ? -d : steepest;
	}
	s->shift = 0; // slopes beyond the outer nodes may be three times as steep
	while (s->shift < 4 && 3 * steepest * (4 << s->shift) < 30000)
		s->shift++;
	for (int x = 0; x < f->width;) {
		double fx;
		int ix = pg_node(x, f->cell, g->columns, &fx), jx = ix + 1 < g->columns ? ix + 1 : ix;
		int end = ix < g->columns - 2 ? (ix + 1) * f->cell + (f->cell + 1) / 2 : f->width;
		end = end > f->width ? f->width : end;
		ramp(s->top, s->slope, x, end, a[ix], a[jx], b[ix], b[jx], fx, f->cell, f->scale, s->shift);
		x = end;
	}
}

// thresholds of the segments for rows y to y + 3: below those of every node around.
static void thresholds(state *s, int y) {
	const pg_frame *f = s->f;
	const pg_grid *g = s->g;
	double fraction;
	int y0 = pg_node(y < 0 ? 0 : y, f->cell, g->rows, &fraction);
	int y1 = pg_node(y + 3 < f->height ? y + 3 : f->height - 1, f->cell, g->rows, &fraction) + 1;
	int key = y0 * 2 + (y1 - y0 > 1);
	if (key == s->threshold_key)
		return;
	s->threshold_key = key;
	y1 = y1 < g->rows ? y1 : g->rows - 1;
	for (int j = 0; j * SEGMENT < f->width; j++) {
		int x0 = pg_node(j * SEGMENT, f->cell, g->columns, &fraction);
		int x1 = pg_node(j * SEGMENT + SEGMENT - 1, f->cell, g->columns, &fraction) + 1;
		x1 = x1 < g->columns ? x1 : g->columns - 1;
		double noise = 1e300;
		for (int iy = y0; iy <= y1; iy++)
			for (int ix = x0; ix <= x1; ix++)
				noise = g->noise[(int64_t)iy * g->columns + ix] < noise ? g->noise[(int64_t)iy * g->columns + ix] : noise;
		s->low[j] = threshold(pg_cautious(f, f->low, noise, g->slack) * f->scale);
		s->high[j] = threshold(pg_cautious(f, f->high, noise, g->slack) * f->scale);
	}
}

static void start_cells(state *s, int row) {
	const pg_grid *g = s->g;
	memset(s->stats, 0, sizeof(double) * 3 * (size_t)g->columns);
	for (int i = 0; i < g->columns; i++) {
		int64_t at = (int64_t)row * g->columns + i;
		bounds_of(s->f, g->mean[at], s->f->clip * g->sigma[at], s->cell_low + i, s->cell_high + i, s->cell_mid + i);
	}
}

// moments is moments_block as a function of its own.
PG_KERNEL void moments(const T *a, const T *b, const T *c, const T *d, int x0, int x1, T low, T high, T mid, double *out) {
	moments_block(a, b, c, d, x0, x1, low, high, mid, out);
}

// add_moments adds four rows to the moments of their cells.
PG_KERNEL void add_moments(const state *s, T **rows, int x0, int x1, const pg_stream *next) {
	const int cell = s->f->cell;
	const T *low = s->cell_low, *high = s->cell_high, *mid = s->cell_mid, *a = rows[0], *b = rows[1], *c = rows[2], *d = rows[3];
	for (int x = x0; x < x1;) {
		int i = x / cell, end = (i + 1) * cell < x + 64 ? (i + 1) * cell : x + 64;
		end = end < x1 ? end : x1;
		for (int k = 0; k < 4; k++)
			pg_ask(next + k, x);
		if (end - x == 64)
			moments_block(a, b, c, d, x, x + 64, low[i], high[i], mid[i], s->stats + 3 * i);
		else
			moments_block(a, b, c, d, x, end, low[i], high[i], mid[i], s->stats + 3 * i);
		x = end;
	}
}

// along filters x0 … x1 along x, and asks for next on the way.
PG_KERNEL void along(T *restrict dst, const T *restrict v, int x0, int x1, const pg_stream *next) {
	int from = x0;
	for (; from + 64 <= x1; from += 64) {
		pg_ask(next, from);
		for (int x = from; x < from + 64; x++)
			dst[x] = taps(v[x - 2], v[x - 1], v[x], v[x + 1], v[x + 2]);
	}
	for (int x = from; x < x1; x++)
		dst[x] = taps(v[x - 2], v[x - 1], v[x], v[x + 1], v[x + 2]);
}

// to_signal makes row y's signal of its values, with a zero where the region is not, and
// the filter along x of it.
static void to_signal(state *s, T *v, int y, int x0, int x1, const pg_stream *next) {
	const pg_frame *f = s->f;
	T *out = s->ring[y & 7], *sig = s->signal;
	replace_bad(f, v, y, x0, x1);
	level_rows(s, y);
	double fy;
	pg_node(y, f->cell, s->g->rows, &fy);
	row_signal(sig, v, s->top, s->slope, fy, s->shift, y, s->least, s->most, f->polarity < 0, x0, x1, next);
	fill_gaps(f, sig, y, x0, x1, 0);
	sig[x0 - 2] = sig[x0 - 1] = sig[x1] = sig[x1 + 1] = 0;
	along(out, sig, x0, x1, next + 1);
}

// gather keeps every fourth value of a row, the third of four: as row k of the samples of
// each cell, side of them a row; n in all.
PG_KERNEL void gather(T *restrict samples, const T *restrict filtered, int n, int side, int k) {
	for (int i = 0; i < n; i += side) {
		T *restrict row = samples + (int64_t)(i + k) * side;
		for (int x = 0; x < (i + side < n ? side : n - i); x++)
			row[x] = filtered[GROUP * (i + x) + 2];
	}
}

// drop_samples takes the samples from a to before b of row k out.
static void drop_samples(state *s, int a, int b, int k) {
	const int side = s->f->cell / GROUP;
	for (int i = a; i < b; i++) {
		s->samples[(int64_t)(i / side * side + k) * side + i % side] = OUTSIDE;
		s->b->torn[i / side] = 1;
	}
}

// take_samples keeps every fourth filtered value of row y, the second of four rows (see
// Grid in raster), and OUTSIDE where one of its 5 × 5 pixels does not count.
static void take_samples(state *s, const T *restrict filtered, int y) {
	const pg_frame *f = s->f;
	const int n = f->width / GROUP, m = span_inner(f, y, &s->inner, &s->spare), k = y % f->cell / GROUP;
	int last = 0;
	if (k == 0)
		memset(s->b->torn, 0, (size_t)s->b->columns);
	gather(s->samples, filtered, n, f->cell / GROUP, k);
	for (int i = 0; i < m; i++) {
		int a = (s->inner[i].x0 + 1) / GROUP, b = (s->inner[i].x1 + 1) / GROUP;
		drop_samples(s, last, a < n ? a : n, k);
		last = b;
	}
	drop_samples(s, last, n, k);
	for (int v = y - 2; f->bad_start && v <= y + 2; v++)
		for (int i = v < 0 || v >= f->height ? 0 : f->bad_start[v]; v >= 0 && v < f->height && i < f->bad_start[v + 1]; i++) {
			int j = f->bad_x[i] / GROUP; // reached by samples j and, from its edge, j − 1
			drop_samples(s, f->bad_x[i] % GROUP == 0 && j > 0 ? j - 1 : j, j < n ? j + 1 : n, k);
		}
}

// CLEAN is the share of the pixels of a cell within 3 sigmas below which its clipping may
// have further to go than one step: 0.9973 where there is nothing but noise.
#define CLEAN 0.995

// FAR is by how many sigmas a cell's level or sigma may differ from the first look's for
// one step of clipping to do.
#define FAR 0.08

// cell_moments is moments of the first columns of a whole cell's values, of side × side.
// Where integers hold the squares of all of them it takes the cell in one go.
static void cell_moments(const T *cell, int side, int columns, T low, T high, T mid, double *out) {
	const double reach = (double)high - (double)mid, quarter = (double)side * side / 4;
	if (sizeof(T) == 2 && columns == side && 4 * quarter * reach * reach < 2147483648. && quarter < 4096) {
		const T *q = cell + (int64_t)quarter;
		moments(cell, q, q + (int64_t)quarter, q + 2 * (int64_t)quarter, 0, (int)quarter, low, high, mid, out);
		return;
	}
	for (int k = 0; k < side; k += 4)
		for (int x = 0; x < columns; x += 64) {
			const T *r = cell + (int64_t)k * side;
			moments(r, r + side, r + 2 * side, r + 3 * side, x, x + 64 < columns ? x + 64 : columns, low, high, mid, out);
		}
}

// settle_cell repeats the clipping of one cell over all of its pixels until nothing
// changes, from the moments it has.
static void settle_cell(state *s, int64_t at) {
	const pg_frame *f = s->f;
	pg_grid *o = s->out;
	int x0 = (int)(at % o->columns) * f->cell, y0 = (int)(at / o->columns) * f->cell;
	int x1 = x0 + f->cell < f->width ? x0 + f->cell : f->width, y1 = y0 + f->cell < f->height ? y0 + f->cell : f->height;
	T *cell = (T *)(void *)s->b->whole;
	double last = -1, m[3];
	for (int y = y0; y < y1; y++) // so that their misses overlap
		pg_ask_span(f, y, x0, x1);
	for (int y = y0; y < y0 + f->cell; y++) {
		T *row = cell + (int64_t)(y - y0) * f->cell - x0;
		if (y < y1)
			row_value(f, row, s->b->counts, y, x0, x1);
		fill_gaps(f, row, y, x0, x1, OUTSIDE);
		if (y < y1)
			mark_bad(f, row, y, x0, x1, OUTSIDE);
	}
	for (int i = 0; i < CLIP_PASSES; i++) {
		T low, high, mid;
		bounds_of(f, o->mean[at], f->clip * o->sigma[at], &low, &high, &mid);
		m[0] = m[1] = m[2] = 0;
		cell_moments(cell, f->cell, x1 - x0, low, high, mid, m);
		if (m[0] < 1 || m[0] == last)
			return;
		last = m[0];
		double d = m[1] / m[0], v = m[2] / m[0] - d * d;
		o->mean[at] = ((double)mid + d) / f->scale;
		o->sigma[at] = (v > 0 ? __builtin_sqrt(v) : 0) / f->shrink / f->scale;
	}
}

// finish_moments writes mean and sigma of the cells of grid row row.
static int finish_moments(state *s, int row) {
	int e = PG_OK;
	for (int i = 0; i < s->out->columns && !e; i++) {
		int64_t at = (int64_t)row * s->out->columns + i;
		e = pg_cell_done(s->f, s->out, at, s->stats + 3 * i, (double)s->cell_mid[i] / s->f->scale, s->g);
		double sigma = s->out->sigma[at], moved = sigma - s->g->sigma[at], shift = s->out->mean[at] - s->g->mean[at];
		int far = moved > FAR * sigma || -moved > FAR * sigma || shift > FAR * sigma || -shift > FAR * sigma;
		if (!e && !s->out->filled[at] && (far || s->stats[3 * i] < CLEAN * (double)s->out->valid[at]))
			settle_cell(s, at);
	}
	return e;
}

// finish_grain writes the sigma of the filtered samples of the cells of grid row row.
static void finish_grain(state *s, int row) {
	const pg_frame *f = s->f;
	int n = f->width / GROUP, side = f->cell / GROUP, bottom = (row + 1) * f->cell < f->height ? (row + 1) * f->cell : f->height;
	int rows = (bottom - row * f->cell + 1) / GROUP;
	double guess = 0;
	for (int i = 0; i < s->out->columns; i++) {
		T *v = s->samples + (int64_t)i * side * side;
		int wide = i * side + side < n ? side : n - i * side;
		T *spare = (T *)(void *)s->b->whole;
		s->out->block[(int64_t)row * s->out->columns + i] =
		    f->use_grain && wide > 0 ? sample_sigma(f, v, side, rows, wide, s->b->torn[i] ? spare : 0, f->scale, f->floor_dn * PG_GAIN, &guess) : -1;
	}
}
