// Moments of single cells, memory of bands, and what decides between the passes.
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "correct.h"
#include "parts.h"

int pg_sample_int(const pg_frame *, pg_grid *, pg_band *, void *, int32_t, int32_t);
int pg_sample_float(const pg_frame *, pg_grid *, pg_band *, void *, int32_t, int32_t);
void pg_sample_grain_int(const pg_frame *, pg_grid *, const void *, void *, int32_t);
void pg_sample_grain_float(const pg_frame *, pg_grid *, const void *, void *, int32_t);
int pg_pass_int(const pg_frame *, const pg_grid *, pg_grid *, pg_band *, int32_t, int32_t);
int pg_pass_float(const pg_frame *, const pg_grid *, pg_grid *, pg_band *, int32_t, int32_t);

int pg_sample(const pg_frame *f, pg_grid *g, pg_band *b, void *blocks, int32_t row0, int32_t row1) {
	return (f->use_float ? pg_sample_float : pg_sample_int)(f, g, b, blocks, row0, row1);
}

int pg_pass(const pg_frame *f, const pg_grid *g, pg_grid *out, pg_band *b, int32_t row0, int32_t row1) {
	return (f->use_float ? pg_pass_float : pg_pass_int)(f, g, out, b, row0, row1);
}

int pg_sample_grain(const pg_frame *f, pg_grid *g, const void *blocks) {
	void *scratch = malloc(2 * (size_t)pg_sample_blocks(f) + 1);
	if (!scratch)
		return PG_NO_MEMORY;
	for (int row = 0; row < g->rows; row++)
		(f->use_float ? pg_sample_grain_float : pg_sample_grain_int)(f, g, blocks, scratch, row);
	free(scratch);
	return PG_OK;
}

// sample_groups is one group of four rows for 32 rows of a cell.
static int sample_groups(int cell) { return cell / 32 < 1 ? 1 : cell / 32 > PG_SAMPLES ? PG_SAMPLES : cell / 32; }

int32_t pg_sample_blocks(const pg_frame *f) { return sample_groups(f->cell) * (f->width / 4) * (f->use_float ? 4 : 2); }

int pg_sample_rows(const pg_frame *f, int row, int *y) {
	int n = sample_groups(f->cell), found = 0;
	for (int k = 0; k < n; k++) {
		int at = row * f->cell + ((2 * k + 1) * f->cell / (2 * n) - 2) / 4 * 4;
		if (at + 4 <= f->height)
			y[found++] = at;
	}
	return found;
}

// Memory.

int pg_grow(pg_runs *r) {
	int64_t room = r->room + r->room / 4 + 1024;
	pg_run *at = realloc(r->at, sizeof(pg_run) * (size_t)room);
	if (!at)
		return 1;
	r->at = at, r->room = room;
	return 0;
}

// take carves n bytes out of the block and rounds up to whole cache lines.
static char *take(char **at, size_t n) {
	char *p = *at;
	*at += (n + 63) / 64 * 64;
	return p;
}

// lay_out assigns the buffers from at and returns the end.
static char *lay_out(pg_band *b, char *at, int cell) {
	size_t t = b->is_float ? 4 : 2, row = t * (size_t)pg_pitch(b->width), columns = (size_t)b->columns;
	size_t segments = (size_t)b->width / 32 + 2, spans = sizeof(pg_span) * ((size_t)b->width / 2 + 2);
	b->value = take(&at, 4 * row);
	b->signal = take(&at, row);
	size_t ring = 4 * (size_t)sample_groups(cell); // the sampled rows and the ring are never in use together
	b->horizontal = b->samples = take(&at, (ring > 8 ? ring : 8) * row);
	b->filtered = take(&at, 4 * row);
	b->sums = (float *)(void *)b->filtered; // of the first look, which filters nothing
	b->grain = take(&at, t * columns * ((size_t)cell / 4) * ((size_t)cell / 4));
	b->torn = (uint8_t *)take(&at, columns);
	b->top = take(&at, row);
	b->slope = take(&at, row);
	b->cells = take(&at, 3 * t * columns);
	b->low = take(&at, t * segments);
	b->high = take(&at, t * segments);
	b->counts = (uint16_t *)(void *)take(&at, 2 * (size_t)pg_pitch(b->width));
	b->stats = (double *)(void *)take(&at, 3 * sizeof(double) * columns);
	b->whole = take(&at, t * (size_t)cell * (size_t)cell);
	b->highest = take(&at, t * segments);
	b->hits = (int32_t *)(void *)take(&at, sizeof(int32_t) * segments);
	b->inner = (pg_span *)(void *)take(&at, spans);
	b->spare = (pg_span *)(void *)take(&at, spans);
	return at;
}

