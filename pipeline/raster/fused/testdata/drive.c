// Drives the kernels without Go: "fuzz SEED COUNT" runs them over random sizes, strides,
// layouts, regions and settings; "digest" prints a number that every build must give;
// "time COUNT" prints the least milliseconds of a 12-megapixel frame.
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "../bound.h"
#include "../contrast.h"
#include "../correct.h"
#include "../objects.h"
#include "../parts.h"

static uint64_t seed = 1;

static uint32_t next(void) { // xorshift64* (Vigna 2016)
	seed ^= seed >> 12, seed ^= seed << 25, seed ^= seed >> 27;
	return (uint32_t)(seed * 0x2545F4914F6CDD1Dull >> 32);
}

static int below(int n) { return (int)(next() % (uint32_t)n); }
static double uniform(void) { return next() / 4294967296.0; }
static double normal(void) {
	double s = -6;
	for (int i = 0; i < 12; i++)
		s += uniform();
	return s;
}

static void *room(size_t n) {
	void *p = calloc(n ? n : 1, 1);
	if (!p)
		abort();
	return p;
}

typedef struct {
	pg_frame f;
	pg_grid guess, grid;
	pg_band *bands[4];
	pg_blobs *blobs;
	void *blocks;
	float *snr;
	int n, weaker, beside; // weaker: drop some blobs; beside: try what is not part of a search
	int32_t again;
	uint64_t digest;
} job;

static void put(uint8_t *row, int layout, int x, uint32_t c) {
	switch (layout) {
	case PG_BYTES:
		row[x] = (uint8_t)c;
		return;
	case PG_WORDS:
		row[2 * x] = (uint8_t)c, row[2 * x + 1] = (uint8_t)(c >> 8);
		return;
	case PG_10P:
		for (int b = 0; b < 10; b++)
			row[(10 * x + b) >> 3] |= (uint8_t)((c >> b & 1) << ((10 * x + b) & 7));
		return;
	case PG_12P:
		row += x / 2 * 3;
		if (x & 1)
			row[1] |= (uint8_t)(c << 4), row[2] = (uint8_t)(c >> 4);
		else
			row[0] = (uint8_t)c, row[1] |= (uint8_t)(c >> 8);
		return;
	}
	row += x / 2 * 3;
	row[1] |= (uint8_t)((c & 15) << (x & 1 ? 4 : 0));
	row[x & 1 ? 2 : 0] = (uint8_t)(c >> 4);
}

static int64_t row_bytes(int layout, int w) {
	return layout == PG_BYTES ? w : layout == PG_WORDS ? 2 * w : layout == PG_10P ? (10 * w + 7) / 8 : layout == PG_12P ? (12 * w + 7) / 8 : (w + 1) / 2 * 3;
}

static void spot(float *light, const pg_frame *f, double cx, double cy, double peak, double s) {
	for (int y = (int)cy - 8 < 0 ? 0 : (int)cy - 8; y <= cy + 8 && y < f->height; y++)
		for (int x = (int)cx - 8 < 0 ? 0 : (int)cx - 8; x <= cx + 8 && x < f->width; x++)
			light[(int64_t)y * f->width + x] += (float)(peak * exp(-((x - cx) * (x - cx) + (y - cy) * (y - cy)) / (2 * s * s)));
}

// expose draws noise on haze with some spots and scratches.
static void expose(pg_frame *f, double level, double noise, int spots, int scratches, int stride) {
	uint8_t *data = room((size_t)stride * (size_t)f->height);
	float *light = room(sizeof(float) * (size_t)f->width * (size_t)f->height);
	for (int i = 0; i < spots; i++) { // one draw a statement: compilers differ in the order of arguments
		double s = 0.8 + 2 * uniform(), peak = noise * (1 + 30 * uniform());
		int y = below(f->height), x = below(f->width);
		spot(light, f, x, y, peak, s);
	}
	for (int i = 0; i < scratches; i++) {
		double x = below(f->width), y = below(f->height), a = 3.14159 * uniform(), length = 60 + 440 * uniform();
		for (double t = 0; t < length; t++)
			if (x + t * cos(a) >= 0 && x + t * cos(a) < f->width && y + t * sin(a) < f->height)
				spot(light, f, x + t * cos(a), y + t * sin(a), 5 * noise, 0.8);
	}
	for (int y = 0; y < f->height; y++)
		for (int x = 0; x < f->width; x++) {
			double v = level * (1 + 0.3 * sin(0.002 * x + 0.001 * y)) + (double)light[(int64_t)y * f->width + x] + noise * normal();
			v = v < 0 ? 0 : v > f->max_count ? f->max_count : v;
			put(data + (int64_t)y * stride, f->layout, x, (uint32_t)(v + 0.5));
		}
	free(light);
	f->data = data, f->stride = stride;
}

