// Types shared by the C kernels of one streaming pass over a frame, and by the Go code
// that calls them. Lengths are in pixels; x runs right, y down, from 0.
#ifndef LAPGATE_PASS_H
#define LAPGATE_PASS_H

#include <stdint.h>

// Products and sums are rounded one by one: gcc does so with -std=c11, clang is told.
#ifdef __clang__
#pragma STDC FP_CONTRACT OFF
#endif

// Every function marked PG_KERNEL is compiled for several x86-64 levels and chosen when
// the program starts. All clones give equal bits: integers, or floats without
// contraction and without reordering.
#if defined(__x86_64__) && defined(__GNUC__) && !defined(__clang__) && !defined(PG_NO_CLONES)
#define PG_CLONES __attribute__((target_clones("arch=x86-64-v4", "arch=x86-64-v3", "arch=x86-64-v2", "default")))
#else
#define PG_CLONES
#endif
#define PG_INLINE static inline __attribute__((always_inline))
#define PG_KERNEL PG_CLONES static __attribute__((noinline))
#define PG_WHOLE PG_CLONES static __attribute__((noinline, flatten)) // with all that it calls

// How counts lie in memory.
enum { PG_BYTES, PG_WORDS, PG_10P, PG_12P, PG_12PACKED };

// What a function of the pass returns beside 0.
enum { PG_OK, PG_NO_MEMORY, PG_BAD_COUNT };

typedef struct {
	int32_t y, x0, x1; // half-open
} pg_span;

// A frame, its correction, its region and how to look at it. Read-only.
typedef struct {
	const uint8_t *data;
	int64_t stride; // bytes
	int32_t width, height, layout, max_count;
	// (counts·factor − offset)·gain/2^15, in units of scale per DN; NULL = none
	const int16_t *offset, *gain;
	int32_t factor, use_float;
	double scale;
	// (counts − dark − stray) / response, in DN; NULL = none
	const float *dark, *stray, *response;
	const int32_t *bad_start, *bad_x;  // bad pixels by row: bad_start[height + 1]; NULL = none
	const uint8_t *bad_near;           // which of a bad pixel's neighbours are good: bits 0 to 7, row by row
	const int32_t *span_start;         // region spans by row: span_start[height + 1]
	const pg_span *spans;              // sorted, not touching within a row
	int32_t cell, polarity, use_grain; // polarity 1 bright, −1 dark, 0 both
	double clip, shrink, floor_dn, min_share, low, high; // shrink: sigma of a normal variable cut at ±clip
} pg_frame;

// Level and noise in cells, as in raster.Grid; arrays of columns·rows.
typedef struct {
	int32_t columns, rows;
	double *level, *noise;   // DN, after medians and filling
	double *mean, *sigma;    // DN, clipped moments of the cell
	double *block;           // DN, clipped sigma of the filtered picture; < 0 = too few samples
	int64_t *inside, *valid; // pixels of the region, and of these the good ones
	uint8_t *filled;         // not measured
	double slack;            // how many sigmas the level of a first look may be off
} pg_grid;

// Runs of pixels. Frames are at most 65 535 px wide and high.
typedef struct {
	uint16_t x0, x1;
	uint32_t y : 31, high : 1; // high: holds a pixel above the high threshold
} pg_run;

typedef struct {
	pg_run *at;
	int64_t count, room;
} pg_runs;

// PG_SAMPLES is how many groups of four rows of a cell are sampled at most.
enum { PG_SAMPLES = 8 };

// Memory of one band of rows; see pg_band_new.
typedef struct {
	int32_t width, cell, columns, is_float;
	int64_t bytes;
	uint16_t *counts; // an unpacked row
	char *value, *signal, *horizontal, *filtered, *grain, *top, *slope, *samples, *cells, *low, *high, *highest, *whole;
	uint8_t *torn; // cells in which a sample is missing
	float *sums;
	double *stats;
	pg_span *inner, *spare;
	int32_t *hits;
	pg_runs runs, saturated; // of these rows
} pg_band;

pg_band *pg_band_new(int32_t width, int32_t cell, int32_t is_float);
void pg_band_free(pg_band *b);
int64_t pg_band_bytes(const pg_band *b);
// pg_band_room is the memory of the rows, or NULL where that is less than bytes.
char *pg_band_room(pg_band *b, int64_t bytes);

// pg_sample measures the cells of grid rows row0 to row1 on some of their rows; blocks
// receives the means of blocks, pg_sample_blocks(f) bytes a grid row.
int pg_sample(const pg_frame *f, pg_grid *g, pg_band *b, void *blocks, int32_t row0, int32_t row1);
int32_t pg_sample_blocks(const pg_frame *f);

// pg_smooth makes level and noise out of mean and sigma: medians, and cells without a
// measurement filled. pg_sample_grain then measures the sampled blocks, and pg_grain
// multiplies the noise by the grain factor, but for a share of it, and applies the floor.
int pg_smooth(const pg_frame *f, pg_grid *g);
// pg_calm smoothes the levels of a first look over 3 × 3 cells where the whole frame is
// smooth, and sets slack.
void pg_calm(const pg_frame *f, pg_grid *g);
int pg_sample_grain(const pg_frame *f, pg_grid *g, const void *blocks);
int pg_grain(const pg_frame *f, pg_grid *g, double share);

// pg_fits reports whether 16-bit integers hold a frame with this grid.
int pg_fits(const pg_frame *f, const pg_grid *g);

// pg_pass finds candidate runs in the rows of grid rows row0 to row1 with the thresholds
// of g, and measures the cells anew on all of their pixels into out, unless that is NULL.
int pg_pass(const pg_frame *f, const pg_grid *g, pg_grid *out, pg_band *b, int32_t row0, int32_t row1);

#endif
