// Sums along lines between pixels, with weights across them.
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

// add adds what position i has.
LN_INLINE void add(const course *c, const int16_t *weights, int i, int32_t *sum, int32_t *square) {
	const int64_t cross = c->cross + i * c->slope;
	const int16_t *k = weights + (cross >> 12 & (LN_FRACTIONS - 1)) * LN_ENTRY;
	const int8_t *q = c->at + i * c->along + ((cross >> 16) - 1) * c->across;
	const int q0 = q[0], q1 = q[c->across], q2 = q[2 * c->across], q3 = q[3 * c->across];
	*sum += k[0] * q0 + k[1] * q1 + k[2] * q2 + k[3] * q3;
	*square += k[LN_SQUARES];
	if (q0 && q1 && q2 && q3)
		return;
	*square -= (q0 ? 0 : k[0] * k[0]) + (q1 ? 0 : k[1] * k[1]) + (q2 ? 0 : k[2] * k[2]) + (q3 ? 0 : k[3] * k[3]);
}

static ln_total total(double sum, double square) {
	return (ln_total){sum / (LN_UNIT * LN_WEIGHT), square / (LN_WEIGHT * LN_WEIGHT)};
}

ln_total ln_sum(const ln_work *w, ln_stretch s, const int16_t *weights) {
	const course c = start(w, &s);
	double all = 0, squares = 0;
	for (int i = 0; i < c.n;) {
		int32_t sum = 0, square = 0;
		for (const int end = i + 4096 < c.n ? i + 4096 : c.n; i < end; i++)
			add(&c, weights, i, &sum, &square);
		all += sum;
		squares += square;
	}
	return total(all, squares);
}

int ln_profile(const ln_work *w, ln_stretch s, const int16_t *weights, ln_total *out) {
	const course c = start(w, &s);
	for (int i = 0; i < c.n; i++) {
		int32_t sum = 0, square = 0;
		add(&c, weights, i, &sum, &square);
		out[i] = total(sum, square);
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
