// Level and noise in cells: what raster.MeasureGrid makes of the moments of its cells.
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "correct.h"
#include "parts.h"

double pg_middle(double *v, int n) {
	for (int i = 1; i < n; i++) {
		double t = v[i];
		int j = i;
		for (; j > 0 && v[j - 1] > t; j--)
			v[j] = v[j - 1];
		v[j] = t;
	}
	return v[n / 2];
}

static double median(double *v, int n) {
	double upper = pg_middle(v, n);
	return (upper + v[(n - 1) / 2]) / 2;
}

// at returns the cell dx columns and dy rows from (x, y), or −1 where there is none.
static int64_t at(const pg_grid *g, int x, int y, int dx, int dy) {
	x += dx, y += dy;
	return x >= 0 && y >= 0 && x < g->columns && y < g->rows ? (int64_t)y * g->columns + x : -1;
}

static int neighbour(const pg_grid *g, const double *v, int x, int y, int dx, int dy, int slope, double *out) {
	int64_t j = at(g, x, y, dx, dy);
	if (j >= 0 && !g->filled[j]) {
		*out = v[j];
		return 1;
	}
	j = slope ? at(g, x, y, -dx, -dy) : -1;
	if (j < 0 || g->filled[j])
		return 0;
	*out = 2 * v[(int64_t)y * g->columns + x] - v[j];
	return 1;
}

// These are raster's medianStep, evenStep and evenSpread.
#define MEDIAN_STEP 0.3
#define EVEN_STEP 1.0
#define EVEN_SPREAD 1.15

// all_near copies the 3 × 3 cells around (x, y); returns 0 where one is missing.
static int all_near(const pg_grid *g, const double *v, int x, int y, double *near) {
	if (x < 1 || y < 1 || x + 1 >= g->columns || y + 1 >= g->rows)
		return 0;
	int filled = 0;
	for (int dy = -1; dy <= 1; dy++)
		for (int dx = -1; dx <= 1; dx++) {
			int64_t j = (int64_t)(y + dy) * g->columns + x + dx;
			*near++ = v[j];
			filled |= g->filled[j];
		}
	return !filled;
}

// median_row writes the medians of 3 × 3 values about the inner cells of row y, whether or
// not they were measured; 19 exchanges each
// (Paeth, Graphics Gems, 1990).
PG_KERNEL void median_row(double *restrict dst, const double *restrict above, const double *restrict row, const double *restrict below,
                          int columns) {
	for (int x = 1; x + 1 < columns; x++) {
		double p[9] = {above[x - 1], above[x], above[x + 1], row[x - 1], row[x], row[x + 1], below[x - 1], below[x], below[x + 1]};
#define EXCHANGE(i, j)                                     \
	{                                                      \
		double low = p[i] < p[j] ? p[i] : p[j];            \
		p[j] = p[i] < p[j] ? p[j] : p[i];                  \
		p[i] = low;                                        \
	}
		EXCHANGE(1, 2) EXCHANGE(4, 5) EXCHANGE(7, 8) EXCHANGE(0, 1) EXCHANGE(3, 4) EXCHANGE(6, 7) EXCHANGE(1, 2)
		EXCHANGE(4, 5) EXCHANGE(7, 8) EXCHANGE(0, 3) EXCHANGE(5, 8) EXCHANGE(4, 7) EXCHANGE(3, 6) EXCHANGE(1, 4)
		EXCHANGE(2, 5) EXCHANGE(4, 7) EXCHANGE(4, 2) EXCHANGE(6, 4) EXCHANGE(4, 2)
#undef EXCHANGE
		dst[x] = p[4];
	}
}

// three_rows finds whether all cells of rows y − 1 to y + 1 are known; unknown is not 0
// where a cell is not.
static int three_rows(const uint8_t *unknown, int columns, int rows, int y) {
	if (y < 1 || y + 1 >= rows)
		return 0;
	return !memchr(unknown + (int64_t)(y - 1) * columns, 1, 3 * (size_t)columns);
}

static double near_median(const pg_grid *g, const double *v, int x, int y, int slope) {
	double near[9];
	int n = 0;
	for (int k = 0; k < 9; k++)
		n += neighbour(g, v, x, y, k % 3 - 1, k / 3 - 1, slope, near + n);
	return median(near, n);
}

