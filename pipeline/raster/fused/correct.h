// Counts of a row: unpacking, and the correction in floats that the reference makes.
#ifndef LAPGATE_CORRECT_H
#define LAPGATE_CORRECT_H

#include "pass.h"

PG_INLINE uint32_t pg_count(const pg_frame *f, const uint8_t *row, int x) {
	const uint8_t *p;
	switch (f->layout) {
	case PG_BYTES:
		return row[x];
	case PG_10P:
		p = row + (10 * (int64_t)x >> 3);
		return ((uint32_t)p[0] | (uint32_t)p[1] << 8) >> (10 * x & 7) & 0x3ff;
	case PG_12P:
		p = row + (x >> 1) * 3;
		return x & 1 ? (uint32_t)p[1] >> 4 | (uint32_t)p[2] << 4 : (uint32_t)p[0] | (uint32_t)(p[1] & 15) << 8;
	case PG_12PACKED:
		p = row + (x >> 1) * 3;
		return x & 1 ? (uint32_t)p[2] << 4 | p[1] >> 4 : (uint32_t)p[0] << 4 | (p[1] & 15);
	}
	p = row + 2 * (int64_t)x;
	return (uint32_t)p[0] | (uint32_t)p[1] << 8;
}

PG_INLINE const uint8_t *pg_row(const pg_frame *f, int y) { return f->data + (int64_t)y * f->stride; }

// A row of memory that 64 px take step bytes of, to be asked for before it is used.
typedef struct {
	uintptr_t at;
	int step; // 0: nothing to ask for
} pg_stream;

// pg_ask asks for 64 px; what is left of a line that they end in, the next ones ask for.
PG_INLINE void pg_ask(const pg_stream *s, int x) {
	const uintptr_t at = s->at + (uintptr_t)(x * s->step >> 6);
	if (s->step > 0)
		__builtin_prefetch((const void *)at, 0, 2);
	if (s->step > 64)
		__builtin_prefetch((const void *)(at + 64), 0, 2);
}

// pg_streams are frame, offset and gain of row y.
static inline void pg_streams(const pg_frame *f, int y, pg_stream *out) {
	const int row = f->layout == PG_BYTES ? 64 : f->layout == PG_10P ? 80 : f->layout == PG_WORDS ? 128 : 96, map = 2 * 64;
	const int none = y < 0 || y >= f->height || f->use_float;
	const pg_stream nothing = {0};
	out[0] = none ? nothing : (pg_stream){(uintptr_t)pg_row(f, y), row};
	out[1] = none || !f->offset ? nothing : (pg_stream){(uintptr_t)(f->offset + (int64_t)y * f->width), map};
	out[2] = none || !f->gain ? nothing : (pg_stream){(uintptr_t)(f->gain + (int64_t)y * f->width), map};
}

// pg_ask_span asks for all lines that x0 … x1 of row y lie in, as far as the frame goes.
static inline void pg_ask_span(const pg_frame *f, int y, int x0, int x1) {
	pg_stream s[3];
	pg_streams(f, y, s);
	x0 = x0 < 0 ? 0 : x0, x1 = x1 > f->width ? f->width : x1;
	for (int k = 0; k < 3; k++) {
		const uintptr_t last = s[k].at + (uintptr_t)((x1 - 1) * s[k].step >> 6);
		for (uintptr_t p = (s[k].at + (uintptr_t)(x0 * s[k].step >> 6)) / 64 * 64; s[k].step > 0 && p <= last; p += 64)
			__builtin_prefetch((const void *)p, 0, 2);
	}
}

PG_INLINE void pg_pair12(const uint8_t *restrict p, uint16_t *restrict d, int n, int packed) {
	for (int i = 0; i < n; i++) {
		uint16_t a = p[3 * i], b = p[3 * i + 1], c = p[3 * i + 2];
		d[2 * i] = packed ? (uint16_t)(a << 4 | (b & 15)) : (uint16_t)(a | (b & 15) << 8);
		d[2 * i + 1] = (uint16_t)(c << 4 | b >> 4);
	}
}

// pg_unpack writes the counts of row y, x0 to x1, to tmp[x0 …]; where the row holds
// words already it returns the row itself. Not for PG_BYTES.
PG_INLINE const uint16_t *pg_unpack(const pg_frame *f, uint16_t *restrict tmp, int y, int x0, int x1) {
	const uint8_t *row = pg_row(f, y);
	int x = x0;
	switch (f->layout) {
	case PG_WORDS:
		if (((uintptr_t)row & 1) == 0)
			return (const uint16_t *)(const void *)row;
		break;
	case PG_12P:
	case PG_12PACKED:
		if (x & 1) {
			tmp[x] = (uint16_t)pg_count(f, row, x);
			x++;
		}
		if (x1 - x > 1) {
			int n = (x1 - x) / 2;
			pg_pair12(row + x / 2 * 3, tmp + x, n, f->layout == PG_12PACKED);
			x += 2 * n;
		}
		break;
	case PG_10P:
		for (; x < x1 && (x & 3); x++)
			tmp[x] = (uint16_t)pg_count(f, row, x);
		for (const uint8_t *p = row + x / 4 * 5; x + 4 <= x1; x += 4, p += 5) {
			tmp[x] = (uint16_t)((p[0] | p[1] << 8) & 0x3ff);
			tmp[x + 1] = (uint16_t)((p[1] >> 2 | p[2] << 6) & 0x3ff);
			tmp[x + 2] = (uint16_t)((p[2] >> 4 | p[3] << 4) & 0x3ff);
			tmp[x + 3] = (uint16_t)(p[3] >> 6 | p[4] << 2);
		}
		break;
	}
	for (; x < x1; x++)
		tmp[x] = (uint16_t)pg_count(f, row, x);
	return tmp;
}