// calibrate makes images in floats and, unless the frame is for floats, in integers.
static void calibrate(pg_frame *f, double dark, int with_stray) {
	size_t n = (size_t)f->width * (size_t)f->height;
	float *d = room(sizeof(float) * n), *s = with_stray ? room(sizeof(float) * n) : 0, *r = room(sizeof(float) * n);
	int16_t *o = room(2 * n), *g = room(2 * n);
	int bits = f->max_count > 1023 ? 12 : f->max_count > 255 ? 10 : 8, shift = bits == 8 ? 2 : 1;
	f->factor = 128 >> (bits - 8);
	for (size_t i = 0; i < n; i++) {
		d[i] = (float)(dark * (1 + 0.1 * normal()));
		if (s)
			s[i] = (float)(dark * uniform());
		r[i] = (float)(1 + 0.3 * (uniform() - 0.5));
		o[i] = (int16_t)lrint((double)(d[i] + (s ? s[i] : 0)) * f->factor);
		g[i] = (int16_t)fmin(32767, lrint(32768 / (double)r[i] / (1 << shift)));
	}
	f->dark = d, f->stray = s, f->response = r, f->offset = o, f->gain = g;
	f->scale = (double)f->factor / (1 << shift);
}

static void mark_bad(pg_frame *f, double share) {
	int32_t *start = room(sizeof(int32_t) * ((size_t)f->height + 1)), *x = room(sizeof(int32_t) * (size_t)f->width * (size_t)f->height);
	int32_t n = 0;
	for (int y = 0; y < f->height; y++) {
		for (int i = 0; i < f->width; i++)
			if (uniform() < share)
				x[n++] = i;
		start[y + 1] = n;
	}
	f->bad_start = start, f->bad_x = x;
	uint8_t *near = room((size_t)n);
	for (int y = 0; y < f->height; y++)
		for (int32_t i = start[y]; i < start[y + 1]; i++)
			for (int v = y - 1, bit = 1; v <= y + 1; v++)
				for (int u = x[i] - 1; u <= x[i] + 1; u++) {
					if (u == x[i] && v == y)
						continue;
					if (u >= 0 && v >= 0 && u < f->width && v < f->height && !pg_is_bad(f, u, v))
						near[i] |= (uint8_t)bit;
					bit <<= 1;
				}
	f->bad_near = near;
}

// lay_region makes up to spans spans a row; 0: all of the frame.
static void lay_region(pg_frame *f, int spans) {
	int32_t *start = room(sizeof(int32_t) * ((size_t)f->height + 1));
	pg_span *s = room(sizeof(pg_span) * (size_t)f->height * (size_t)(spans + 1));
	int32_t n = 0;
	for (int y = 0; y < f->height; y++) {
		int x = spans ? below(f->width / 2 + 1) : 0;
		for (int k = 0; k < (spans ? below(spans + 1) : 1) && x < f->width; k++) {
			int end = spans ? x + 1 + below(f->width) : f->width;
			end = end > f->width ? f->width : end;
			s[n++] = (pg_span){y, x, end};
			x = end + 1 + below(5);
		}
		start[y + 1] = n;
	}
	f->spans = s, f->span_start = start;
}

static pg_grid new_grid(const pg_frame *f, int64_t *inside, int64_t *valid) {
	pg_grid g = {.columns = (f->width + f->cell - 1) / f->cell, .rows = (f->height + f->cell - 1) / f->cell, .inside = inside, .valid = valid};
	size_t n = (size_t)g.columns * (size_t)g.rows;
	double *v = room(5 * n * sizeof(double));
	g.level = v, g.noise = v + n, g.mean = v + 2 * n, g.sigma = v + 3 * n, g.block = v + 4 * n;
	g.filled = room(n);
	return g;
}

