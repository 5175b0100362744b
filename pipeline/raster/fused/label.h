// Labelling of runs.
#ifndef LAPGATE_LABEL_H
#define LAPGATE_LABEL_H

#include "objects.h"

// pg_label gives each of n runs the number of its 8-connected set, as raster.LabelRuns,
// and returns how many sets there are.
int64_t pg_label(const pg_run *runs, int64_t n, int32_t *label);

#endif
