// The search of a strip: every line sum of every tile against the spread of its slope.
#include <stdlib.h>
#include <string.h>

#include "strip.h"

// An odd number of cache lines: rows do not then compete for the same places of a cache.
static int64_t pitch_of(int32_t length) { return (((int64_t)LN_PAD + length + 2 * LN_ROWS + LN_TILE + 63) / 64 | 1) * 64; }

ln_work *ln_work_new(int32_t width, int32_t height) {
	const int32_t length = width > height ? width : height, rows = height < LN_ROWS ? LN_ROWS : height;
	ln_work *w = calloc(1, sizeof *w);
	if (!w)
		return 0;
	w->pitch = pitch_of(length);
	w->plane = (ln_plane){.pitch = pitch_of(width), .width = width, .height = height};
	const size_t strip = (size_t)w->pitch * LN_ROWS + LN_PAD, picture = (size_t)w->plane.pitch * (size_t)(rows + 2 * LN_MARGIN);
	w->turned = calloc(2, strip);
	w->pixels = calloc(1, picture);
	w->outside = malloc((size_t)length);
	w->sums = malloc(2 * sizeof *w->sums);
	w->positions = length + 1;
	w->totals = malloc(2 * sizeof *w->totals * (size_t)w->positions);
	if (!w->turned || !w->pixels || !w->outside || !w->sums || !w->totals) {
		ln_work_free(w);
		return 0;
	}
	w->plane.at = w->pixels + LN_MARGIN * w->plane.pitch + LN_PAD;
	w->ones = w->turned + strip;
	w->counts = w->sums + 1;
	w->bytes = (int64_t)(2 * strip + picture + (size_t)length + 2 * sizeof *w->sums + 2 * sizeof *w->totals * (size_t)w->positions + sizeof *w);
	return w;
}

void ln_work_free(ln_work *w) {
	if (!w)
		return;
	free(w->turned);
	free(w->pixels);
	free(w->outside);
	free(w->sums);
	free(w->totals);
	free(w->hits);
	free(w);
}

int64_t ln_work_bytes(const ln_work *w) { return w->bytes + (int64_t)w->room * (int64_t)sizeof *w->hits; }

const ln_hit *ln_hits(const ln_work *w, int32_t *count) {
	*count = w->kept;
	return w->hits;
}

void ln_clear(ln_work *w) { w->kept = 0; }

// reaches reports whether a sum a[x] + b[x] is above most or below least.
LN_KERNEL int reaches(const int16_t *restrict a, const int16_t *restrict b, int n, int most, int least) {
	int16_t high = -32768, low = 32767;
	for (int x = 0; x < n; x++) {
		int16_t v = (int16_t)(a[x] + b[x]);
		high = v > high ? v : high;
		low = v < low ? v : low;
	}
	return high > most || low < least;
}

// reaches_by reports whether the square of a sum is above its number of pixels times k.
LN_KERNEL int reaches_by(const int16_t *restrict a, const int16_t *restrict b, const int16_t *restrict na, const int16_t *restrict nb, int n, float k) {
	int32_t any = 0;
	for (int x = 0; x < n; x++) {
		float v = (float)(a[x] + b[x]), c = (float)(na[x] + nb[x]);
		any |= v * v > k * (c > LN_LEAST ? c : LN_LEAST);
	}
	return any;
}

static int keep(ln_work *w, int32_t *cell, ln_hit h) {
	if (*cell >= 0) {
		if (h.sigmas > w->hits[*cell].sigmas)
			w->hits[*cell] = h;
		return 0;
	}
	if (w->kept == w->room) {
		int32_t room = w->room ? 2 * w->room : 1024;
		ln_hit *more = realloc(w->hits, (size_t)room * sizeof *more);
		if (!more)
			return 1;
		w->hits = more;
		w->room = room;
	}
	*cell = w->kept;
	w->hits[w->kept++] = h;
	return 0;
}

// scan keeps the lines of slope t that reach, from x0 to x1.
static int scan(const ln_tile *k, int t, int x0, int x1, const int16_t *a, const int16_t *b, const int16_t *na, const int16_t *nb, double variance) {
	for (int x = x0; x < x1; x++) {
		int v = a[x] + b[x], n = k->holed ? na[x] + nb[x] : LN_ROWS;
		if (n < LN_LEAST || (k->polarity > 0 && v < 0) || (k->polarity < 0 && v > 0))
			continue;
		if ((double)v * v <= k->seed * k->seed * variance * n)
			continue;
		ln_hit h = {.x = k->x + x, .first = k->first, .t = (int16_t)t, .value = (int16_t)v, .pixels = (int16_t)n,
		            .axis = (uint8_t)k->axis, .flipped = (uint8_t)k->flipped};
		h.sigmas = (float)(abs(v) / __builtin_sqrt(variance * n));
		if (keep(k->w, k->w->best + x / LN_CELL * (LN_ROWS / LN_CELL) + t / LN_CELL, h))
			return 1;
	}
	return 0;
}

enum { PART = 64 };

