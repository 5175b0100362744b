// The rest of the pass: the filter along y, thresholds and runs, and the loops over rows.
#include "pass_body.h"

// highest4 is the highest of four values, or with both the highest magnitude.
PG_INLINE T highest4(T p, T q, T u, T v, int both) {
	T top = p > q ? p : q, z = u > v ? u : v;
	top = top > z ? top : z;
	if (!both)
		return top;
	p = p < q ? p : q, z = u < v ? u : v;
	p = p < z ? (T)-p : (T)-z;
	return top > p ? top : p;
}

// down_part filters eight rows along y to four; it returns the highest value in them, or
// with both the highest magnitude, if that is above 0. No more than a segment is taken.
PG_INLINE T down_part(T *restrict a, T *restrict b, T *restrict c, T *restrict d, const T *restrict i, const T *restrict j,
                      const T *restrict k, const T *restrict l, const T *restrict m, const T *restrict n, const T *restrict o,
                      const T *restrict p, int both, int x0, int x1) {
	T top[SEGMENT] = {0}, most = 0;
	for (int x = x0; x < x1; x++) {
		T e = taps(i[x], j[x], k[x], l[x], m[x]), f = taps(j[x], k[x], l[x], m[x], n[x]);
		T g = taps(k[x], l[x], m[x], n[x], o[x]), h = taps(l[x], m[x], n[x], o[x], p[x]);
		a[x] = e, b[x] = f, c[x] = g, d[x] = h;
		top[x - x0] = highest4(e, f, g, h, both);
	}
	for (int x = 0; x < SEGMENT; x++)
		most = most > top[x] ? most : top[x];
	return most;
}

#define DOWN_PART(BOTH, X0, X1) down_part(a, b, c, d, i, j, k, l, m, n, o, p, BOTH, X0, X1)

// down filters eight rows along y to four, and writes the highest value (or magnitude) of
// each segment.
PG_KERNEL void down(T *restrict a, T *restrict b, T *restrict c, T *restrict d, const T *restrict i, const T *restrict j,
                    const T *restrict k, const T *restrict l, const T *restrict m, const T *restrict n, const T *restrict o,
                    const T *restrict p, T *restrict highest, int both, int x0, int x1) {
	for (int x = x0; x < x1; x += SEGMENT)
		if (x + SEGMENT > x1)
			highest[x / SEGMENT] = DOWN_PART(both, x, x1);
		else if (both)
			highest[x / SEGMENT] = DOWN_PART(1, x, x + SEGMENT);
		else
			highest[x / SEGMENT] = DOWN_PART(0, x, x + SEGMENT);
}

// marks returns a bit for each pixel of a segment that reaches low, or with both its
// magnitude.
PG_INLINE uint32_t marks(const T *restrict f, T low, int both) {
	uint8_t at[SEGMENT];
	uint32_t bits = 0;
	for (int x = 0; x < SEGMENT; x++)
		at[x] = f[x] >= low;
	for (int x = 0; x < SEGMENT && both; x++)
		at[x] |= f[x] <= -low;
	for (int k = 0; k < SEGMENT; k += 8) { // the lowest bits of eight bytes, gathered by one product
		uint64_t eight = 0;
		for (int i = 0; i < 8; i++)
			eight |= (uint64_t)at[k + i] << (8 * i);
		bits |= (uint32_t)(eight * 0x0102040810204080ull >> 56) << k;
	}
	return bits;
}

// mark_hits lists the segments in which one of four rows reaches the threshold, and the
// marks of each row in them; returns how many they are.
PG_KERNEL int mark_hits(T **rows, const T *restrict highest, const T *restrict low, int both, int32_t *restrict hits,
                        uint32_t *restrict bits, int first, int end) {
	int n = 0;
	for (int j = first; j < end; j++) {
		hits[n] = j;
		n += highest[j] >= low[j];
	}
	for (int i = 0; i < n; i++)
		for (int k = 0; k < GROUP; k++)
			bits[GROUP * i + k] = marks(rows[k] + hits[i] * SEGMENT, low[hits[i]], both);
	return n;
}

