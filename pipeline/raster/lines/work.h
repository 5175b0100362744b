// Memory of a search, and a tile of a strip on its way.
#ifndef LAPGATE_WORK_H
#define LAPGATE_WORK_H

#include "tree.h"

enum {
	LN_PAD = LN_ROWS, // columns of 0 before a picture or strip
	LN_MARGIN = 8,    // rows of 0 above and below it
	LN_CELL = 8,
	LN_SIDE = LN_TILE / LN_CELL,
	LN_MOST_SUM = LN_ROWS * LN_MOST
};

// A picture of odd steps.
typedef struct {
	int8_t *at; // pixel (0, 0); around the picture there are 0
	int64_t pitch;
	int32_t width, height;
} ln_plane;

struct ln_work {
	int64_t pitch, bytes; // of strips
	int8_t *pixels;
	ln_plane plane;
	int8_t *turned, *ones; // strips of LN_ROWS rows: of columns, and of what counts
	uint8_t *outside;      // pixels of each column of the strip that do not count
	ln_tree *sums, *counts;
	int32_t *totals, positions; // running totals of a stretch, twice as many
	ln_hit *hits;
	int32_t kept, room;
	int32_t best[LN_SIDE * (LN_ROWS / LN_CELL)]; // of a tile's cells, the number of the hit; −1 = none
};

typedef struct {
	ln_work *w;
	int axis, first, length, flipped, x, width, polarity;
	int holed; // some of its pixels do not count: the sums are judged by their number of pixels
	double seed;
	float *spread; // [LN_LEVELS][LN_BINS]
} ln_tile;

// The white variance of a sum over one pixel, in steps²: of the noise and of its rounding.
#define LN_WHITE (LN_UNIT * LN_UNIT + 1. / 3)

// ln_spread measures the variance of the sums by slope over that of white noise: of those
// over the strip, over half of it and over 16 rows.
void ln_spread(const ln_tile *k);

// Where a variance lies this near that of white noise it may be it: a tile knows it to some
// 4 % for a slope.
#define LN_NEAR_WHITE 0.1

// ln_spread_at is the larger of the variances measured about slope t.
static inline double ln_spread_at(const ln_tile *k, int t) {
	const float *b = k->spread + t / LN_BIN;
	double v = t % LN_BIN && t / LN_BIN + 1 < LN_BINS && b[1] > b[0] ? b[1] : b[0];
	return v > 1 - LN_NEAR_WHITE && v < 1 + LN_NEAR_WHITE ? 1 : v;
}

// ln_run writes running totals of a stretch: what its first i positions add is at i, for i up
// to the number returned. In steps times LN_WEIGHT, and squares of LN_WEIGHT.
int ln_run(const ln_work *w, ln_stretch s, const int16_t *weights, int32_t *sums, int32_t *squares);

#endif
