// The tree of line sums over one tile of a strip.
#ifndef LAPGATE_TREE_H
#define LAPGATE_TREE_H

#include "lines.h"

enum {
	LN_PITCH = LN_TILE + 2 * 64, // of the sums over 64 rows
	LN_WIDE = LN_PITCH + 64      // of the sums over fewer
};

// Memory of a tree.
typedef struct {
	int8_t four[4][4][LN_WIDE];        // sums over 4 rows: [rows][slope][x]
	int16_t sixteen[4][16][LN_WIDE];   // over 16
	int16_t half[2][LN_ROWS / 2][LN_PITCH]; // over 64: the strip's upper and lower half
} ln_tree;

// ln_halves makes the sums over both halves of a strip: half[h][t][x] is the sum over the
// line that enters the half's first row at x and leaves its last one at x + t, for x up to
// width + 64. A row r of the strip is at rows + r·pitch, pitch being negative for one that
// is flipped; columns −0 … width + 128 are read.
void ln_halves(ln_tree *s, const int8_t *rows, int64_t pitch, int width);

#endif
