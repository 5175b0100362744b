#include "contrast.h"

#include <stdlib.h>
#include <string.h>

#include "signal.h"

PG_KERNEL void divide(float *restrict v, const float *restrict noise, int n) {
	for (int x = 0; x < n; x++)
		v[x] /= noise[x];
}

int pg_contrast(const pg_frame *f, const double *level, const double *noise, int32_t columns, int32_t rows, int32_t y0, int32_t y1, float *out) {
	const pg_grid g = {.columns = columns, .rows = rows, .level = (double *)(uintptr_t)level, .noise = (double *)(uintptr_t)noise};
	float *sigma = malloc(sizeof *sigma * (size_t)f->width);
	uint16_t *counts = malloc(sizeof *counts * ((size_t)f->width + 16));
	if (!sigma || !counts) {
		free(sigma);
		free(counts);
		return PG_NO_MEMORY;
	}
	for (int y = y0; y < y1; y++) {
		float *row = out + (int64_t)y * f->width;
		signal_row(f, &g, row, counts, y, 0, f->width);
		noise_row(f, &g, sigma, y, 0, f->width);
		divide(row, sigma, f->width);
	}
	free(sigma);
	free(counts);
	return PG_OK;
}
