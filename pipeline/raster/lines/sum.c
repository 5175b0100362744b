// Sums along lines between pixels, with weights across them.
#include <string.h>

#include "work.h"

typedef struct {
	const int8_t *at;
	int64_t along, across; // from one position, one pixel across, to the next
	int64_t cross, slope;  // in 1/65536 px
	int n;
} course;

// start prepares a stretch; n is 0 where it leaves the picture.
static course start(const ln_work *w, const ln_stretch *s) {
	const ln_plane *p = &w->plane;
	const int length = s->axis ? p->width : p->height, wide = s->axis ? p->height : p->width;
	course c = {.at = p->at, .along = s->axis ? 1 : p->pitch, .across = s->axis ? p->pitch : 1, .n = s->b - s->a + 1};
	if (s->a < 0 || s->b >= length || c.n < 1 || !(s->ca >= -2 && s->ca <= wide + 1 && s->cb >= -2 && s->cb <= wide + 1)) {
		c.n = 0;
		return c;
	}
	c.at += s->a * c.along;
	c.cross = (int64_t)((s->ca + 4) * 65536) - 4 * 65536; // above 0 when cut off
	c.slope = s->b > s->a ? (int64_t)((s->cb - s->ca) * 65536 / (s->b - s->a)) : 0;
	return c;
}

// pixels returns the four at position i, one in each byte, the first in the lowest (of a
// little-endian processor); entry what they count.
LN_INLINE uint32_t pixels(const course *c, const int16_t *weights, int64_t i, int beside, const int16_t **entry) {
	const int64_t cross = c->cross + i * c->slope;
	*entry = weights + (cross >> 12 & (LN_FRACTIONS - 1)) * LN_ENTRY;
	const int8_t *q = c->at + i * c->along + ((cross >> 16) - 1) * c->across;
	uint32_t all;
	if (beside) {
		memcpy(&all, q, 4);
		return all;
	}
	const uint8_t *u = (const uint8_t *)q;
	return u[0] | (uint32_t)u[c->across] << 8 | (uint32_t)u[2 * c->across] << 16 | (uint32_t)u[3 * c->across] << 24;
}

// holed reports whether a byte is 0.
LN_INLINE uint32_t holed(uint32_t pixels) { return (pixels - 0x01010101u) & ~pixels & 0x80808080u; }

// missing is what pixels that do not count take from the sum of the weights' squares.
static int32_t missing(uint32_t pixels, const int16_t *k) {
	int8_t q[4];
	int32_t sum = 0;
	memcpy(q, &pixels, 4);
	for (int j = 0; j < LN_TAPS; j++)
		sum += q[j] ? 0 : k[j] * k[j];
	return sum;
}

// add adds what position i has.
LN_INLINE void add(const course *c, const int16_t *weights, int64_t i, int beside, int32_t *sum, int32_t *square) {
	const int16_t *k;
	const uint32_t p = pixels(c, weights, i, beside, &k);
	int8_t q[4];
	memcpy(q, &p, 4);
	*sum += k[0] * q[0] + k[1] * q[1] + k[2] * q[2] + k[3] * q[3];
	*square += k[LN_SQUARES] - (holed(p) ? missing(p, k) : 0);
}

typedef int8_t bytes __attribute__((vector_size(8)));
typedef int16_t shorts __attribute__((vector_size(16)));
typedef uint64_t longs __attribute__((vector_size(16)));

LN_INLINE uint64_t eight(const void *bytes) {
	uint64_t all;
	memcpy(&all, bytes, 8);
	return all;
}

enum { PAIRS = 8 };

// add_pairs adds what 2·PAIRS positions from i on have, two at a time: no sum of a lane
// leaves 16 bits.
LN_INLINE void add_pairs(const course *c, const int16_t *weights, int64_t i, int beside, int32_t *sum, int32_t *square) {
	shorts all = {0};
	int32_t squares = 0;
	for (int j = 0; j < PAIRS; j++, i += 2) {
		const int16_t *k, *l;
		const uint32_t p = pixels(c, weights, i, beside, &k), q = pixels(c, weights, i + 1, beside, &l);
		const longs w = {eight(k), eight(l)};
		all += __builtin_convertvector((bytes)(p | (uint64_t)q << 32), shorts) * (shorts)w;
		squares += k[LN_SQUARES] + l[LN_SQUARES];
		if (__builtin_expect((holed(p) | holed(q)) != 0, 0))
			squares -= missing(p, k) + missing(q, l);
	}
	for (int j = 0; j < 8; j++)
		*sum += all[j];
	*square += squares;
}