static void begin(job *j, int bands) {
	pg_frame *f = &j->f;
	double c = f->clip;
	f->shrink = sqrt(1 - 2 * c * exp(-c * c / 2) / sqrt(2 * 3.14159265358979) / erf(c / sqrt(2)));
	if (f->use_float)
		f->scale = 1;
	size_t n = (size_t)((f->width + f->cell - 1) / f->cell) * (size_t)((f->height + f->cell - 1) / f->cell);
	int64_t *counts = room(2 * n * sizeof(int64_t));
	j->guess = new_grid(f, counts, counts + n), j->grid = new_grid(f, counts, counts + n);
	j->n = bands < j->grid.rows ? bands : j->grid.rows;
	for (int i = 0; i < j->n; i++)
		j->bands[i] = pg_band_new(f->width, f->cell, f->use_float);
	j->blocks = room((size_t)pg_sample_blocks(f) * (size_t)j->grid.rows + 1);
	j->blobs = pg_blobs_new();
}

static void mix(job *j, const void *p, size_t n) { // FNV-1a
	for (size_t i = 0; i < n; i++)
		j->digest = (j->digest ^ ((const uint8_t *)p)[i]) * 1099511628211ull;
}

static int look(job *j) {
	int e = 0;
	for (int i = 0; i < j->n && !e; i++)
		e = pg_sample(&j->f, &j->guess, j->bands[i], j->blocks, i * j->grid.rows / j->n, (i + 1) * j->grid.rows / j->n);
	e = e ? e : pg_smooth(&j->f, &j->guess);
	if (!e)
		pg_calm(&j->f, &j->guess);
	e = e ? e : pg_sample_grain(&j->f, &j->guess, j->blocks);
	return e ? e : pg_grain(&j->f, &j->guess, 0.8);
}

static int rows(job *j) {
	int e = 0;
	for (int i = 0; i < j->n && !e; i++)
		e = pg_pass(&j->f, &j->guess, &j->grid, j->bands[i], i * j->grid.rows / j->n, (i + 1) * j->grid.rows / j->n);
	e = e ? e : pg_smooth(&j->f, &j->grid);
	return e ? e : pg_grain(&j->f, &j->grid, 1);
}

// expected is what pg_contrast owes a pixel, in double, and how far it may be off.
static double expected(const job *j, int x, int y, double *off) {
	const pg_frame *f = &j->f;
	const pg_grid *g = &j->grid;
	pg_grid noise = *g;
	noise.level = g->noise;
	const double half = 0.5 * f->cell - 0.5, right = half + (g->columns - 1) * f->cell, bottom = half + (g->rows - 1) * f->cell;
	double v = pg_correct_one(f, x, y), level = pg_level(g, f->cell, x, y);
	double n = pg_level(&noise, f->cell, fmin(fmax(x, half), right), fmin(fmax(y, half), bottom));
	double rounding = f->use_float ? 0 : 1.5 / f->scale + 1e-4 * fabs(v);
	*off = (rounding + 1e-5 * (fabs(v) + fabs(level))) / n + 1e-5 * fabs(v - level) / n;
	return (v - level) / n;
}

// contrast holds pg_contrast, in bands as contrast.go has it, against its definition, and
// wants 0 where a pixel is bad or outside.
static int contrast(const job *j) {
	const pg_frame *f = &j->f;
	float *out = room(sizeof(float) * (size_t)f->width * (size_t)f->height);
	int e = 0, wrong = 0;
	for (int i = 0; i < 3; i++)
		e = e ? e : pg_contrast(f, j->grid.level, j->grid.noise, j->grid.columns, j->grid.rows, i * f->height / 3, (i + 1) * f->height / 3, out);
	for (int y = 0; y < f->height && !e; y++) {
		const float *row = out + (int64_t)y * f->width;
		int x = 0;
		for (int i = f->span_start[y]; i < f->span_start[y + 1]; i++) {
			for (; x < f->spans[i].x0; x++)
				wrong += row[x] != 0;
			for (; x < f->spans[i].x1; x++) {
				double off = 0, v = pg_is_bad(f, x, y) ? 0 : expected(j, x, y, &off);
				wrong += !(fabs((double)row[x] - v) <= off);
			}
		}
		for (; x < f->width; x++)
			wrong += row[x] != 0;
	}
	free(out);
	if (wrong)
		fprintf(stderr, "contrast: %d pixels off\n", wrong);
	return e ? e : wrong ? -1 : 0;
}

