// Long blobs measured along their own course: raster's line, on strips.
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "measure.h"

enum { PATH = 64, BINS = 81 };
static const double profile_step = 0.5;

// A long blob in coordinates along (t) and across (s) its long axis.
typedef struct {
	const window *w;
	double x, y, cos, sin, bin, per_px, t0; // per_px: bins a pixel
	int n;
	double flux[PATH + 2], cross[PATH + 2];
} line;

#define ALONG(l, k, u) (((u) - (l)->x) * (l)->cos + ((l)->w->y0 + (k) - (l)->y) * (l)->sin)
#define ACROSS(l, k, u) (((l)->w->y0 + (k) - (l)->y) * (l)->cos - ((u) - (l)->x) * (l)->sin)

static void start(line *l, const window *w, const shape *s) {
	*l = (line){.w = w, .x = s->x, .y = s->y, .t0 = INFINITY};
	double angle = s->angle * 3.14159265358979323846 / 180, t1 = -INFINITY;
	l->cos = cos(angle), l->sin = sin(angle);
	EACH_FOOT(w, k, u) {
		double t = ALONG(l, k, u);
		l->t0 = t < l->t0 ? t : l->t0, t1 = t > t1 ? t : t1;
	}
	l->bin = fmax(4, (t1 - l->t0) / PATH);
	l->per_px = 1 / l->bin;
	l->n = (int)((t1 - l->t0) * l->per_px) + 1;
	EACH_FOOT(w, k, u) {
		int i = (int)((ALONG(l, k, u) - l->t0) * l->per_px);
		double v = w->signal[w->at[k] + u];
		l->flux[i] += v;
		l->cross[i] += v * ACROSS(l, k, u);
	}
}

static int by_value(const void *a, const void *b) {
	double x = *(const double *)a, y = *(const double *)b;
	return x < y ? -1 : x > y;
}

double course_median(double *v, int n) {
	qsort(v, (size_t)n, sizeof(double), by_value);
	return (v[n / 2] + v[(n - 1) / 2]) / 2;
}

static double mid(const line *l, int k) { return l->t0 + (k + 0.5) * l->bin; }

static void settle(line *l, double least) {
	double last = 0;
	for (int k = 0; k < l->n; k++) {
		if (l->flux[k] >= least)
			last = l->cross[k] / l->flux[k];
		l->cross[k] = last;
	}
	double before = l->cross[0];
	for (int k = 1; k + 1 < l->n; k++) {
		double rough = l->cross[k];
		l->cross[k] = (before + 2 * rough + l->cross[k + 1]) / 4;
		before = rough;
	}
}

static double crossing(const line *l, int in, int out, double half) {
	double f = out >= 0 && out < l->n ? l->flux[out] : 0;
	return mid(l, in) + (l->flux[in] - half) / (l->flux[in] - f) * (out - in) * l->bin;
}

// ends finds where the flux rises to half its median and falls from it.
static int ends(line *l, double *a, double *b) {
	double top = l->flux[0], high[PATH + 2];
	for (int k = 0; k < l->n; k++)
		top = fmax(top, l->flux[k]);
	int n = 0, first = -1, last = -1;
	for (int k = 0; k < l->n; k++)
		if (l->flux[k] > 0.2 * top)
			high[n++] = l->flux[k];
	if (n < 3)
		return 0;
	double half = course_median(high, n) / 2;
	if (half <= 0)
		return 0;
	settle(l, half / 2);
	for (int k = 0; k < l->n; k++)
		if (l->flux[k] >= half) {
			last = k;
			first = first < 0 ? k : first;
		}
	*a = crossing(l, first, first - 1, half), *b = crossing(l, last, last + 1, half);
	return last > first;
}

static double across(const line *l, double t, int first, int last) {
	double c = (t - l->t0) * l->per_px - 0.5;
	int k = c < 0 ? -1 : (int)c; // below 0 all is as first or before it
	int top = last - 1 > first ? last - 1 : first;
	k = k < first ? first : k > top ? top : k;
	int n = k + 1 < last ? k + 1 : last;
	double part = c - k;
	part = part < -1 ? -1 : part > 2 ? 2 : part;
	return l->cross[k] + part * (l->cross[n] - l->cross[k]);
}

