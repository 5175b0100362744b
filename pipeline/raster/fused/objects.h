// From candidate runs to blobs and their measures.
#ifndef LAPGATE_OBJECTS_H
#define LAPGATE_OBJECTS_H

#include "pass.h"

// A blob: runs at first … first + runs, and the highest value of the snr plane.
typedef struct {
	int64_t first, runs;
	int32_t area, x0, y0, x1, y1, peak_x, peak_y;
	float peak;
} pg_blob;

// The signal where it was evaluated: spans by row, and the floats of each in turn.
typedef struct {
	pg_span *spans;
	int64_t count, room;
	int32_t *start; // 2·height: first span of each row, and behind its last
	int32_t *first; // of each span, into values
	float *values;
	int64_t used, values_room, most;
} pg_patch;

typedef struct {
	int64_t count, room;
	pg_blob *blobs;
	pg_patch patch;
	pg_runs candidates; // of all bands in order
	pg_runs runs;       // of the blobs, blob by blob
	int64_t *row_start; // height + 1: where a row's runs begin in by_row
	int32_t *by_row;    // runs sorted by row and column
	int32_t *owner;     // blob of each run
	int64_t peak;       // bytes that were taken at a time
} pg_blobs;

enum { PG_PATH = 72 };

// What raster.Blemish holds of a blob.
typedef struct {
	double x, y, half_area, length, width, diameter, angle, height, flux, peak, snr;
	int32_t dark, is_long, coiled, points;
	double path[2 * PG_PATH];
} pg_measure;

pg_blobs *pg_blobs_new(void);
void pg_blobs_free(pg_blobs *b);
int64_t pg_blobs_bytes(const pg_blobs *b); // taken now

// pg_collect takes the candidates of a band; bands come from the top.
int pg_collect(pg_blobs *b, pg_band *band);
// pg_spans writes runs as spans.
void pg_spans(const pg_run *runs, int64_t n, pg_span *out);
// pg_again passes once more, with the grid truth, over the cells around which the
// thresholds that g gave did not find all that truth calls for, and puts what it finds in
// the place of their candidates. rows receives in how many grid rows there were any.
int pg_again(const pg_frame *f, const pg_grid *g, const pg_grid *truth, pg_band *band, pg_blobs *b, int32_t *rows);
// pg_find evaluates the snr plane exactly around the candidates that may matter, labels
// what is above the thresholds and keeps blobs of at least area pixels. With snr (width ×
// height, zeroed) it evaluates the whole region and writes it there. The band's memory is
// used for rows; its runs must have been collected.
int pg_find(const pg_frame *f, const pg_grid *g, pg_band *band, pg_blobs *b, int32_t area, float *snr);
// pg_keep drops the blobs whose entry is 0.
void pg_keep(pg_blobs *b, const uint8_t *keep);
// pg_index sorts the kept runs by row; pg_measure_blob needs it.
int pg_index(const pg_frame *f, pg_blobs *b);
int pg_measure_blob(const pg_frame *f, const pg_grid *g, const pg_blobs *b, int64_t i, pg_measure *out);

#endif