static void vertical(state *s, int y, int x0, int x1) {
	T *h[8], **f = s->filtered;
	const int both = s->f->polarity == 0;
	for (int k = 0; k < 8; k++)
		h[k] = s->ring[(y - 4 + k) & 7];
	down(f[0], f[1], f[2], f[3], h[0], h[1], h[2], h[3], h[4], h[5], h[6], h[7], s->highest, both, x0, x1);
	s->hit_count = mark_hits(f, s->highest, s->low, both, s->hits, s->bits, x0 / SEGMENT, (x1 + SEGMENT - 1) / SEGMENT);
}

// scan adds the runs of f[x0 … x1) at or above the threshold, divided by share.
static int scan(state *s, const T *f, int y, int x0, int x1, int share) {
	const int both = s->f->polarity == 0;
	for (int x = x0; x < x1; x++) {
		int j = x / SEGMENT, end = (j + 1) * SEGMENT < x1 ? (j + 1) * SEGMENT : x1;
		T low = s->low[j], high = s->high[j];
		for (; x < end; x++) {
			BOUND v = (BOUND)((both && f[x] < 0 ? -f[x] : f[x]) * share);
			if (v >= low && pg_run_add(&s->b->runs, y, x, x + 1, v >= high))
				return PG_NO_MEMORY;
		}
		x--;
	}
	return PG_OK;
}

// scan_segment is scan of a whole segment with these marks, with a share of 1.
static int scan_segment(state *s, const T *f, int y, int j, uint32_t bits) {
	const T high = s->high[j];
	for (int x = j * SEGMENT; bits;) {
		int skip = __builtin_ctz(bits), end, top = 0;
		bits >>= skip, x += skip;
		end = x + (~bits ? __builtin_ctz(~bits) : SEGMENT);
		bits = end - x < SEGMENT ? bits >> (end - x) : 0;
		for (int u = x; u < end; u++)
			top |= (BOUND)(f[u] < 0 ? -f[u] : f[u]) >= high;
		if (pg_run_add(&s->b->runs, y, x, end, top))
			return PG_NO_MEMORY;
		x = end;
	}
	return PG_OK;
}

// scan_inner is scan that looks only at segments with a pixel above the threshold, from
// the list's entry *next on. The row is the k-th of its group.
static int scan_inner(state *s, int k, int y, int x0, int x1, int *next) {
	const T *f = s->filtered[k];
	for (; *next < s->hit_count; ++*next) {
		int j = s->hits[*next];
		const uint32_t bits = s->bits[GROUP * *next + k];
		if (bits == 0 || (j + 1) * SEGMENT <= x0)
			continue;
		if (j * SEGMENT >= x1)
			break;
		int a = j * SEGMENT < x0 ? x0 : j * SEGMENT, e = (j + 1) * SEGMENT < x1 ? (j + 1) * SEGMENT : x1;
		if (e - a == SEGMENT ? scan_segment(s, f, y, j, bits) : scan(s, f, y, a, e, 1))
			return PG_NO_MEMORY;
		if ((j + 1) * SEGMENT > x1)
			break; // the rest of the segment may lie in the next span
	}
	return PG_OK;
}

// runs_of adds the runs of row y, the k-th of its group. Near the region's edge the reference scales the filter
// by up to 1.95, so there everything above half of the threshold is a candidate.
static int runs_of(state *s, int k, int y) {
	const T *f = s->filtered[k];
	int n, m = span_inner(s->f, y, &s->inner, &s->spare), at = 0, next = 0;
	const pg_span *p = spans_of(s->f, y, &n), *in = s->inner;
	for (int i = 0; i < n; i++) {
		int x = p[i].x0;
		for (; at < m && in[at].x0 < p[i].x1; at++) {
			if (scan(s, f, y, x, in[at].x0, 2) || scan_inner(s, k, y, in[at].x0, in[at].x1, &next))
				return PG_NO_MEMORY;
			x = in[at].x1;
		}
		if (scan(s, f, y, x, p[i].x1, 2))
			return PG_NO_MEMORY;
	}
	return PG_OK;
}

