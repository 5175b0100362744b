// Drives the line search over random pictures, for sanitizers and for comparing builds:
//   drive fuzz SEED ROUNDS
//   drive digest
//   drive time ROUNDS
#define _POSIX_C_SOURCE 199309L
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "../lines.h"

static uint64_t state = 1;

static uint64_t next(void) {
	state ^= state << 13;
	state ^= state >> 7;
	state ^= state << 17;
	return state;
}

static int below(int n) { return (int)(next() % (uint64_t)n); }

static double uniform(void) { return (double)(next() >> 11) / 9007199254740992.; }

static float normal(void) {
	double v = -6;
	for (int i = 0; i < 12; i++)
		v += uniform();
	return (float)v;
}

static uint64_t hash = 14695981039346656037u;

static void mix(const void *p, size_t n) { // FNV-1a
	for (const unsigned char *b = p; n > 0; n--)
		hash = (hash ^ *b++) * 1099511628211u;
}

static void load(ln_work *w, int width, int height, int half, int odd) {
	const int n = half ? 2 * width : width;
	float *a = malloc(sizeof *a * (size_t)n), *b = malloc(sizeof *b * (size_t)n);
	for (int y = 0; y < height; y++) {
		for (int x = 0; x < n; x++) {
			a[x] = normal() + (y == height / 2 ? 1.5f : 0);
			b[x] = odd && below(50) == 0 ? (float[]){NAN, INFINITY, -INFINITY, 3e38f, -3e38f}[below(5)] : normal();
		}
		ln_quantise(w, y, odd ? b : a, b, half);
	}
	free(a);
	free(b);
}

// One draw a statement here and below: compilers differ in the order of arguments.
static void erase(ln_work *w, int width, int height) {
	const int x1 = below(width + 40) - 20, x0 = below(width + 4) - 2, y = below(height + 4) - 2;
	ln_erase(w, y, x0, x1);
}

static void holes(ln_work *w, int width, int height) {
	for (int i = below(40); i > 0; i--)
		erase(w, width, height);
	if (below(2)) // a disc
		for (int y = 0; y < height; y++) {
			double dy = (y - height / 2.) / (height / 2.), half = dy * dy < 1 ? sqrt(1 - dy * dy) * width / 2 : 0;
			ln_erase(w, y, 0, (int)(width / 2. - half));
			ln_erase(w, y, (int)(width / 2. + half), width);
		}
}

static void part(ln_work *w, ln_stretch s, const int16_t *weights) {
	double scatter[LN_LEVELS] = {1, 1, 1};
	const int uneven = below(2);
	for (int i = 0; uneven && i < LN_LEVELS; i++)
		scatter[i] = 0.5 + 2 * uniform();
	int32_t ends[2] = {0};
	const int sign = below(2) ? 1 : -1, n = ln_part(w, s, weights, sign, scatter, ends, ends + 1);
	mix(&n, sizeof n);
	mix(ends, sizeof ends);
}

static void middles(void) {
	const int n = 1 + below(200), few = below(3);
	float *v = malloc(sizeof *v * (size_t)n);
	for (int i = 0; i < n; i++)
		v[i] = few ? (float)below(4) : normal();
	const double middle = ln_middle(v, n), median = ln_median(v, n);
	mix(&middle, sizeof middle);
	mix(&median, sizeof median);
	free(v);
}

static void around(ln_work *w, int width, int height, int rounds) {
	int16_t weights[LN_FRACTIONS * LN_ENTRY] = {0};
	for (int i = 0; i < LN_FRACTIONS; i++)
		for (int k = 0; k < LN_TAPS; k++) {
			int16_t *at = weights + i * LN_ENTRY;
			at[k] = (int16_t)below(LN_WEIGHT + 1);
			at[LN_SQUARES] = (int16_t)(at[LN_SQUARES] + at[k] * at[k]);
		}
	for (int i = 0; i < rounds; i++) {
		const int axis = below(2), length = axis ? width : height, wide = axis ? height : width;
		ln_stretch s = {.axis = axis, .a = below(length + 4) - 2, .b = below(length + 4) - 2, .ca = uniform() * (wide + 8) - 4, .cb = uniform() * (wide + 8) - 4};
		if (below(30) == 0)
			s.ca = below(2) ? NAN : 1e300;
		ln_total t = ln_sum(w, s, weights);
		mix(&t, sizeof t);
		if (s.b >= s.a) {
			ln_total *p = malloc(sizeof *p * (size_t)(s.b - s.a + 1));
			int n = ln_profile(w, s, weights, p);
			mix(p, sizeof *p * (size_t)n);
			free(p);
		}
		const int sign = below(2) ? 1 : -1, reach = below(3);
		s = ln_settle(w, s, weights, reach, 0.5, sign, &t);
		mix(&t, sizeof t);
		part(w, s, weights);
		middles();
		if (below(4) == 0)
			ln_erase_along(w, s, below(6));
	}
}