pg_band *pg_band_new(int32_t width, int32_t cell, int32_t is_float) {
	pg_band size = {.width = width, .columns = (width + cell - 1) / cell, .is_float = is_float};
	size_t head = (sizeof(pg_band) + 63) / 64 * 64, bytes = head + (size_t)(lay_out(&size, (char *)0, cell) - (char *)0);
	char *block = aligned_alloc(64, bytes);
	if (!block)
		return 0;
	memset(block, 0, bytes);
	pg_band *b = (pg_band *)(void *)block;
	b->width = width, b->cell = cell, b->columns = size.columns, b->is_float = is_float, b->bytes = (int64_t)bytes;
	lay_out(b, block + head, cell);
	return b;
}

void pg_band_free(pg_band *b) {
	if (b) {
		free(b->runs.at);
		free(b->saturated.at);
		free(b);
	}
}

char *pg_band_room(pg_band *b, int64_t bytes) {
	const int64_t head = (sizeof(pg_band) + 63) / 64 * 64;
	return b->bytes - head < bytes ? 0 : (char *)b + head;
}

int64_t pg_band_bytes(const pg_band *b) {
	return b->bytes + (int64_t)sizeof(pg_run) * (b->runs.room + b->saturated.room);
}

// Cells.

static int by_value(const void *a, const void *b) {
	float x = *(const float *)a, y = *(const float *)b;
	return x < y ? -1 : x > y;
}

// exact_moments is raster's clipper.moments.
static void exact_moments(const pg_frame *f, const float *v, int64_t count, double *mean, double *sigma) {
	float sample[512];
	int n = 0;
	int64_t step = (count + 511) / 512, last = -1;
	for (int64_t i = 0; i < count; i += step)
		sample[n++] = v[i];
	qsort(sample, (size_t)n, sizeof(float), by_value);
	float m = sample[n / 2];
	for (int i = 0; i < n; i++)
		sample[i] = fabsf(sample[i] - m);
	qsort(sample, (size_t)n, sizeof(float), by_value);
	*mean = m, *sigma = 1.4826 * ((double)sample[n / 2] + f->floor_dn);
	for (int pass = 0; pass < 8; pass++) {
		float low = (float)(*mean - f->clip * *sigma), high = (float)(*mean + f->clip * *sigma), centre = (float)*mean;
		int64_t k = 0;
		double sum = 0, sum2 = 0;
		for (int64_t i = 0; i < count; i++)
			if (v[i] >= low && v[i] <= high) {
				double d = (double)(v[i] - centre);
				k++, sum += d, sum2 += d * d;
			}
		if (k == 0 || k == last)
			return;
		last = k;
		double d = sum / (double)k, variance = sum2 / (double)k - d * d;
		*mean = (double)centre + d;
		*sigma = sqrt(variance > 0 ? variance : 0) / f->shrink;
	}
}

