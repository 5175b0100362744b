// The pass in 16-bit integers.
#include "kernels_int.h"

#include "pass_sample.h"

int pg_sample_int(const pg_frame *f, pg_grid *g, pg_band *b, void *blocks, int32_t row0, int32_t row1) {
	return sample(f, g, b, blocks, row0, row1);
}

void pg_sample_grain_int(const pg_frame *f, pg_grid *g, const void *blocks, void *scratch, int32_t row) {
	sample_grain(f, g, blocks, scratch, row);
}

int pg_pass_int(const pg_frame *f, const pg_grid *g, pg_grid *out, pg_band *b, int32_t row0, int32_t row1) {
	return pass(f, g, out, b, row0, row1);
}