// course_at returns the course's place across at t, and its slope over t ± 1.
PG_INLINE double course_at(const line *l, double t, int first, int last, double *slope) {
	const double c = (t - l->t0) * l->per_px - 0.5, pixel = l->per_px;
	const int k = (int)c;
	if (c < first + 1 || k + 2 > last) { // t ± 1 may lie beyond the ends
		*slope = (across(l, t + 1, first, last) - across(l, t - 1, first, last)) / 2;
		return across(l, t, first, last);
	}
	const double part = c - k, *p = l->cross + k, step = p[1] - p[0];
	const double down = part - pixel, up = part + pixel - 1; // how far t − 1 and t + 1 lie beyond the bins about t
	*slope = ((1 + up - down) * step + (up > 0 ? up : 0) * (p[2] - p[1] - step) - (down < 0 ? down : 0) * (p[0] - p[-1] - step)) / 2;
	return p[0] + part * step;
}

static void inner(const line *l, double a, double b, int *first, int *last) {
	double low = ceil((a - l->t0) / l->bin - 0.5), high = floor((b - l->t0) / l->bin - 0.5);
	*first = low < 0 ? 0 : (int)low;
	*last = high > l->n - 1 ? l->n - 1 : (int)high;
	*last = *last > *first ? *last : *first;
	*last = *last > l->n - 1 ? l->n - 1 : *last;
	*first = *first > *last ? *last : *first;
}

static int add_point(const line *l, double *path, int n, double t, double s) {
	path[2 * n] = l->x + t * l->cos - s * l->sin;
	path[2 * n + 1] = l->y + t * l->sin + s * l->cos;
	return n + 1;
}

static int path_of(const line *l, double a, double b, double *path, double *length) {
	int first, last, n = 0;
	inner(l, a, b, &first, &last);
	n = add_point(l, path, n, a, across(l, a, first, last));
	for (int k = first; k <= last; k++)
		if (mid(l, k) > a && mid(l, k) < b)
			n = add_point(l, path, n, mid(l, k), l->cross[k]);
	n = add_point(l, path, n, b, across(l, b, first, last));
	*length = 0;
	for (int i = 1; i < n; i++)
		*length += hypot(path[2 * i] - path[2 * i - 2], path[2 * i + 1] - path[2 * i - 1]);
	return n;
}

// full_width is that at half height of a profile that is highest near its middle.
static int full_width(const double *v, int n, double step, double *width) {
	int top = n / 2;
	for (int k = n / 2 - 4; k <= n / 2 + 4; k++)
		top = v[k] > v[top] ? k : top;
	double half = v[top] / 2;
	if (half <= 0)
		return 0;
	*width = 0;
	for (int dir = -1; dir <= 1; dir += 2) {
		int k = top;
		while (k + dir >= 0 && k + dir < n && v[k + dir] >= half)
			k += dir;
		if (k + dir < 0 || k + dir >= n)
			return 0;
		*width += abs(k - top) + (v[k] - half) / (v[k] - v[k + dir]);
	}
	*width *= step;
	return 1;
}

// spread turns shares split between the two nearest bins into what a triangle over two
// bins to either side gives: the triangle is straight between bins, so that nothing is lost.
static void spread(double *v) {
	double before = 0;
	for (int i = 0; i < BINS; i++) {
		double own = v[i + 1];
		v[i] = own + (before + v[i + 2]) / 2;
		before = own;
	}
}

static int width_of(const line *l, double a, double b, double *width) {
	double sum[BINS + 2] = {0}, n[BINS + 2] = {0}; // one more bin at either end
	int first, last;
	inner(l, a, b, &first, &last);
	EACH_FOOT(l->w, k, u) {
		double t = ALONG(l, k, u);
		if (t < a || t > b)
			continue;
		double slope, middle = course_at(l, t, first, last, &slope);
		double places = (ACROSS(l, k, u) - middle) / (profile_step * sqrt(1 + slope * slope)) + BINS / 2 + 1;
		if (places < 0 || places >= BINS + 1)
			continue;
		int at = (int)places;
		double share = places - at, v = (double)l->w->signal[l->w->at[k] + u];
		sum[at] += (1 - share) * v, n[at] += 1 - share;
		sum[at + 1] += share * v, n[at + 1] += share;
	}
	spread(sum);
	spread(n);
	for (int i = 0; i < BINS; i++)
		sum[i] = n[i] > 0 ? sum[i] / n[i] : 0;
	return full_width(sum, BINS, profile_step, width);
}

void course_follow(const window *w, const shape *s, pg_measure *out) {
	line l;
	double a, b, length, width, path[2 * PG_PATH];
	start(&l, w, s);
	if (!ends(&l, &a, &b))
		return;
	int n = path_of(&l, a, b, path, &length);
	if (!width_of(&l, a, b, &width) || length <= width)
		return;
	out->is_long = 1, out->length = length, out->width = width, out->points = n;
	memcpy(out->path, path, sizeof(double) * 2 * (size_t)n);
}