static int search(const ln_tile *k) {
	const ln_tree *s = k->w->sums, *c = k->w->counts;
	for (int t = 0; t < LN_ROWS; t++) {
		const int u = t / 2, shift = (t + 1) / 2;
		const int16_t *a = s->half[0][u], *b = s->half[1][u] + shift, *na = c->half[0][u], *nb = c->half[1][u] + shift;
		const double variance = LN_WHITE * ln_spread_at(k, t), least = k->seed * __builtin_sqrt(variance * LN_ROWS);
		const int reach = least < LN_MOST_SUM ? (int)least : LN_MOST_SUM;
		const int most = k->polarity < 0 ? LN_MOST_SUM : reach, low = k->polarity > 0 ? -LN_MOST_SUM : -reach;
		const float square = (float)(k->seed * k->seed * variance * 0.9999);
		if (!(k->holed ? reaches_by(a, b, na, nb, k->width, square) : reaches(a, b, k->width, most, low)))
			continue;
		for (int x = 0; x < k->width; x += PART) { // few do, of a few stretches
			const int x1 = x + PART < k->width ? x + PART : k->width;
			if (!k->holed && !reaches(a + x, b + x, x1 - x, most, low))
				continue;
			if (scan(k, t, x, x1, a, b, na, nb, variance))
				return 1;
		}
	}
	return 0;
}

// strip is the rows of a strip, with the padding before and behind.
typedef struct {
	const int8_t *at;
	int64_t pitch;
} strip;

static void halves(ln_tree *s, strip rows, const ln_tile *k) {
	const int8_t *at = rows.at + k->x;
	if (k->flipped)
		ln_halves(s, at + (LN_ROWS - 1) * rows.pitch, -rows.pitch, k->width);
	else
		ln_halves(s, at, rows.pitch, k->width);
}

int32_t ln_tiles(int32_t length) { return (length + LN_ROWS - 1 + LN_TILE - 1) / LN_TILE; }

// HOLES is the share of a tile's pixels from which those that do not count matter.
#define HOLES 0.02

// holes sets holed, and reports whether no pixel of the tile counts.
static int holes(ln_tile *k) {
	const int x1 = k->x + k->width + LN_ROWS, from = k->x > 0 ? k->x : 0, to = x1 < k->length ? x1 : k->length;
	int64_t out = 0;
	for (int x = from; x < to; x++)
		out += k->w->outside[x];
	k->holed = (double)out > HOLES * LN_ROWS * (to - from);
	return out == (int64_t)LN_ROWS * (to - from);
}

static strip rows_of(ln_work *w, int axis, int first) {
	if (!axis)
		return (strip){w->plane.at + first * w->plane.pitch, w->plane.pitch};
	ln_turn(w->turned + LN_PAD, w->pitch, &w->plane, first);
	return (strip){w->turned + LN_PAD, w->pitch};
}

// tile searches both directions of a tile.
static int tile(ln_tile *k, strip rows, strip ones, float *spread, int tiles) {
	for (k->flipped = 0; k->flipped < 2; k->flipped++) {
		k->spread = spread + k->flipped * tiles * LN_LEVELS * LN_BINS;
		halves(k->w->sums, rows, k);
		if (k->holed)
			halves(k->w->counts, ones, k);
		ln_spread(k);
		memset(k->w->best, -1, sizeof k->w->best);
		if (search(k))
			return 1;
	}
	return 0;
}

int ln_strip(ln_work *w, int32_t axis, int32_t first, double seed, int32_t polarity, float *spread) {
	const int length = axis ? w->plane.height : w->plane.width, tiles = ln_tiles(length);
	const int all = length + LN_ROWS - 1, wide = (all + tiles - 1) / tiles;
	const strip rows = rows_of(w, axis, first), ones = {w->ones + LN_PAD, w->pitch};
	int counted = 0;
	ln_outside(w->outside, rows.at, rows.pitch, length);
	for (int i = 0; i < 2 * tiles * LN_LEVELS * LN_BINS; i++)
		spread[i] = 1;
	for (int i = 0; i < tiles; i++) {
		ln_tile k = {.w = w, .axis = axis, .first = first, .length = length, .x = 1 - LN_ROWS + i * wide, .seed = seed, .polarity = polarity};
		k.width = all - i * wide < wide ? all - i * wide : wide;
		if (holes(&k))
			continue;
		if (k.holed && !counted++)
			ln_count(w->ones + LN_PAD, rows.at, rows.pitch, w->pitch, length);
		if (tile(&k, rows, ones, spread + i * LN_LEVELS * LN_BINS, tiles))
			return 1;
	}
	return 0;
}

void ln_sums(ln_work *w, int32_t axis, int32_t first, int32_t flipped, int32_t x, int32_t width, int16_t *out) {
	ln_tile k = {.w = w, .flipped = flipped, .x = x, .width = width};
	halves(w->sums, rows_of(w, axis, first), &k);
	for (int t = 0; t < LN_ROWS; t++)
		for (int i = 0; i < width; i++)
			out[(int64_t)t * width + i] = (int16_t)(w->sums->half[0][t / 2][i] + w->sums->half[1][t / 2][(t + 1) / 2 + i]);
}
