// The measures of raster.Measurer, on strips in place of rectangles.
#include <math.h>
#include <string.h>

#include "signal.h"
#include "window.h"

static const double pi = 3.14159265358979323846;

// COILED_PART is raster's coiledPart.
#define COILED_PART 0.6

typedef struct {
	double a, x, y, xx, xy, yy;
} sums;

static shape shape_of(const sums *m, double extra) {
	shape s = {0};
	if (m->a <= 0)
		return s;
	double x = m->x / m->a, y = m->y / m->a;
	double xx = m->xx / m->a - x * x + extra, yy = m->yy / m->a - y * y + extra, xy = m->xy / m->a - x * y;
	double half = (xx + yy) / 2, diff = (xx - yy) / 2, root = hypot(diff, xy), angle = atan2(xy, diff) / 2 * 180 / pi;
	return (shape){m->a, x, y, 4 * sqrt(fmax(half + root, 0)), 4 * sqrt(fmax(half - root, 0)), angle <= -90 ? angle + 180 : angle};
}

static shape shape_of_runs(const window *w) {
	sums m = {0};
	for (int64_t i = 0; i < w->count; i++) {
		double n = w->runs[i].x1 - w->runs[i].x0, y = w->runs[i].y, mid = (double)(w->runs[i].x0 + w->runs[i].x1 - 1) / 2;
		m.a += n, m.x += n * mid, m.y += n * y;
		m.xx += n * mid * mid + n * (n * n - 1) / 12, m.xy += n * mid * y, m.yy += n * y * y;
	}
	return shape_of(&m, 1. / 12);
}

PG_INLINE float value(const window *w, const float *v, int k, int x) {
	return k < 0 || k >= w->rows || x < w->x0[k] || x >= w->x1[k] ? 0 : v[w->at[k] + x];
}

static float least4(float a, float b, float c, float d) {
	a = a < b ? a : b, c = c < d ? c : d;
	return a < c ? a : c;
}

// chamfer is the distance of a pixel by its neighbours in its own row (dx) and in row k.
PG_INLINE float chamfer(const window *w, const float *d, int own, int k, int x, int dx) {
	const float diagonal = 1.41421356f;
	if (w->clear) { // every neighbour of a foot pixel is in a strip
		const float *p = d + w->at[k] + x;
		return least4(d[w->at[own] + x + dx] + 1, p[0] + 1, p[-1] + diagonal, p[1] + diagonal);
	}
	return least4(value(w, d, own, x + dx) + 1, value(w, d, k, x) + 1, value(w, d, k, x - 1) + diagonal, value(w, d, k, x + 1) + diagonal);
}

// depths writes each pixel's distance to the nearest one below half; returns the greatest.
static float depths(const window *w, float half) {
	float *d = w->depth, top = 0;
	EACH_ROW(w, k)
		memset(d + w->at[k] + w->x0[k], 0, sizeof(float) * (size_t)(w->x1[k] - w->x0[k]));
	EACH_ROW(w, k)
		for (int x = w->f0[k]; x < w->f1[k]; x++)
			if (w->smooth[w->at[k] + x] >= half)
				d[w->at[k] + x] = chamfer(w, d, k, k - 1, x, -1);
	for (int k = w->rows - 1; k >= 0; k--)
		for (int x = w->f1[k] - 1; x >= w->f0[k]; x--) {
			float *p = d + w->at[k] + x;
			if (*p <= 0)
				continue;
			float m = chamfer(w, d, k, k + 1, x, 1);
			*p = m < *p ? m : *p;
			top = *p > top ? *p : top;
		}
	return top;
}

static double plateau(const window *w, double half) {
	float least = 0.75f * depths(w, (float)half);
	double sum = 0, n = 0;
	EACH_ROW(w, k) for (int x = w->f0[k]; x < w->f1[k]; x++) {
		float d = w->depth[w->at[k] + x];
		if (d > 0 && d >= least)
			sum += (double)w->smooth[w->at[k] + x], n++;
	}
	return n == 0 ? 2 * half : sum / n;
}

static void add_polygon(sums *m, double (*p)[2], int n) {
	for (int i = 0; i < n; i++) {
		const double *a = p[i], *b = p[(i + 1) % n];
		double cross = a[0] * b[1] - b[0] * a[1];
		m->a += cross / 2;
		m->x += cross * (a[0] + b[0]) / 6;
		m->y += cross * (a[1] + b[1]) / 6;
		m->xx += cross * (a[0] * a[0] + a[0] * b[0] + b[0] * b[0]) / 12;
		m->yy += cross * (a[1] * a[1] + a[1] * b[1] + b[1] * b[1]) / 12;
		m->xy += cross * (a[0] * b[1] + 2 * a[0] * a[1] + 2 * b[0] * b[1] + b[0] * a[1]) / 24;
	}
}

