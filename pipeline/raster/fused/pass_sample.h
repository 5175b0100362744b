// The first look at a frame: level and noise of the cells from some of their rows.
#include "pass_rows.h"

// settle finds the clipped moments of a cell's sampled rows from a start; returns the
// share of valid pixels that are within the clip.
static double settle(state *s, T **rows, int groups, int x0, int x1, double *mean, double *sigma, double valid) {
	const pg_frame *f = s->f;
	double shrink = f->shrink, n = 0;
	for (int i = 0; i < CLIP_PASSES; i++) {
		double m[3] = {0, 0, 0}, before = *sigma;
		T low, high, mid;
		bounds_of(f, *mean, f->clip * *sigma, &low, &high, &mid);
		for (int k = 0; k < groups; k++)
			for (int x = x0; x < x1; x += 64)
				moments(rows[4 * k], rows[4 * k + 1], rows[4 * k + 2], rows[4 * k + 3], x, x + 64 < x1 ? x + 64 : x1, low, high, mid, m);
		if (m[0] < 1)
			return 0;
		double d = m[1] / m[0], v = m[2] / m[0] - d * d;
		*mean = ((double)mid + d) / f->scale;
		*sigma = (v > 0 ? __builtin_sqrt(v) : 0) / shrink / f->scale;
		*sigma = *sigma > f->floor_dn / 4 ? *sigma : f->floor_dn / 4;
		double moved = *sigma - before;
		n = m[0];
		if (moved < 0.01 * *sigma && moved > -0.01 * *sigma)
			break;
	}
	return n / valid;
}

// robust starts at the median and 1.4826 times the median absolute deviation of up to 64
// values.
static void robust(state *s, T **rows, int groups, int x0, int x1, double *mean, double *sigma) {
	double v[64];
	int n = 0, step = 4 * groups * (x1 - x0) / 64 + 1;
	for (int i = step / 2; i < 4 * groups * (x1 - x0) && n < 64; i += step) {
		T t = rows[i / (x1 - x0)][x0 + i % (x1 - x0)];
		if (t != OUTSIDE)
			v[n++] = (double)t / s->f->scale;
	}
	*mean = n > 0 ? pg_middle(v, n) : 0;
	for (int i = 0; i < n; i++)
		v[i] = v[i] > *mean ? v[i] - *mean : *mean - v[i];
	*sigma = 1.4826 * ((n > 0 ? pg_middle(v, n) : 0) + s->f->floor_dn);
}

PG_KERNEL int count_valid(T **rows, int groups, int x0, int x1) {
	int n = 0;
	for (int k = 0; k < 4 * groups; k++)
		for (int x = x0; x < x1; x++)
			n += rows[k][x] != OUTSIDE;
	return n;
}

// sample_cells measures the cells of one grid row on the groups of rows loaded.
static int sample_cells(state *s, pg_grid *g, T **rows, int groups, int row, int x0, int x1, double share) {
	const pg_frame *f = s->f;
	double mean = 0, sigma = 0, least = f->min_share * f->cell * f->cell * share;
	for (int i = 0; i < g->columns; i++) {
		int64_t at = (int64_t)row * g->columns + i;
		int a = i * f->cell > x0 ? i * f->cell : x0, e = (i + 1) * f->cell < x1 ? (i + 1) * f->cell : x1;
		int n = a < e ? count_valid(rows, groups, a, e) : 0;
		g->filled[at] = 0;
		if (n < (least > 16 ? least : 16)) { // too few sampled, but perhaps enough in all
			if (pg_cell_exact(f, g, at))
				return PG_NO_MEMORY;
			continue;
		}
		double found = sigma > 0 ? settle(s, rows, groups, a, e, &mean, &sigma, n) : 0;
		if (found < 0.6) {
			robust(s, rows, groups, a, e, &mean, &sigma);
			settle(s, rows, groups, a, e, &mean, &sigma, n);
		}
		g->mean[at] = mean, g->sigma[at] = sigma;
		if (n < 3 * groups * f->cell) // cut by the region's edge: few values, so take all there are
			settle_cell(s, at);
	}
	return PG_OK;
}

// sample_means writes the block means of four rows, OUTSIDE where a pixel does not count.
// sums and least hold a row each.
PG_KERNEL void sample_means(const pg_frame *f, T *restrict dst, T **rows, float *restrict sums, T *restrict least, int x0, int x1) {
	const T *restrict a = rows[0], *restrict b = rows[1], *restrict c = rows[2], *restrict d = rows[3];
	for (int x = x0; x < x1; x++) {
		T p = a[x] < b[x] ? a[x] : b[x], q = c[x] < d[x] ? c[x] : d[x];
		least[x] = p < q ? p : q;
		sums[x] = (float)a[x] + (float)b[x] + (float)c[x] + (float)d[x];
	}
	for (int i = 0; i < f->width / GROUP; i++)
		dst[i] = OUTSIDE;
	for (int i = x0 / GROUP; i < x1 / GROUP; i++) {
		const T *l = least + GROUP * i;
		const float *s = sums + GROUP * i;
		int out = (l[0] == OUTSIDE) | (l[1] == OUTSIDE) | (l[2] == OUTSIDE) | (l[3] == OUTSIDE);
		dst[i] = out ? OUTSIDE : (T)((s[0] + s[1] + s[2] + s[3]) * (1.f / 16));
	}
}

