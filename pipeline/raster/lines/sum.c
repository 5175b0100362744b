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
	const int16_t *k = weights + (cross >> 12 & (LN_FRACTIONS - 1)) * LN_TAPS;
	const int8_t *q = c->at + i * c->along + ((cross >> 16) - 1) * c->across;
	for (int j = 0; j < LN_TAPS; j++, q += c->across) {
		*sum += k[j] * *q;
		*square += *q ? k[j] * k[j] : 0;
	}
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

ln_stretch ln_settle(const ln_work *w, ln_stretch s, const int16_t *weights, int32_t reach, double step, int32_t sign, ln_total *best) {
	ln_stretch out = s;
	double most = -1e30;
	for (int i = -reach; i <= reach; i++)
		for (int j = -reach; j <= reach; j++) {
			ln_stretch k = s;
			k.ca += i * step;
			k.cb += j * step;
			const ln_total t = ln_sum(w, k, weights);
			const double v = t.weight > 0 ? sign * t.sum / __builtin_sqrt(t.weight) : -1e30;
			if (v > most) {
				most = v;
				out = k;
				*best = t;
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