// add_whole adds the unit square at (x, y).
PG_INLINE void add_whole(sums *m, double x, double y) {
	m->a += 1;
	m->x += x + 0.5, m->y += y + 0.5;
	m->xx += x * x + x + 1. / 3, m->xy += (x + 0.5) * (y + 0.5), m->yy += y * y + y + 1. / 3;
}

// add_square adds the part at or above half of the unit square at (x, y).
static void add_square(sums *m, const float c[4], float half, double x, double y) {
	const double corner[4][2] = {{x, y}, {x + 1, y}, {x + 1, y + 1}, {x, y + 1}};
	double p[8][2];
	int n = 0;
	for (int k = 0; k < 4; k++) {
		float a = c[k], b = c[(k + 1) % 4];
		const double *q = corner[k], *r = corner[(k + 1) % 4];
		if (a >= half)
			p[n][0] = q[0], p[n++][1] = q[1];
		if ((a >= half) != (b >= half)) {
			double f = (double)(half - a) / (double)(b - a);
			p[n][0] = q[0] + f * (r[0] - q[0]), p[n++][1] = q[1] + f * (r[1] - q[1]);
		}
	}
	add_polygon(m, p, n);
}

// square_contour is the length of the contour inside a unit square: raster's squareContour.
static double square_contour(const float c[4], float half) {
	static const double corner[4][2] = {{0, 0}, {1, 0}, {1, 1}, {0, 1}};
	double leaves[2][2], enters[2][2], total = 0;
	int n = 0, m = 0, first = 0;
	for (int k = 0; k < 4; k++) {
		float a = c[k], b = c[(k + 1) % 4];
		if ((a >= half) == (b >= half))
			continue;
		double f = (double)(half - a) / (double)(b - a);
		double *p = a >= half ? leaves[n++] : enters[m++];
		first = first || (a < half && n == 0);
		p[0] = corner[k][0] + f * (corner[(k + 1) % 4][0] - corner[k][0]);
		p[1] = corner[k][1] + f * (corner[(k + 1) % 4][1] - corner[k][1]);
	}
	for (int k = 0; k < n; k++) {
		int to = first ? (k + 1) % m : k;
		double dx = leaves[k][0] - enters[to][0], dy = leaves[k][1] - enters[to][1];
		total += sqrt(dx * dx + dy * dy);
	}
	return total;
}

// quiet reports whether the square at (x, k) is known to lie below half.
PG_INLINE int quiet(const window *w, int k, int x, float half) {
	if (!w->clear || x <= w->x0[k] || x <= w->x0[k + 1] || x + 1 >= w->x1[k] || x + 1 >= w->x1[k + 1])
		return 0;
	const float *p = w->smooth + w->at[k] + x, *q = w->smooth + w->at[k + 1] + x;
	return p[0] < half && p[1] < half && q[0] < half && q[1] < half;
}

// above also returns the contour's length.
static sums above(const window *w, float half, double *contour) {
	sums m = {0};
	*contour = 0;
	for (int k = 0; k + 1 < w->rows; k++) {
		int a = w->x0[k] < w->x0[k + 1] ? w->x0[k] : w->x0[k + 1], b = w->x1[k] > w->x1[k + 1] ? w->x1[k] : w->x1[k + 1];
		int f0 = w->f0[k] < w->f0[k + 1] ? w->f0[k] : w->f0[k + 1], f1 = w->f1[k] > w->f1[k + 1] ? w->f1[k] : w->f1[k + 1];
		a = f0 - 1 > a ? f0 - 1 : a, b = f1 + 1 < b ? f1 + 1 : b;
		for (int x = a; x + 1 < b; x++) {
			if (quiet(w, k, x, half))
				continue;
			float c[4] = {value(w, w->smooth, k, x), value(w, w->smooth, k, x + 1), value(w, w->smooth, k + 1, x + 1),
			              value(w, w->smooth, k + 1, x)};
			if (c[0] >= half && c[1] >= half && c[2] >= half && c[3] >= half)
				add_whole(&m, (double)x, (double)(w->y0 + k));
			else if (c[0] >= half || c[1] >= half || c[2] >= half || c[3] >= half)
				add_square(&m, c, half, (double)x, (double)(w->y0 + k)), *contour += square_contour(c, half);
		}
	}
	return m;
}

// half_height returns the plateau's height and the shape of the region above half of it.
static double half_height(const window *w, shape *s, double *contour) {
	double height = 0;
	EACH_FOOT(w, k, x) height = w->smooth[w->at[k] + x] > height ? w->smooth[w->at[k] + x] : height;
	for (int i = 0; i < 6; i++) {
		double next = plateau(w, height / 2), moved = fabs(next - height);
		int done = moved < 0.002 * height;
		height = next;
		if (done)
			break;
	}
	*s = (shape){0}, *contour = 0;
	if (height <= 0)
		return 0;
	sums m = above(w, (float)(height / 2), contour);
	*s = shape_of(&m, 0);
	return height;
}

