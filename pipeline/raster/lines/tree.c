// Approximate discrete Radon transform of a strip: sums along lines of all slopes by
// doubling (Götz and Druckmüller 1996; Brady 1998). Sums of 2n rows are made of two of n:
//
//	R(x, 2t)   = upper(x, t) + lower(x + t, t)
//	R(x, 2t+1) = upper(x, t) + lower(x + t + 1, t)
//
// Two doublings are made at a time, so that half of the sums never leave the registers.
#include "tree.h"

// four_rows: sums over four rows, in bytes: 4 · LN_MOST = 124.
LN_KERNEL void four_rows(const int8_t *restrict a, const int8_t *restrict b, const int8_t *restrict c, const int8_t *restrict d,
                         int8_t *restrict o0, int8_t *restrict o1, int8_t *restrict o2, int8_t *restrict o3, int n) {
	for (int x = 0; x < n; x++) {
		int8_t ab0 = (int8_t)(a[x] + b[x]), ab1 = (int8_t)(a[x] + b[x + 1]);
		o0[x] = (int8_t)(ab0 + (int8_t)(c[x] + d[x]));
		o1[x] = (int8_t)(ab0 + (int8_t)(c[x + 1] + d[x + 1]));
		o2[x] = (int8_t)(ab1 + (int8_t)(c[x + 1] + d[x + 2]));
		o3[x] = (int8_t)(ab1 + (int8_t)(c[x + 2] + d[x + 3]));
	}
}

// sixteen_rows: of four sums over four rows with slope t, those over sixteen with slopes
// 4t to 4t + 3.
LN_KERNEL void sixteen_rows(const int8_t *restrict a, const int8_t *restrict b, const int8_t *restrict c, const int8_t *restrict d,
                            int16_t *restrict o, int t, int n) {
	int16_t *restrict o0 = o, *restrict o1 = o + LN_WIDE, *restrict o2 = o + 2 * LN_WIDE, *restrict o3 = o + 3 * LN_WIDE;
	const int8_t *b1 = b + t + 1, *c0 = c + 2 * t, *d0 = d + 3 * t;
	b += t;
	for (int x = 0; x < n; x++) {
		int16_t ab0 = (int16_t)(a[x] + b[x]), ab1 = (int16_t)(a[x] + b1[x]);
		o0[x] = (int16_t)(ab0 + (int16_t)(c0[x] + d0[x]));
		o1[x] = (int16_t)(ab0 + (int16_t)(c0[x + 1] + d0[x + 1]));
		o2[x] = (int16_t)(ab1 + (int16_t)(c0[x + 1] + d0[x + 2]));
		o3[x] = (int16_t)(ab1 + (int16_t)(c0[x + 2] + d0[x + 3]));
	}
}

LN_KERNEL void half_strip(const int16_t *restrict a, const int16_t *restrict b, const int16_t *restrict c, const int16_t *restrict d,
                          int16_t *restrict o, int t, int n) {
	int16_t *restrict o0 = o, *restrict o1 = o + LN_PITCH, *restrict o2 = o + 2 * LN_PITCH, *restrict o3 = o + 3 * LN_PITCH;
	const int16_t *b1 = b + t + 1, *c0 = c + 2 * t, *d0 = d + 3 * t;
	b += t;
	for (int x = 0; x < n; x++) {
		int16_t ab0 = (int16_t)(a[x] + b[x]), ab1 = (int16_t)(a[x] + b1[x]);
		o0[x] = (int16_t)(ab0 + (int16_t)(c0[x] + d0[x]));
		o1[x] = (int16_t)(ab0 + (int16_t)(c0[x + 1] + d0[x + 1]));
		o2[x] = (int16_t)(ab1 + (int16_t)(c0[x + 1] + d0[x + 2]));
		o3[x] = (int16_t)(ab1 + (int16_t)(c0[x + 2] + d0[x + 3]));
	}
}

void ln_halves(ln_tree *s, const int8_t *rows, int64_t pitch, int width) {
	const int n64 = width + 64, n16 = n64 + 48, n4 = n16 + 12;
	for (int h = 0; h < 2; h++) {
		for (int k = 0; k < 4; k++) {
			for (int j = 0; j < 4; j++) {
				const int8_t *r = rows + (64 * h + 16 * k + 4 * j) * pitch;
				int8_t(*o)[LN_WIDE] = s->four[j];
				four_rows(r, r + pitch, r + 2 * pitch, r + 3 * pitch, o[0], o[1], o[2], o[3], n4);
			}
			for (int t = 0; t < 4; t++)
				sixteen_rows(s->four[0][t], s->four[1][t], s->four[2][t], s->four[3][t], s->sixteen[k][4 * t], t, n16);
		}
		for (int t = 0; t < 16; t++)
			half_strip(s->sixteen[0][t], s->sixteen[1][t], s->sixteen[2][t], s->sixteen[3][t], s->half[h][4 * t], t, n64);
	}
}
