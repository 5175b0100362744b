// Cutting the surroundings of a blob out of a frame.
#ifndef LAPGATE_WINDOW_H
#define LAPGATE_WINDOW_H

#include "measure.h"

// window_cut fills w; window_free is to be called whatever it returns.
int window_cut(window *w, const pg_frame *f, const pg_grid *g, const pg_blobs *b, int64_t blob);
void window_free(window *w);

#endif
