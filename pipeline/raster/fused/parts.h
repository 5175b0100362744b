// What the passes in integers and in floats share.
#ifndef LAPGATE_PARTS_H
#define LAPGATE_PARTS_H

#include "pass.h"

// PG_GAIN is the noise gain of the 5 × 5 binomial filter, 70/256.
#define PG_GAIN (70. / 256)

// PG_REACH is how far from the middle integer moments count: 256 · PG_REACH² < 2³¹.
#define PG_REACH 2896

int pg_grow(pg_runs *r);

// pg_run_add adds x0 … x1 in row y, joined to the last run where they touch. Returns
// not 0 when there is no memory.
PG_INLINE int pg_run_add(pg_runs *r, int y, int x0, int x1, int high) {
	pg_run *last = r->count > 0 ? r->at + r->count - 1 : 0;
	if (last && (int)last->y == y && last->x1 == x0) {
		last->x1 = (uint16_t)x1;
		last->high |= high != 0;
		return 0;
	}
	if (r->count == r->room && pg_grow(r))
		return 1;
	r->at[r->count++] = (pg_run){.y = (uint32_t)y, .x0 = (uint16_t)x0, .x1 = (uint16_t)x1, .high = high != 0};
	return 0;
}

// pg_pitch is the length of a row buffer: 64 elements before x = 0 and as many behind.
PG_INLINE int pg_pitch(int width) { return (width + 63) / 64 * 64 + 192; }

// pg_node is Grid.node: the node left of p, and how far p lies beyond it in cells.
PG_INLINE int pg_node(int p, int cell, int nodes, double *fraction) {
	*fraction = 0;
	if (nodes == 1)
		return 0;
	double c = ((double)p + 0.5) / (double)cell - 0.5;
	int i = c < 0 ? 0 : (int)c;
	i = i > nodes - 2 ? nodes - 2 : i;
	*fraction = c - i;
	return i;
}

// How far the candidates' thresholds lie below the true ones: the noise measured on a
// part of the rows may be PG_NOISE_SLACK too high, the level the grid's slack in sigmas.
#define PG_NOISE_SLACK 0.04

// pg_cautious is k sigmas of the filtered signal less the slack, DN.
PG_INLINE double pg_cautious(const pg_frame *f, double k, double noise, double slack) {
	return k * (1 - PG_NOISE_SLACK) * PG_GAIN * noise - slack * noise - (f->use_float ? 0 : 1 / f->scale);
}

// pg_cell_exact measures a cell as the reference does; not 0 when there is no memory.
int pg_cell_exact(const pg_frame *f, pg_grid *o, int64_t at);
int pg_cell_done(const pg_frame *f, pg_grid *o, int64_t at, const double *stats, double mid, const pg_grid *before);
void pg_limits(const pg_frame *f, const pg_grid *g, double *least, double *most);
int pg_sample_rows(const pg_frame *f, int row, int *y); // starts of the sampled groups
void pg_count_cells(const pg_frame *f, pg_grid *g, int row0, int row1);
double pg_level(const pg_grid *g, int cell, double x, double y);
double pg_middle(double *v, int n); // sorts v; the upper of the middle two

#endif