static void search(ln_work *w, int width, int height, double seed, int polarity) {
	ln_clear(w);
	for (int axis = 0; axis < 2; axis++) {
		const int across = axis ? width : height, tiles = ln_tiles(axis ? height : width);
		float *spread = malloc(sizeof *spread * (size_t)(2 * tiles * LN_LEVELS * LN_BINS));
		for (int first = 0; first == 0 || first + LN_ROWS <= across; first += 1 + LN_ROWS / 2 + below(LN_ROWS)) {
			if (ln_strip(w, axis, first, seed, polarity, spread))
				exit(1);
			mix(spread, sizeof *spread * (size_t)(2 * tiles * LN_LEVELS * LN_BINS));
		}
		free(spread);
	}
	int32_t n;
	const ln_hit *h = ln_hits(w, &n);
	for (int i = 0; i < n; i++) {
		const int32_t v[] = {h[i].x, h[i].first, h[i].t, h[i].value, h[i].pixels, h[i].axis, h[i].flipped};
		mix(v, sizeof v);
		mix(&h[i].sigmas, sizeof h[i].sigmas);
	}
}

static void one(int width, int height) {
	ln_work *w = ln_work_new(width, height);
	if (!w)
		exit(1);
	const int twice = 1 + below(2);
	for (int i = 0; i < twice; i++) {
		const int odd = below(3) == 0, half = below(2);
		load(w, width, height, half, odd);
		if (below(2))
			holes(w, width, height);
		const int polarity = below(3) - 1;
		search(w, width, height, 3 + 3 * uniform(), polarity);
		around(w, width, height, 40);
	}
	const int at = below(width) - LN_ROWS, n = 1 + below(LN_TILE < width + LN_ROWS - 1 - at - LN_ROWS ? LN_TILE : 16);
	int16_t *sums = malloc(sizeof *sums * LN_ROWS * (size_t)n);
	const int flipped = below(2), first = height > LN_ROWS ? below(height - LN_ROWS + 1) : 0;
	ln_sums(w, 0, first, flipped, at, n, sums);
	mix(sums, sizeof *sums * LN_ROWS * (size_t)n);
	free(sums);
	if (ln_work_bytes(w) <= 0)
		exit(1);
	ln_work_free(w);
}

static void measure(int rounds) {
	ln_work *w = ln_work_new(4000, 3000);
	float *spread = malloc(sizeof *spread * 2 * 8 * LN_LEVELS * LN_BINS);
	double best = 1e9;
	load(w, 4000, 3000, 0, 0);
	for (int i = 0; i < rounds; i++) {
		struct timespec a, b;
		clock_gettime(CLOCK_THREAD_CPUTIME_ID, &a);
		ln_clear(w);
		for (int axis = 0; axis < 2; axis++)
			for (int first = 0; first + LN_ROWS <= (axis ? 4000 : 3000); first += LN_ROWS)
				if (ln_strip(w, axis, first, 4.7, 1, spread))
					exit(1);
		clock_gettime(CLOCK_THREAD_CPUTIME_ID, &b);
		double ms = (double)(b.tv_sec - a.tv_sec) * 1e3 + (double)(b.tv_nsec - a.tv_nsec) / 1e6;
		best = ms < best ? ms : best;
	}
	printf("%.3f ms\n", best);
	free(spread);
	ln_work_free(w);
}

int main(int argc, char **argv) {
	if (argc > 2 && !strcmp(argv[1], "time")) {
		measure(atoi(argv[2]));
		return 0;
	}
	const int fuzz = argc > 3 && !strcmp(argv[1], "fuzz");
	state = fuzz ? strtoull(argv[2], 0, 10) * 2654435761u + 1 : 77;
	for (int i = fuzz ? atoi(argv[3]) : 12; i > 0; i--) {
		const int height = 1 + below(300);
		one(1 + below(i % 4 ? 400 : 1800), height);
		printf("%016llx\n", (unsigned long long)hash);
	}
	return 0;
}
