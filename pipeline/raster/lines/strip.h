// Strips of LN_ROWS rows or columns.
#ifndef LAPGATE_STRIP_H
#define LAPGATE_STRIP_H

#include "work.h"

// ln_turn writes up to LN_ROWS columns of a picture, from first on, as rows; 0 for those
// beyond it.
void ln_turn(int8_t *dst, int64_t pitch, const ln_plane *p, int first);

// ln_outside counts by column the pixels of a strip that do not count.
void ln_outside(uint8_t *dst, const int8_t *rows, int64_t pitch, int length);

// ln_count writes 1 where a pixel counts, else 0.
void ln_count(int8_t *ones, const int8_t *rows, int64_t pitch, int64_t to, int length);

#endif