static void medians(const pg_grid *g, double *dst, const double *v, int slope) {
	for (int y = 0; y < g->rows; y++) {
		const int64_t at = (int64_t)y * g->columns;
		const int whole = three_rows(g->filled, g->columns, g->rows, y);
		if (whole)
			median_row(dst + at, v + at - g->columns, v + at, v + at + g->columns, g->columns);
		for (int x = 0; x < g->columns; x++) {
			const int64_t i = at + x;
			if (g->filled[i]) {
				dst[i] = v[i];
				continue;
			}
			if (!whole || x < 1 || x + 1 >= g->columns)
				dst[i] = near_median(g, v, x, y, slope);
		}
	}
}

// keep_even puts back the levels that are near the median of their neighbourhood.
static void keep_even(pg_grid *g) {
	for (int64_t i = 0, cells = (int64_t)g->columns * g->rows; i < cells; i++) {
		int even = g->sigma[i] <= EVEN_SPREAD * g->noise[i];
		double step = even ? EVEN_STEP * g->noise[i] : MEDIAN_STEP * g->sigma[i];
		if (fabs(g->mean[i] - g->level[i]) <= step)
			g->level[i] = g->mean[i];
	}
}

static int fill_cell(const pg_grid *g, int x, int y, const uint8_t *known) {
	double n = 0, level = 0, noise = 0;
	for (int k = 0; k < 9; k++) {
		int dx = k % 3 - 1, dy = k / 3 - 1;
		int64_t j = at(g, x, y, dx, dy), far = at(g, x, y, 2 * dx, 2 * dy);
		if (j < 0 || !known[j])
			continue;
		double l = g->level[j];
		if (far >= 0 && known[far])
			l = 2 * l - g->level[far];
		n++, level += l, noise += g->noise[j];
	}
	int64_t i = (int64_t)y * g->columns + x;
	if (n > 0)
		g->level[i] = level / n, g->noise[i] = noise / n;
	return n > 0;
}

static void fill(const pg_grid *g, uint8_t *known, uint8_t *next) {
	int64_t cells = (int64_t)g->columns * g->rows, left = 0;
	for (int64_t i = 0; i < cells; i++) {
		known[i] = !g->filled[i];
		left += g->filled[i];
	}
	while (left > 0 && left < cells) {
		memcpy(next, known, (size_t)cells);
		for (int64_t i = 0; i < cells; i++)
			if (!known[i] && fill_cell(g, (int)(i % g->columns), (int)(i / g->columns), known)) {
				next[i] = 1;
				left--;
			}
		memcpy(known, next, (size_t)cells);
	}
}

int pg_smooth(const pg_frame *f, pg_grid *g) {
	(void)f;
	size_t cells = (size_t)g->columns * (size_t)g->rows;
	uint8_t *known = malloc(2 * cells);
	if (!known)
		return PG_NO_MEMORY;
	medians(g, g->level, g->mean, 1);
	medians(g, g->noise, g->sigma, 0);
	keep_even(g);
	fill(g, known, known + cells);
	free(known);
	return PG_OK;
}

// A sampled level is known to about 0.044 sigma and differs by 0.041 from that of all
// rows; the mean of nine differs from its middle one by 0.039 where the frame is smooth.
#define CALM 0.055
#define SLACK 0.15
#define CALM_SLACK 0.09

void pg_calm(const pg_frame *f, pg_grid *g) {
	double near[9], sum = 0, n = 0;
	(void)f;
	g->slack = SLACK;
	for (int apply = 0; apply < 2; apply++) {
		if (apply && !(n > 0 && sum < n * CALM * CALM))
			return;
		for (int y = 0; y < g->rows; y++)
			for (int x = 0; x < g->columns; x++) {
				int64_t i = (int64_t)y * g->columns + x;
				if (!all_near(g, g->mean, x, y, near) || !(g->noise[i] > 0))
					continue;
				double mean = 0;
				for (int k = 0; k < 9; k++)
					mean += near[k] / 9;
				double off = (g->mean[i] - mean) / g->noise[i];
				if (off > 0.2 || off < -0.2)
					continue;
				if (apply)
					g->level[i] = mean;
				else
					sum += off * off, n++;
			}
	}
	g->slack = CALM_SLACK;
}

