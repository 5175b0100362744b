// What it costs merely to read a frame and its correction.
#ifndef LAPGATE_BOUND_H
#define LAPGATE_BOUND_H

#include "pass.h"

// pg_read sums all bytes that the integer passes read of frame and correction, in their
// order but with no other work, and returns the sum.
uint64_t pg_read(const pg_frame *f);

#endif