static ln_total total(double sum, double square) {
	return (ln_total){sum / (LN_UNIT * LN_WEIGHT), square / (LN_WEIGHT * LN_WEIGHT)};
}

// sum_of is ln_sum; squares of weights are below 4 · LN_WEIGHT² = 2¹⁴ a position.
LN_INLINE ln_total sum_of(const course *c, const int16_t *weights, int beside) {
	double all = 0, squares = 0;
	for (int i = 0; i < c->n;) {
		int32_t sum = 0, square = 0;
		const int end = i + 4096 < c->n ? i + 4096 : c->n;
		for (; i + 2 * PAIRS <= end; i += 2 * PAIRS)
			add_pairs(c, weights, i, beside, &sum, &square);
		for (; i < end; i++)
			add(c, weights, i, beside, &sum, &square);
		all += sum;
		squares += square;
	}
	return total(all, squares);
}

ln_total ln_sum(const ln_work *w, ln_stretch s, const int16_t *weights) {
	const course c = start(w, &s);
	return c.across == 1 ? sum_of(&c, weights, 1) : sum_of(&c, weights, 0);
}

int ln_profile(const ln_work *w, ln_stretch s, const int16_t *weights, ln_total *out) {
	const course c = start(w, &s);
	for (int i = 0; i < c.n; i++) {
		int32_t sum = 0, square = 0;
		if (c.across == 1)
			add(&c, weights, i, 1, &sum, &square);
		else
			add(&c, weights, i, 0, &sum, &square);
		out[i] = total(sum, square);
	}
	return c.n;
}

int ln_run(const ln_work *w, ln_stretch s, const int16_t *weights, int32_t *sums, int32_t *squares) {
	const course c = start(w, &s);
	int32_t sum = 0, square = 0;
	sums[0] = squares[0] = 0;
	for (int i = 0; i < c.n; i++) {
		if (c.across == 1)
			add(&c, weights, i, 1, &sum, &square);
		else
			add(&c, weights, i, 0, &sum, &square);
		sums[i + 1] = sum;
		squares[i + 1] = square;
	}
	return c.n;
}

// try sums along s and keeps it where it stands out more than the best so far.
static void try(const ln_work *w, ln_stretch s, const int16_t *weights, int sign, double *most, ln_stretch *out, ln_total *best) {
	const ln_total t = ln_sum(w, s, weights);
	const double v = t.weight > 0 ? sign * t.sum / __builtin_sqrt(t.weight) : -1e30;
	if (v <= *most)
		return;
	*most = v;
	*out = s;
	*best = t;
}

ln_stretch ln_settle(const ln_work *w, ln_stretch s, const int16_t *weights, int32_t reach, double step, int32_t sign, ln_total *best) {
	ln_stretch out = s;
	double most = -1e30;
	*best = (ln_total){0, 0};
	try(w, s, weights, sign, &most, &out, best);
	for (int turn = 0; turn < 2; turn++) { // both ends the same way, then against each other
		const ln_stretch from = out;
		for (int i = -reach; i <= reach; i++) {
			ln_stretch k = from;
			k.ca += i * step;
			k.cb += turn ? -i * step : i * step;
			if (i)
				try(w, k, weights, sign, &most, &out, best);
		}
	}
	return out;
}

void ln_erase_along(ln_work *w, ln_stretch s, int32_t reach) {
	const ln_plane *p = &w->plane;
	const int length = s.axis ? p->width : p->height, wide = s.axis ? p->height : p->width;
	for (int m = s.a < 0 ? 0 : s.a; m <= s.b && m < length; m++) {
		const double at = s.b > s.a ? s.ca + (s.cb - s.ca) * (m - s.a) / (s.b - s.a) : s.ca;
		if (!(at > -1e6 && at < 1e6))
			continue;
		const int middle = (int)(at + 1e6 + 0.5) - 1000000;
		for (int c = middle - reach < 0 ? 0 : middle - reach; c <= middle + reach && c < wide; c++)
			p->at[s.axis ? c * p->pitch + m : m * p->pitch + c] = 0;
	}
}