int pg_cell_exact(const pg_frame *f, pg_grid *o, int64_t at) {
	int64_t least = (int64_t)(f->min_share * f->cell * f->cell);
	o->mean[at] = o->sigma[at] = 0;
	o->filled[at] = o->valid[at] < (least > 16 ? least : 16);
	if (o->filled[at])
		return 0;
	int x0 = (int)(at % o->columns) * f->cell, y0 = (int)(at / o->columns) * f->cell;
	int x1 = x0 + f->cell < f->width ? x0 + f->cell : f->width, y1 = y0 + f->cell < f->height ? y0 + f->cell : f->height;
	float *v = malloc(sizeof(float) * (size_t)o->valid[at]);
	if (!v)
		return 1;
	int64_t n = 0;
	for (int y = y0; y < y1; y++)
		for (int i = f->span_start[y]; i < f->span_start[y + 1]; i++)
			for (int x = f->spans[i].x0 > x0 ? f->spans[i].x0 : x0; x < x1 && x < f->spans[i].x1; x++)
				if (!pg_is_bad(f, x, y) && n < o->valid[at])
					v[n++] = pg_correct_one(f, x, y);
	exact_moments(f, v, n, o->mean + at, o->sigma + at);
	free(v);
	return 0;
}

// CLIP_SLOPE extrapolates one step of clipping at 3 sigmas to where it leads: a step makes
// an error of the sigma 0.109 times as large (from the derivative of shrink), and
// 0.109/(1 − 0.109) of the step is left to go.
#define CLIP_SLOPE 0.12

// pg_cell_done turns number, sum and sum of squares about mid (DN) into the cell's
// moments: one step of the clipping from those of the grid before. Where that step was
// long, or there is nothing before, the cell is measured as the reference does.
int pg_cell_done(const pg_frame *f, pg_grid *o, int64_t at, const double *stats, double mid, const pg_grid *before) {
	o->filled[at] = 0;
	if (!before->filled[at] && stats[0] >= 0.6 * (double)o->valid[at] && stats[0] >= 16) {
		double d = stats[1] / stats[0], v = stats[2] / stats[0] - d * d, unit = f->use_float ? 1 : f->scale;
		double mean = mid + d / unit, sigma = sqrt(v > 0 ? v : 0) / f->shrink / unit, moved = sigma - before->sigma[at];
		o->mean[at] = mean, o->sigma[at] = sigma + CLIP_SLOPE * moved;
		if (fabs(mean - before->mean[at]) < 0.4 * sigma && fabs(moved) < 0.2 * sigma)
			return PG_OK;
	}
	return pg_cell_exact(f, o, at);
}

// steps finds the range of the nodes and the largest difference between neighbours.
static void steps(const pg_grid *g, double *low, double *high, double *across, double *down) {
	*low = *high = g->level[0], *across = *down = 0;
	for (int64_t i = 0; i < (int64_t)g->columns * g->rows; i++) {
		double v = g->level[i];
		*low = fmin(*low, v), *high = fmax(*high, v);
		if (i % g->columns)
			*across = fmax(*across, fabs(v - g->level[i - 1]));
		if (i >= g->columns)
			*down = fmax(*down, fabs(v - g->level[i - g->columns]));
	}
}

// pg_limits is the range of values whose difference to every level has 16 bits.
void pg_limits(const pg_frame *f, const pg_grid *g, double *least, double *most) {
	double low, high, across, down;
	steps(g, &low, &high, &across, &down);
	high = (high + across + down) * f->scale + 2, low = (low - across - down) * f->scale - 2;
	*least = fmin(fmax(high, 0), 32767) - 32767;
	*most = 32767 + fmax(fmin(low, 0), -32767);
}

int pg_fits(const pg_frame *f, const pg_grid *g) {
	double low, high, across, down, noise = 0, widest = 0, n = 0;
	steps(g, &low, &high, &across, &down);
	for (int64_t i = 0; i < (int64_t)g->columns * g->rows; i++)
		if (g->inside[i] > 0)
			noise += g->noise[i], widest = fmax(widest, g->sigma[i]), n++;
	if (n == 0)
		return 1;
	return (high + across + down) * f->scale < 32700 && (low - across - down) * f->scale > -16000 &&
	       3 * fmax(down, across) * f->scale < 16000 && f->clip * widest * f->scale < PG_REACH && PG_GAIN * noise / n * f->scale > 1.2;
}
