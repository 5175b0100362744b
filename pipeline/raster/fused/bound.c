// What it costs merely to read a frame and its correction.
#include <string.h>

#include "bound.h"
#include "parts.h"

PG_KERNEL uint64_t sum_words(const uint8_t *p, int64_t bytes) {
	uint64_t sum = 0;
	for (int64_t i = 0; i < bytes / 8; i++) {
		uint64_t v;
		memcpy(&v, p + 8 * i, 8);
		sum += v;
	}
	return sum;
}

static uint64_t sum_rows(const pg_frame *f, int y0, int y1) {
	int64_t n = y1 - y0, words = 2 * (int64_t)f->width;
	uint64_t sum = sum_words(f->data + y0 * f->stride, n * f->stride);
	sum += f->offset ? sum_words((const uint8_t *)(f->offset + (int64_t)y0 * f->width), n * words) : 0;
	return sum + (f->gain ? sum_words((const uint8_t *)(f->gain + (int64_t)y0 * f->width), n * words) : 0);
}

uint64_t pg_read(const pg_frame *f) {
	uint64_t sum = 0;
	int y[PG_SAMPLES];
	for (int row = 0; row * f->cell < f->height; row++)
		for (int k = 0, n = pg_sample_rows(f, row, y); k < n; k++)
			sum += sum_rows(f, y[k], y[k] + 4);
	return sum + sum_rows(f, 0, f->height);
}