// some drops about half of the blobs, as find.go does with the weaker ones, and wants the
// pixels of the others unchanged.
static int some(job *j) {
	pg_blobs *b = j->blobs;
	int64_t kept = 0, n = 0, wrong = 0;
	uint8_t *keep = room((size_t)b->count);
	pg_span *before = room(sizeof(pg_span) * (size_t)b->runs.count), *after = room(sizeof(pg_span) * (size_t)b->runs.count);
	for (int64_t i = 0; i < b->count; i++)
		if ((keep[i] = (uint8_t)below(2))) {
			pg_spans(b->runs.at + b->blobs[i].first, b->blobs[i].runs, before + n);
			kept++, n += b->blobs[i].runs;
		}
	pg_keep(b, keep);
	wrong += b->count != kept || b->runs.count != n;
	for (int64_t i = 0, k = 0; i < b->count && !wrong; k += b->blobs[i++].runs)
		pg_spans(b->runs.at + b->blobs[i].first, b->blobs[i].runs, after + k);
	wrong += !!memcmp(before, after, sizeof(pg_span) * (size_t)n);
	free(keep), free(before), free(after);
	return wrong ? -2 : 0;
}

// sizes wants the memory that is reported to be some.
static int sizes(const job *j) {
	volatile uint64_t sum = pg_read(&j->f);
	(void)sum;
	return pg_blobs_bytes(j->blobs) <= 0 || pg_band_bytes(j->bands[0]) <= 0 ? -3 : 0;
}

static int objects(job *j) {
	int e = 0;
	pg_measure m;
	for (int i = 0; i < j->n; i++)
		e = e ? e : pg_collect(j->blobs, j->bands[i]);
	if (!e)
		e = pg_again(&j->f, &j->guess, &j->grid, j->bands[0], j->blobs, &j->again);
	e = e ? e : pg_find(&j->f, &j->grid, j->bands[0], j->blobs, 1, j->snr);
	if (!e && j->weaker)
		e = some(j);
	e = e ? e : pg_index(&j->f, j->blobs);
	for (int64_t i = 0; i < j->blobs->count && !e; i++) {
		e = pg_measure_blob(&j->f, &j->grid, j->blobs, i, &m);
		mix(j, j->blobs->blobs + i, sizeof(pg_blob));
	}
	return e;
}

// all runs the kernels as find.go does and mixes integers and correctly rounded floats
// into the digest; what comes from the mathematics library is left out.
static int all(job *j) {
	int e = look(j);
	if (!e && !j->f.use_float && !pg_fits(&j->f, &j->guess))
		return 0;
	e = e ? e : rows(j);
	if (!e) {
		mix(j, j->grid.level, sizeof(double) * (size_t)(j->grid.columns * j->grid.rows));
		mix(j, j->grid.noise, sizeof(double) * (size_t)(j->grid.columns * j->grid.rows));
		for (int i = 0; i < j->n; i++)
			mix(j, j->bands[i]->runs.at, sizeof(pg_run) * (size_t)j->bands[i]->runs.count);
	}
	e = e ? e : objects(j);
	if (!e && j->beside)
		e = contrast(j);
	return e ? e : j->beside ? sizes(j) : 0;
}

static void drop(job *j) {
	const void *p[] = {j->f.data, j->f.dark, j->f.stray, j->f.response, j->f.offset, j->f.gain, j->f.bad_start, j->f.bad_x, j->f.bad_near, j->f.spans, j->f.span_start,
	                   j->guess.level, j->grid.level, j->guess.filled, j->grid.filled, j->guess.inside, j->blocks, j->snr};
	for (size_t i = 0; i < sizeof(p) / sizeof(p[0]); i++)
		free((void *)(uintptr_t)p[i]);
	for (int i = 0; i < j->n; i++)
		pg_band_free(j->bands[i]);
	pg_blobs_free(j->blobs);
}

static void any_frame(pg_frame *f) {
	static const int most[] = {255, 0, 1023, 4095, 4095}, words[] = {1023, 4095, 65535};
	static const int cells[] = {16, 20, 32, 64, 128};
	f->width = 1 + below(below(3) ? 90 : 400), f->height = 1 + below(below(3) ? 90 : 300);
	f->layout = below(5);
	f->max_count = f->layout == PG_WORDS ? words[below(3)] : most[f->layout];
	f->use_float = f->max_count > 4095 || below(4) == 0;
	f->cell = cells[below(5)], f->polarity = below(3) - 1, f->use_grain = below(4) != 0;
	f->clip = 2 + 2 * uniform(), f->floor_dn = 0.29, f->min_share = 1. / 32;
	f->low = 1 + 3 * uniform(), f->high = f->low + 3 * uniform();
	f->scale = f->factor = f->max_count > 1023 ? 4 : f->max_count > 255 ? 16 : 32;
}