// pg_eight corrects eight counts from x on; see pg_correct_int.
PG_INLINE void pg_eight(float *restrict v, const uint8_t *restrict bytes, const uint16_t *restrict words, const int16_t *restrict o,
                        const int16_t *restrict g, int32_t factor, float unit, int x) {
	int32_t d[8];
	for (int i = 0; i < 8; i++)
		d[i] = (int32_t)(words ? words[x + i] : bytes[x + i]);
	for (int i = 0; i < 8; i++)
		d[i] = (((d[i] * factor - o[x + i]) * g[x + i] >> 14) + 1) >> 1;
	for (int i = 0; i < 8; i++)
		v[x + i] = (float)d[i] * unit;
}

// pg_correct_int is pg_correct by the images in 16-bit integers, which take half of the
// memory that those in floats do; rounded to 1/scale DN. Spans are short: they are
// taken eight at a time, the last of which may overlap those before.
PG_INLINE void pg_correct_int(const pg_frame *f, float *restrict v, uint16_t *restrict tmp, int y, int x0, int x1) {
	const int64_t at = (int64_t)y * f->width;
	const int16_t *o = f->offset ? f->offset + at : 0, *g = f->gain ? f->gain + at : 0;
	const uint8_t *bytes = pg_row(f, y);
	const uint16_t *words = f->layout == PG_BYTES ? 0 : pg_unpack(f, tmp, y, x0, x1);
	const float unit = (float)(1 / f->scale);
	if (o && g && x1 - x0 >= 8) {
		int x = x0;
		for (; x + 8 < x1; x += 8)
			if (words)
				pg_eight(v, bytes, words, o, g, f->factor, unit, x);
			else
				pg_eight(v, bytes, 0, o, g, f->factor, unit, x);
		pg_eight(v, bytes, words, o, g, f->factor, unit, x1 - 8);
		return;
	}
	for (int x = x0; x < x1; x++) {
		int32_t d = (int32_t)(words ? words[x] : bytes[x]) * f->factor - (o ? o[x] : 0);
		d = g ? ((d * g[x] >> 14) + 1) >> 1 : d;
		v[x] = (float)d * unit;
	}
}

// pg_correct writes the corrected counts (DN) of row y to v[x0 … x1); bad pixels are
// not replaced yet. tmp holds a row.
PG_INLINE void pg_correct(const pg_frame *f, float *restrict v, uint16_t *restrict tmp, int y, int x0, int x1) {
	if (f->layout == PG_BYTES) {
		const uint8_t *r = pg_row(f, y);
		for (int x = x0; x < x1; x++)
			v[x] = (float)r[x];
	} else {
		const uint16_t *r = pg_unpack(f, tmp, y, x0, x1);
		for (int x = x0; x < x1; x++)
			v[x] = (float)r[x];
	}
	int64_t at = (int64_t)y * f->width;
	if (f->dark)
		for (int x = x0; x < x1; x++)
			v[x] -= f->dark[at + x];
	if (f->stray)
		for (int x = x0; x < x1; x++)
			v[x] -= f->stray[at + x];
	if (f->response)
		for (int x = x0; x < x1; x++)
			v[x] /= f->response[at + x];
}

PG_INLINE float pg_correct_one(const pg_frame *f, int x, int y) {
	float v = (float)pg_count(f, pg_row(f, y), x);
	int64_t at = (int64_t)y * f->width + x;
	if (f->dark)
		v -= f->dark[at];
	if (f->stray)
		v -= f->stray[at];
	if (f->response)
		v /= f->response[at];
	return v;
}

static inline int pg_is_bad(const pg_frame *f, int x, int y) {
	if (!f->bad_start)
		return 0;
	int a = f->bad_start[y], b = f->bad_start[y + 1];
	while (a < b) {
		int m = (a + b) / 2;
		if (f->bad_x[m] == x)
			return 1;
		if (f->bad_x[m] < x)
			a = m + 1;
		else
			b = m;
	}
	return 0;
}

enum { PG_REPLACE_REACH = 64 };

// pg_replaced returns the value of the bad pixel (x, y): the median of the good pixels
// of the smallest square around it that has one, as raster.ReplaceBad has it; 0 where
// there is none within PG_REPLACE_REACH px.
static inline float pg_replaced(const pg_frame *f, int x, int y) {
	float near[8 * PG_REPLACE_REACH];
	int n = 0;
	for (int r = 1; r <= PG_REPLACE_REACH && n == 0; r++)
		for (int v = y - r < 0 ? 0 : y - r; v <= y + r && v < f->height; v++) {
			int step = v == y - r || v == y + r ? 1 : 2 * r; // what lies further in is bad
			for (int u = x - r; u <= x + r; u += step) {
				if (u < 0 || u >= f->width || pg_is_bad(f, u, v))
					continue;
				float c = pg_correct_one(f, u, v);
				int i = n++;
				for (; i > 0 && near[i - 1] > c; i--)
					near[i] = near[i - 1];
				near[i] = c;
			}
		}
	if (n == 0)
		return 0;
	return (float)(((double)near[n / 2] + (double)near[(n - 1) / 2]) / 2);
}

#endif