static void start(state *s, const pg_frame *f, const pg_grid *g, pg_grid *out, pg_band *b) {
	*s = (state){.f = f, .g = g, .out = out, .b = b, .node_row = -1, .threshold_key = -1};
	s->pitch = pg_pitch(f->width);
	size_t row = sizeof(T) * (size_t)s->pitch;
	for (int k = 0; k < GROUP; k++) {
		s->value[k] = (T *)(void *)(b->value + row * k) + PAD;
		s->filtered[k] = (T *)(void *)(b->filtered + row * k) + PAD;
	}
	for (int k = 0; k < 8; k++)
		s->ring[k] = (T *)(void *)(b->horizontal + row * k) + PAD;
	s->signal = (T *)(void *)b->signal + PAD;
	s->top = (T *)(void *)b->top + PAD;
	s->slope = (T *)(void *)b->slope + PAD;
	s->samples = (T *)(void *)b->grain;
	s->highest = (T *)(void *)b->highest;
	s->low = (T *)(void *)b->low;
	s->high = (T *)(void *)b->high;
	s->stats = b->stats;
	s->cell_low = (T *)(void *)b->cells;
	s->cell_high = s->cell_low + g->columns;
	s->cell_mid = s->cell_high + g->columns;
	s->inner = b->inner, s->spare = b->spare, s->hits = b->hits;
	s->bits = (uint32_t *)(void *)b->counts; // rows are unpacked before they are filtered
	double least, most;
	pg_limits(f, g, &least, &most);
	s->least = (T)least, s->most = (T)most;
}

// group takes four rows from y through the pass; with keep they count for cells.
static int group(state *s, int y, int keep) {
	const pg_frame *f = s->f;
	int x0, x1;
	hull(f, y - GROUP, y + 2 * GROUP, &x0, &x1);
	if (x0 >= x1 || y < 0 || y >= f->height) {
		for (int k = 0; k < GROUP; k++)
			memset(s->ring[(y + k) & 7] - PAD, 0, sizeof(T) * (size_t)s->pitch);
		return PG_OK;
	}
	int e = load(s, s->value, y, x0, x1, keep);
	if (e)
		return e;
	pg_stream next[3 * GROUP]; // of the next four rows
	for (int k = 0; k < GROUP; k++)
		pg_streams(f, y + GROUP + k, next + 3 * k);
	if (keep)
		add_moments(s, s->value, x0, x1, next);
	for (int k = 0; k < GROUP; k++)
		if (y + k < f->height)
			to_signal(s, s->value[k], y + k, x0, x1, next + GROUP + 2 * k);
		else
			memset(s->ring[(y + k) & 7] - PAD, 0, sizeof(T) * (size_t)s->pitch);
	return PG_OK;
}

// emit filters along y and adds the runs of the rows y − 2 to y + 1 that lie from first to
// before last.
static int emit(state *s, int y, int first, int last) {
	int x0, x1;
	hull(s->f, y - 2, y + 2, &x0, &x1);
	if (x0 < x1) {
		thresholds(s, y - 2);
		vertical(s, y, x0, x1);
	}
	if (s->out && s->f->use_grain && y - 2 >= first && y - 2 < last)
		take_samples(s, s->filtered[0], y - 2);
	for (int k = 0; k < GROUP && x0 < x1; k++) {
		int row = y - 2 + k;
		if (row >= first && row < last && runs_of(s, k, row))
			return PG_NO_MEMORY;
	}
	return PG_OK;
}

static int pass(const pg_frame *f, const pg_grid *g, pg_grid *out, pg_band *b, int row0, int row1) {
	state s;
	start(&s, f, g, out, b);
	b->runs.count = b->saturated.count = 0;
	const int keep = out != 0;
	int first = row0 * f->cell, last = row1 * f->cell < f->height ? row1 * f->cell : f->height;
	int e = group(&s, first - GROUP, 0), y = first;
	for (; y < last && !e; y += GROUP) {
		if (keep && y % f->cell == 0)
			start_cells(&s, y / f->cell);
		e = group(&s, y, keep);
		e = e ? e : emit(&s, y, first, last);
		if (keep && y % f->cell == 0 && y > first) // the last samples of the row above came with this group
			finish_grain(&s, y / f->cell - 1);
		if (keep && !e && ((y + GROUP) % f->cell == 0 || y + GROUP >= last))
			e = finish_moments(&s, y / f->cell);
	}
	e = e ? e : group(&s, y, 0);
	e = e ? e : emit(&s, y, first, last);
	if (keep)
		finish_grain(&s, row1 - 1);
	return e;
}
