// The contrast of every pixel of a region.
#ifndef LAPGATE_CONTRAST_H
#define LAPGATE_CONTRAST_H

#include "pass.h"

// pg_contrast writes rows y0 to y1 of out (width pixels each, 0 before): corrected counts
// above the level, over the noise, of the good pixels of the region. level and noise are those of a grid of
// columns × rows cells, as in raster.Grid. Returns PG_NO_MEMORY when there is none.
int pg_contrast(const pg_frame *f, const double *level, const double *noise, int32_t columns, int32_t rows, int32_t y0, int32_t y1, float *out);

#endif
