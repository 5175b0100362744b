// Kernels of the line search: sums of pixels along lines, in integers.
#ifndef LAPGATE_LINES_H
#define LAPGATE_LINES_H

#include <stdint.h>

// Products and sums are rounded one by one: gcc does so with -std=c11, clang is told.
#ifdef __clang__
#pragma STDC FP_CONTRACT OFF
// ln_middle returns the mean of the middle half of n numbers, all but the lowest n / 4 and
// the highest as many; 0 for none.
double ln_middle(const float *v, int32_t n);

// ln_median returns the upper of the middle two of n numbers, n above 0.
float ln_median(const float *v, int32_t n);

#endif

// Every function marked LN_KERNEL is compiled for several x86-64 levels and chosen when
// the program starts. All clones give equal bits: integers, or floats without contraction
// and without reordering.
#if defined(__x86_64__) && defined(__GNUC__) && !defined(__clang__) && !defined(LN_NO_CLONES)
#define LN_CLONES __attribute__((target_clones("arch=x86-64-v4", "arch=x86-64-v3", "arch=x86-64-v2", "default")))
#else
#define LN_CLONES
// ln_middle returns the mean of the middle half of n numbers, all but the lowest n / 4 and
// the highest as many; 0 for none.
double ln_middle(const float *v, int32_t n);

// ln_median returns the upper of the middle two of n numbers, n above 0.
float ln_median(const float *v, int32_t n);

#endif
#define LN_INLINE static inline __attribute__((always_inline))
#define LN_KERNEL LN_CLONES static __attribute__((noinline))

enum {
	LN_ROWS = 128,  // rows of a strip, and slopes of each quadrant
	LN_UNIT = 6,    // steps per sigma of a pixel
	LN_MOST = 31,   // highest value of a pixel: four of them fit in 8 bits
	LN_LEAST = 32,  // pixels that a sum must have
	LN_BIN = 4,     // slopes that share a spread
	LN_BINS = LN_ROWS / LN_BIN,
	LN_LEVELS = 3,  // lengths of line whose spread is measured: LN_ROWS, half of it, and 16
	LN_TILE = 704   // widest tile: the tree then stays in a second-level cache
};

typedef struct ln_work ln_work;

// ln_work_new returns the memory of searches in pictures of width × height pixels; NULL =
// no memory. One search at a time.
ln_work *ln_work_new(int32_t width, int32_t height);
void ln_work_free(ln_work *w);
int64_t ln_work_bytes(const ln_work *w);

// ln_quantise writes row y of the picture in steps of 1/LN_UNIT sigma, only odd ones; 0
// is a pixel that does not count, as one that is no number. With half, b is the row below
// a and each pixel is made of 2 × 2, √4 times their mean.
void ln_quantise(ln_work *w, int32_t y, const float *a, const float *b, int32_t half);

// ln_erase makes the pixels x0 to x1 of row y, as far as there are any, not count.
void ln_erase(ln_work *w, int32_t y, int32_t x0, int32_t x1);

// A line through a strip: it enters the first row at x and leaves the last one at x + t.
// Strips of columns (axis 1) have x along y; flipped ones are entered from the other end.
typedef struct {
	int32_t x, first; // first row of the strip
	int16_t t, value, pixels;
	uint8_t axis, flipped;
	float sigmas; // value over its spread
} ln_hit;

// ln_tiles is how many tiles a strip of this length is cut into.
int32_t ln_tiles(int32_t length);

// ln_strip sums along all lines through the strip that starts at row (axis 0) or column
// (axis 1) first and ends in the picture, or is the only one, and keeps those above seed sigmas: polarity 1 of bright, −1 of dark
// lines, 0 of both, the strongest of every 8 × 8 neighbours. spread receives the variance
// of the sums over that of white noise, [flipped][tile][LN_LEVELS][slope / LN_BIN]. Returns not 0
// when there is no memory.
int ln_strip(ln_work *w, int32_t axis, int32_t first, double seed, int32_t polarity, float *spread);

// ln_hits returns what was kept since the last ln_clear.
const ln_hit *ln_hits(const ln_work *w, int32_t *count);
void ln_clear(ln_work *w);

// ln_sums writes all sums of one strip and one tile that starts at column x: the tree of
// the search, for tests. out is [LN_ROWS slopes][width].
void ln_sums(ln_work *w, int32_t axis, int32_t first, int32_t flipped, int32_t x, int32_t width, int16_t *out);

// A stretch of a line for sums across it: from cross ca at position a to cb at b along
// its axis (0: along y, cross in x; 1: along x, cross in y). A position counts with four
// pixels, from the one before floor(cross) on, with weights of 16 fractions of a pixel: of
// each fraction the weights of the pixels, and the sum of their squares.
enum { LN_TAPS = 4, LN_SQUARES = LN_TAPS, LN_ENTRY, LN_FRACTIONS = 16, LN_WEIGHT = 64 };

typedef struct {
	int32_t axis, a, b;
	double ca, cb;
} ln_stretch;

typedef struct {
	double sum, weight; // Σ weight·pixel in sigmas, and Σ weight² over pixels that count
} ln_total;

// ln_sum sums along a stretch; 0 where it leaves the picture by more than a pixel.
ln_total ln_sum(const ln_work *w, ln_stretch s, const int16_t *weights);

// ln_profile writes what ln_sum adds at each position, b − a + 1 of them.
int ln_profile(const ln_work *w, ln_stretch s, const int16_t *weights, ln_total *out);

// ln_settle moves both ends across by up to reach steps, first the same way and then
// against each other, and returns the stretch with the highest sign·sum/√weight.
ln_stretch ln_settle(const ln_work *w, ln_stretch s, const int16_t *weights, int32_t reach, double step, int32_t sign, ln_total *best);

// ln_part finds the part of a stretch, LN_PART positions at least, with the highest
// sign·sum over its spread: first among bounds some positions apart, then all about those.
// scatter is the variance of sums over LN_ROWS, half of it and 16 positions over that of
// white noise. Returns the number of positions; below LN_PART there is no part.
enum { LN_PART = 16 };
int ln_part(ln_work *w, ln_stretch s, const int16_t *weights, int32_t sign, const double *scatter, int32_t *first, int32_t *last);

// ln_over is the variance of sums along lines of some number of positions over that of
// white noise. What the sums through a strip scatter beyond it is taken to go on along the
// line, as those along lay do, so that it grows with the length. A line that crosses lay at
// an angle is in step with it over a shorter stretch, which half of a strip or 16 rows show.
double ln_over(const double *scatter, double positions);

// ln_erase_along makes the pixels within reach across a stretch not count.
void ln_erase_along(ln_work *w, ln_stretch s, int32_t reach);

// ln_middle returns the mean of the middle half of n numbers, all but the lowest n / 4 and
// the highest as many; 0 for none.
double ln_middle(const float *v, int32_t n);

// ln_median returns the upper of the middle two of n numbers, n above 0.
float ln_median(const float *v, int32_t n);

#endif
