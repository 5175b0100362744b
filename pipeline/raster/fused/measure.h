// The surroundings of one blob.
#ifndef LAPGATE_MEASURE_H
#define LAPGATE_MEASURE_H

#include "objects.h"

// A strip of pixels for each row around a blob, wide enough for its pixels grown by 2 px
// and what smoothing and contours need beyond. Outside its strips all is 0.
typedef struct {
	int y0, rows;
	int32_t *x0, *x1;   // strip of each row
	int64_t *at;        // where pixel x = 0 of the row would be
	float *signal;      // DN above the level, positive in the blob; 0 where not usable
	float *smooth;      // under a 3 × 3 binomial filter, 0 outside foot
	float *depth;       // 0 outside m0 to m1
	uint8_t *usable;    // in the region and not another blob's
	uint8_t *foot;      // the blob grown by 2 px, where usable
	int32_t *f0, *f1;   // from the first to behind the last foot pixel of each row
	int32_t *m0, *m1;   // the same of what reaches the height looked at last
	const pg_frame *f;
	const pg_grid *g;
	const pg_run *runs; // the blob's
	int64_t count;
	double sign;
	int clear; // the frame's edge cuts nothing off
} window;

typedef struct {
	double area, x, y, length, width, angle;
} shape;

#define EACH_ROW(w, k) for (int k = 0; k < (w)->rows; k++)
#define EACH_FOOT(w, k, x)                                 \
	for (int k = 0; k < (w)->rows; k++)                    \
		for (int x = (w)->f0[k]; x < (w)->f1[k]; x++)      \
			if ((w)->foot[(w)->at[k] + x])

void course_follow(const window *w, const shape *s, pg_measure *out);
double course_median(double *v, int n);

#endif