static void flux(const window *w, pg_measure *out) {
	double variance = 0;
	float noise[64];
	EACH_ROW(w, k) for (int x = w->f0[k]; x < w->f1[k]; x += 64) {
		int end = x + 64 < w->f1[k] ? x + 64 : w->f1[k];
		noise_row(w->f, w->g, noise - x, w->y0 + k, x, end);
		for (int u = x; u < end; u++) {
			if (!w->foot[w->at[k] + u])
				continue;
			double v = w->signal[w->at[k] + u], n = noise[u - x];
			out->flux += v;
			out->peak = v > out->peak ? v : out->peak;
			variance += n * n;
		}
	}
	out->snr = variance > 0 ? out->flux / sqrt(variance) : 0;
}

// gravity is the plain first moment over the blob's pixels with positive signal.
static int gravity(const window *w, double *x, double *y) {
	double sum = 0;
	*x = *y = 0;
	for (int64_t i = 0; i < w->count; i++) {
		const float *s = w->signal + w->at[w->runs[i].y - w->y0];
		for (int u = w->runs[i].x0; u < w->runs[i].x1; u++) {
			double v = s[u] > 0 ? s[u] : 0;
			sum += v, *x += v * u, *y += v * w->runs[i].y;
		}
	}
	*x /= sum, *y /= sum;
	return sum > 0;
}

enum { BELL = 512 };

static void bell(double *e, int from, int n, double centre, double s) {
	for (int i = 0; i < n; i++)
		e[i] = exp(-(from + i - centre) * (from + i - centre) / (2 * s * s));
}

// windowed is the fixed point of the centre of gravity under a Gaussian window of sigma s.
static int windowed(const window *w, int x0, int columns, double *x, double *y, double s) {
	double across[BELL], down[BELL], sx = *x, sy = *y;
	if (columns > BELL || w->rows > BELL)
		return 0;
	for (int pass = 0; pass < 10; pass++) {
		double sum = 0, dx = 0, dy = 0;
		bell(across, x0, columns, *x, s);
		bell(down, w->y0, w->rows, *y, s);
		EACH_FOOT(w, k, u) {
			double v = across[u - x0] * down[k] * (double)w->signal[w->at[k] + u];
			sum += v, dx += v * (u - *x), dy += v * (w->y0 + k - *y);
		}
		if (sum <= 0)
			return 0;
		*x += 2 * dx / sum, *y += 2 * dy / sum;
		if (hypot(*x - sx, *y - sy) > s)
			return 0;
		if (hypot(dx, dy) < 1e-4 * sum)
			break;
	}
	return 1;
}

static void centre(const window *w, const shape *s, const pg_blob *o, pg_measure *out) {
	if (!gravity(w, &out->x, &out->y)) {
		shape r = shape_of_runs(w);
		out->x = r.x, out->y = r.y;
		return;
	}
	if (s->length > 2 * s->width)
		return;
	double d = sqrt(4 * s->area / pi) / 2.355, x = out->x, y = out->y;
	int x0 = o->x0 - 4;
	if (windowed(w, x0, o->x1 + 4 - x0, &x, &y, sqrt(fmax(d * d - 0.5, 0.5))))
		out->x = x, out->y = y;
}

// uncoil is raster's: the geodesic length and width of a thin blob that bends back.
static void uncoil(double contour, pg_measure *out) {
	double root = contour * contour / 16 - out->half_area;
	if (out->half_area <= 0 || root < 0)
		return;
	double length = contour / 4 + sqrt(root), width = out->half_area / length;
	if (length < 3 * width || width > COILED_PART * out->width)
		return;
	out->coiled = 1, out->length = length;
	out->width = sqrt(fmax(width * width - 4 * 0.693147180559945309, 0.25));
}

static void measure(const window *w, const pg_blob *o, pg_measure *out) {
	flux(w, out);
	shape s;
	double contour;
	out->height = half_height(w, &s, &contour);
	if (s.area <= 0 || s.width <= 0) {
		s = shape_of_runs(w);
		out->height = out->peak / 2;
		above(w, (float)(out->height / 2), &contour);
	}
	out->half_area = s.area, out->diameter = sqrt(4 * s.area / pi);
	out->length = s.length, out->width = s.width, out->angle = s.angle;
	centre(w, &s, o, out);
	if (s.length > 3 * s.width)
		course_follow(w, &s, out);
	uncoil(contour, out);
}

int pg_measure_blob(const pg_frame *f, const pg_grid *g, const pg_blobs *b, int64_t i, pg_measure *out) {
	memset(out, 0, sizeof(*out));
	window w;
	int e = window_cut(&w, f, g, b, i);
	if (!e) {
		out->dark = w.sign < 0;
		measure(&w, b->blobs + i, out);
	}
	window_free(&w);
	return e;
}
