// Pixels in steps of a fraction of sigma, and strips of them.
#include "strip.h"

#include <string.h>

// step rounds to the odd steps: 2·floor(v·UNIT/2) + 1 within ±MOST. Adding 1.5·2²³ leaves
// the whole number in the low bits of a float, whose bits are in order like integers; so
// what is too high or too low is cut off among integers, as the compiler does in vectors.
LN_INLINE int8_t step(float v) {
	float s = (v * (LN_UNIT / 2) - 0.5f) + 12582912.f;
	int32_t bits, q;
	memcpy(&bits, &v, 4);
	memcpy(&q, &s, 4);
	const int32_t middle = 0x4b400000, low = middle - (LN_MOST + 1) / 2, high = middle + (LN_MOST - 1) / 2;
	q = q < low ? low : q;
	q = q > high ? high : q;
	q = 2 * (q - middle) + 1;
	return (int8_t)(q & -((bits & 0x7fffffff) <= 0x7f800000)); // 0 for what is no number
}

// A picture comes from far memory, and processors fetch ahead within a page only: the
// kernels ask for what lies AHEAD pixels further.
enum { CHUNK = 64, LINE = 16, AHEAD = 1024 };

LN_INLINE void fetch(const float *a) {
	for (int i = 0; i < CHUNK; i += LINE)
		__builtin_prefetch(a + AHEAD + i);
}

LN_KERNEL void steps(int8_t *restrict dst, const float *restrict a, int n) {
	int i = 0;
	for (; i + CHUNK <= n; i += CHUNK) {
		fetch(a + i);
		for (int k = i; k < i + CHUNK; k++)
			dst[k] = step(a[k]);
	}
	for (; i < n; i++)
		dst[i] = step(a[i]);
}

LN_INLINE float mean4(const float *a, const float *b) { return 0.5f * ((a[0] + a[1]) + (b[0] + b[1])); }

LN_KERNEL void steps2(int8_t *restrict dst, const float *restrict a, const float *restrict b, int n) {
	int i = 0;
	for (; i + CHUNK / 2 <= n; i += CHUNK / 2) {
		fetch(a + 2 * i);
		fetch(b + 2 * i);
		for (int k = i; k < i + CHUNK / 2; k++)
			dst[k] = step(mean4(a + 2 * k, b + 2 * k));
	}
	for (; i < n; i++)
		dst[i] = step(mean4(a + 2 * i, b + 2 * i));
}

void ln_quantise(ln_work *w, int32_t y, const float *a, const float *b, int32_t half) {
	int8_t *row = w->plane.at + y * w->plane.pitch;
	if (half)
		steps2(row, a, b, w->plane.width);
	else
		steps(row, a, w->plane.width);
}

void ln_erase(ln_work *w, int32_t y, int32_t x0, int32_t x1) {
	x0 = x0 < 0 ? 0 : x0;
	x1 = x1 > w->plane.width ? w->plane.width : x1;
	if (y >= 0 && y < w->plane.height && x1 > x0)
		memset(w->plane.at + y * w->plane.pitch + x0, 0, (size_t)(x1 - x0));
}

typedef int8_t vec __attribute__((vector_size(16)));

// turn16 writes 16 × 16 bytes turned about their diagonal: four times each row of the
// upper half is interleaved with its like of the lower half.
LN_INLINE void turn16(int8_t *dst, int64_t to, const int8_t *src, int64_t from) {
	vec a[16], b[16];
	for (int i = 0; i < 16; i++)
		memcpy(&a[i], src + i * from, 16);
	for (int k = 0; k < 4; k++) {
		for (int i = 0; i < 8; i++) {
			b[2 * i] = __builtin_shufflevector(a[i], a[i + 8], 0, 16, 1, 17, 2, 18, 3, 19, 4, 20, 5, 21, 6, 22, 7, 23);
			b[2 * i + 1] = __builtin_shufflevector(a[i], a[i + 8], 8, 24, 9, 25, 10, 26, 11, 27, 12, 28, 13, 29, 14, 30, 15, 31);
		}
		memcpy(a, b, sizeof a);
	}
	for (int i = 0; i < 16; i++)
		memcpy(dst + i * to, &a[i], 16);
}

// turn_block turns h rows of w columns, no more than 16 each.
static void turn_block(int8_t *dst, int64_t to, const int8_t *src, int64_t from, int w, int h) {
	if (w == 16 && h == 16) {
		turn16(dst, to, src, from);
		return;
	}
	for (int x = 0; x < w; x++)
		for (int y = 0; y < h; y++)
			dst[x * to + y] = src[y * from + x];
}

void ln_turn(int8_t *dst, int64_t pitch, const ln_plane *p, int first) {
	const int used = p->width - first < LN_ROWS ? p->width - first : LN_ROWS;
	for (int y = 0; y < p->height; y += 16) {
		const int h = p->height - y < 16 ? p->height - y : 16;
		for (int x = 0; x < used; x += 16)
			turn_block(dst + x * pitch + y, pitch, p->at + y * p->pitch + first + x, p->pitch, used - x < 16 ? used - x : 16, h);
	}
	for (int x = used; x < LN_ROWS; x++)
		memset(dst + x * pitch, 0, (size_t)p->height);
}

LN_KERNEL void add_outside(uint8_t *restrict n, const int8_t *restrict row, int length) {
	for (int x = 0; x < length; x++)
		n[x] = (uint8_t)(n[x] + (row[x] == 0));
}

void ln_outside(uint8_t *dst, const int8_t *rows, int64_t pitch, int length) {
	memset(dst, 0, (size_t)length);
	for (int r = 0; r < LN_ROWS; r++)
		add_outside(dst, rows + r * pitch, length);
}

LN_KERNEL void counted(int8_t *restrict dst, const int8_t *restrict src, int n) {
	for (int i = 0; i < n; i++)
		dst[i] = src[i] != 0;
}

void ln_count(int8_t *ones, const int8_t *rows, int64_t pitch, int64_t to, int length) {
	for (int r = 0; r < LN_ROWS; r++) {
		counted(ones + r * to, rows + r * pitch, length);
		memset(ones + r * to + length, 0, (size_t)(to - LN_PAD - length)); // of a longer strip before
	}
}