static int fuzz(int count) {
	for (int i = 0; i < count; i++) {
		job j = {.digest = 1469598103934665603ull};
		any_frame(&j.f);
		double unit = j.f.max_count / 255.;
		expose(&j.f, unit * 250 * uniform() * uniform(), unit * 8 * uniform() * uniform(), below(20), below(3), (int)row_bytes(j.f.layout, j.f.width) + below(9));
		if (below(3))
			calibrate(&j.f, unit * 6 * uniform(), below(2));
		if (below(2))
			mark_bad(&j.f, below(8) ? 0.01 : 0.9);
		lay_region(&j.f, below(2) ? 0 : below(6));
		begin(&j, 1 + below(4));
		if (below(3) == 0)
			j.snr = room(sizeof(float) * (size_t)j.f.width * (size_t)j.f.height);
		j.weaker = below(2), j.beside = 1;
		int e = all(&j);
		drop(&j);
		if (e) {
			fprintf(stderr, "frame %d: result %d\n", i, e);
			return 1;
		}
	}
	return 0;
}

static job scene(int width, int height, int max_count, double noise) {
	job j = {.digest = 1469598103934665603ull};
	j.f = (pg_frame){.width = width, .height = height, .layout = max_count > 255 ? PG_WORDS : PG_BYTES, .max_count = max_count, .cell = 64,
	                 .polarity = 1, .use_grain = 1, .clip = 3, .floor_dn = 0.29, .min_share = 1. / 32, .low = 3.5, .high = 6};
	expose(&j.f, 22 * (max_count / 255.), noise * (max_count / 255.), width * height / 85000, width * height / 600000, (max_count > 255 ? 2 : 1) * width);
	calibrate(&j.f, 4 * (max_count / 255.), 1);
	mark_bad(&j.f, 1.2e-4);
	lay_region(&j.f, 0);
	return j;
}

static double now(void) {
	struct timespec t;
	clock_gettime(CLOCK_THREAD_CPUTIME_ID, &t);
	return (double)t.tv_sec * 1e3 + (double)t.tv_nsec * 1e-6;
}

static int timing(int count) {
	job j = scene(4000, 3000, 255, 1.6);
	double best[4] = {1e9, 1e9, 1e9, 1e9};
	begin(&j, 1);
	for (int i = 0; i < count; i++) {
		double t[4] = {now()};
		int e = look(&j);
		t[1] = now();
		e = e ? e : rows(&j);
		t[2] = now();
		e = e ? e : objects(&j);
		t[3] = now();
		if (e)
			return 1;
		for (int k = 0; k < 3; k++)
			best[k] = fmin(best[k], t[k + 1] - t[k]);
		best[3] = fmin(best[3], t[3] - t[0]);
	}
	int64_t runs = j.bands[0]->runs.count;
	printf("%.3f look %.3f rows %.3f objects %.3f blobs %d runs %d rows again %d\n", best[3], best[0], best[1], best[2], (int)j.blobs->count, (int)runs, (int)j.again);
	drop(&j);
	return 0;
}

static int digest(void) {
	static const int most[] = {255, 1023, 4095, 65535};
	for (int k = 0; k < 4; k++)
		for (int floats = k == 3; floats < 2; floats++) {
			job j = scene(803, 522, most[k], 1.6);
			j.f.use_float = floats;
			begin(&j, 1);
			if (all(&j))
				return 1;
			printf("%d %d %016llx\n", most[k], floats, (unsigned long long)j.digest);
			drop(&j);
		}
	return 0;
}

int main(int argc, char **argv) {
	if (argc == 4 && !strcmp(argv[1], "fuzz")) {
		seed = strtoull(argv[2], 0, 10) * 2 + 1;
		return fuzz(atoi(argv[3]));
	}
	if (argc == 3 && !strcmp(argv[1], "time"))
		return timing(atoi(argv[2]));
	if (argc == 2 && !strcmp(argv[1], "digest"))
		return digest();
	fprintf(stderr, "usage: drive fuzz SEED COUNT | time COUNT | digest\n");
	return 2;
}