// factor_at is the median of the known factors around a cell, 1 where there is none.
static double factor_at(const pg_grid *g, int x, int y) {
	double near[9];
	int n = 0;
	for (int k = 0; k < 9; k++) {
		int64_t j = at(g, x, y, k % 3 - 1, k / 3 - 1);
		if (j >= 0 && g->block[j] >= 0)
			near[n++] = g->block[j];
	}
	return n > 0 ? median(near, n) : 1;
}

int pg_grain(const pg_frame *f, pg_grid *g, double share) {
	size_t cells = (size_t)g->columns * (size_t)g->rows;
	uint8_t *unknown = malloc(cells);
	double *row = malloc(sizeof(double) * (size_t)g->columns);
	int e = unknown && row ? PG_OK : PG_NO_MEMORY;
	for (size_t i = 0; i < cells && !e; i++) { // the factor; mean and sigma stay for the next pass
		unknown[i] = !(f->use_grain && g->block[i] >= 0 && g->noise[i] > 0);
		g->block[i] = unknown[i] ? -1 : g->block[i] / (PG_GAIN * g->noise[i]);
	}
	for (int y = 0; y < g->rows && !e; y++) {
		const double *b = g->block + (int64_t)y * g->columns;
		double *noise = g->noise + (int64_t)y * g->columns;
		int whole = three_rows(unknown, g->columns, g->rows, y);
		if (whole)
			median_row(row, b - g->columns, b, b + g->columns, g->columns);
		for (int x = 0; x < g->columns; x++) {
			double factor = share * (whole && x > 0 && x + 1 < g->columns ? row[x] : factor_at(g, x, y));
			noise[x] *= factor > 1 ? factor : 1;
			noise[x] = noise[x] > f->floor_dn ? noise[x] : f->floor_dn;
		}
	}
	free(row);
	free(unknown);
	return e;
}

double pg_level(const pg_grid *g, int cell, double x, double y) {
	double p[2] = {x, y}, q[2];
	int i[2], n[2] = {g->columns, g->rows};
	for (int k = 0; k < 2; k++) {
		double c = (p[k] + 0.5) / cell - 0.5;
		i[k] = n[k] == 1 || c < 0 ? 0 : c > n[k] - 2 ? n[k] - 2 : (int)c;
		q[k] = n[k] == 1 ? 0 : c - i[k];
	}
	const double *top = g->level + (int64_t)i[1] * g->columns, *bottom = i[1] + 1 < g->rows ? top + g->columns : top;
	int a = i[0], b = a + 1 < g->columns ? a + 1 : a;
	return (1 - q[1]) * ((1 - q[0]) * top[a] + q[0] * top[b]) + q[1] * ((1 - q[0]) * bottom[a] + q[0] * bottom[b]);
}

// count_span adds a span to the counts of its cells; whole cells between the two at its
// ends go to more, as a difference of neighbours.
static void count_span(const pg_frame *f, int64_t *inside, int64_t *more, pg_span s) {
	int a = s.x0 / f->cell, b = (s.x1 - 1) / f->cell;
	if (a == b) {
		inside[a] += s.x1 - s.x0;
		return;
	}
	inside[a] += (a + 1) * f->cell - s.x0;
	inside[b] += s.x1 - b * f->cell;
	more[a + 1]++, more[b]--;
}

void pg_count_cells(const pg_frame *f, pg_grid *g, int row0, int row1) {
	for (int row = row0; row < row1; row++) {
		int64_t *inside = g->inside + (int64_t)row * g->columns, *valid = g->valid + (int64_t)row * g->columns, whole = 0;
		memset(inside, 0, sizeof(int64_t) * (size_t)g->columns);
		memset(valid, 0, sizeof(int64_t) * (size_t)g->columns);
		int y1 = (row + 1) * f->cell < f->height ? (row + 1) * f->cell : f->height;
		for (int i = f->span_start[row * f->cell]; i < f->span_start[y1]; i++)
			count_span(f, inside, valid, f->spans[i]);
		for (int i = 0; i < g->columns; i++) {
			whole += valid[i];
			inside[i] += whole * f->cell;
			valid[i] = inside[i];
		}
		for (int y = row * f->cell; f->bad_start && y < y1; y++)
			for (int i = f->bad_start[y]; i < f->bad_start[y + 1]; i++)
				for (int k = f->span_start[y]; k < f->span_start[y + 1]; k++)
					if (f->bad_x[i] >= f->spans[k].x0 && f->bad_x[i] < f->spans[k].x1)
						valid[f->bad_x[i] / f->cell]--;
	}
}