// has_grain is whether the first look measures the grain of a grid row's cells, or takes
// that of the row above: it only says how many candidates there will be.
PG_INLINE int has_grain(int row) { return row % 2 == 0; }

static int sample(const pg_frame *f, pg_grid *g, pg_band *b, T *blocks, int row0, int row1) {
	state s;
	T *rows[4 * PG_SAMPLES];
	pg_count_cells(f, g, row0, row1);
	start(&s, f, g, g, b);
	for (int k = 0; k < 4 * PG_SAMPLES; k++)
		rows[k] = (T *)(void *)(b->samples + sizeof(T) * (size_t)s.pitch * (size_t)k) + PAD;
	for (int row = row0; row < row1; row++) {
		int y[PG_SAMPLES], x0, x1, n = pg_sample_rows(f, row, y);
		int bottom = (row + 1) * f->cell < f->height ? (row + 1) * f->cell : f->height;
		hull(f, row * f->cell, bottom, &x0, &x1);
		T *means = blocks + (int64_t)row * pg_sample_blocks(f) / (int64_t)sizeof(T);
		for (int k = 0; k < n; k++) {
			if (x0 < x1) {
				int e = load(&s, rows + 4 * k, y[k], x0, x1, 0);
				if (e)
					return e;
			}
			if (f->use_grain && has_grain(row))
				sample_means(f, means + (int64_t)k * (f->width / GROUP), rows + 4 * k, b->sums, s.signal, x0, x1);
		}
		int e = sample_cells(&s, g, rows, n, row, x0, x1, 4. * n / (bottom - row * f->cell));
		if (e)
			return e;
	}
	return PG_OK;
}

// less_level writes the means of blocks in rows y to y + 3 less the level, as samples.
static void less_level(const pg_frame *f, const pg_grid *g, T *restrict dst, const T *restrict means, int y) {
	const int columns = f->width / GROUP, wide = f->cell / GROUP;
	for (int i = 0; i < columns;) { // between two nodes the level is a straight line
		int c = (i - wide / 2) / wide + (i >= wide / 2 ? 1 : 0), end = c * wide + wide / 2;
		end = end < columns && end > i ? end : columns;
		float first = (float)pg_level(g, f->cell, GROUP * i + 1.5, y + 1.5);
		float step = (float)(pg_level(g, f->cell, GROUP * i + 2.5, y + 1.5) - pg_level(g, f->cell, GROUP * i + 1.5, y + 1.5)) * GROUP;
		const float unit = (float)(1 / f->scale), out = (float)f->scale * SAMPLE_SCALE;
		for (int k = 0; k < end - i; k++)
			dst[i + k] = means[i + k] == OUTSIDE ? OUTSIDE : to_sample(((float)means[i + k] * unit - first - step * (float)k) * out);
		i = end;
	}
}

// sample_grain measures the sampled blocks of grid row row against the level; scratch
// holds twice as many T as blocks in a row.
static void sample_grain(const pg_frame *f, pg_grid *g, const T *blocks, T *scratch, int row) {
	int y[PG_SAMPLES], n = pg_sample_rows(f, row, y), columns = f->width / GROUP;
	const T *means = blocks + (int64_t)row * pg_sample_blocks(f) / (int64_t)sizeof(T);
	double guess = 0;
	if (!has_grain(row)) {
		memcpy(g->block + (int64_t)row * g->columns, g->block + (int64_t)(row - 1) * g->columns, sizeof(double) * (size_t)g->columns);
		return;
	}
	for (int k = 0; k < n; k++)
		less_level(f, g, scratch + (int64_t)k * columns, means + (int64_t)k * columns, y[k]);
	for (int i = 0; i < g->columns; i++) {
		int64_t at = (int64_t)row * g->columns + i;
		int a = i * (f->cell / GROUP), e = a + f->cell / GROUP < columns ? a + f->cell / GROUP : columns;
		double sigma = a >= e ? -1 : sample_sigma(f, scratch + a, columns, n, e - a, scratch + (int64_t)n * columns, SAMPLE_SCALE * f->scale, f->floor_dn / 4, &guess);
		g->block[at] = sigma < 0 ? -1 : 4 * PG_GAIN * sigma; // as the filter would leave white noise
	}
}
