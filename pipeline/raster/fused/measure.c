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

// region bounds what reaches half in each row by m0 and m1, empty rows by m0 = m1, and
// leaves depth 0 outside.
static void region(const window *w, float half) {
	EACH_ROW(w, k) {
		const float *v = w->smooth + w->at[k];
		int a = w->f0[k], b = w->f1[k];
		for (int x = w->m0[k]; x < w->m1[k]; x++)
			w->depth[w->at[k] + x] = 0;
		while (a < b && v[a] < half)
			a++;
		while (b > a && v[b - 1] < half)
			b--;
		w->m0[k] = a, w->m1[k] = b;
	}
}

#define DIAGONAL 1.41421356f

PG_INLINE float lesser(float a, float b) { return a < b ? a : b; }

// beside is the least distance of a pixel by its three neighbours in row k.
PG_INLINE float beside(const window *w, const float *d, int k, int x) {
	if (w->clear) { // every neighbour of a foot pixel is in a strip
		const float *p = d + w->at[k] + x;
		return lesser(lesser(p[-1], p[1]) + DIAGONAL, p[0] + 1);
	}
	return lesser(lesser(value(w, d, k, x - 1), value(w, d, k, x + 1)) + DIAGONAL, value(w, d, k, x) + 1);
}

// depths writes each pixel's distance to the nearest one below half, by two passes over
// rows and diagonals (Borgefors 1986, with steps of 1 and the root of 2); returns the
// greatest.
static float depths(const window *w, float half) {
	float *d = w->depth, top = 0;
	region(w, half);
	EACH_ROW(w, k) {
		float last = 0;
		const float *v = w->smooth + w->at[k];
		for (int x = w->m0[k]; x < w->m1[k]; x++) {
			float next = lesser(beside(w, d, k - 1, x), last + 1);
			d[w->at[k] + x] = last = v[x] >= half ? next : 0;
		}
	}
	for (int k = w->rows - 1; k >= 0; k--) {
		float last = 0;
		for (int x = w->m1[k] - 1; x >= w->m0[k]; x--) {
			float *p = d + w->at[k] + x;
			last = lesser(lesser(beside(w, d, k + 1, x), last + 1), *p);
			*p = last;
			top = last > top ? last : top;
		}
	}
	return top;
}

static double plateau(const window *w, double half) {
	float least = 0.75f * depths(w, (float)half);
	double sum = 0, n = 0;
	EACH_ROW(w, k) for (int x = w->m0[k]; x < w->m1[k]; x++) {
		float d = w->depth[w->at[k] + x];
		if (d > 0 && d >= least)
			sum += (double)w->smooth[w->at[k] + x], n++;
	}
	return n == 0 ? 2 * half : sum / n;
}

// add_edge adds what an edge from a to b of a polygon does to its moments.
PG_INLINE void add_edge(sums *m, const double *a, const double *b) {
	double cross = a[0] * b[1] - b[0] * a[1];
	m->a += cross / 2;
	m->x += cross * (a[0] + b[0]) / 6;
	m->y += cross * (a[1] + b[1]) / 6;
	m->xx += cross * (a[0] * a[0] + a[0] * b[0] + b[0] * b[0]) / 12;
	m->yy += cross * (a[1] * a[1] + a[1] * b[1] + b[1] * b[1]) / 12;
	m->xy += cross * (a[0] * b[1] + 2 * a[0] * a[1] + 2 * b[0] * b[1] + b[0] * a[1]) / 24;
}

// add_whole adds the unit squares of row y from x = a to before b.
static void add_whole(sums *m, double a, double b, double y) {
	double n = b - a, x = n * (a + b - 1) / 2, xx = ((b - 1) * b * (2 * b - 1) - (a - 1) * a * (2 * a - 1)) / 6;
	m->a += n;
	m->x += x + n / 2, m->y += n * (y + 0.5);
	m->xx += xx + x + n / 3, m->xy += (x + n / 2) * (y + 0.5), m->yy += n * (y * y + y + 1. / 3);
}

// add_square adds the part at or above half of the unit square at (x, y) with these
// values at its corners, in turn about it, and returns the length of the contour in it:
// raster's squareContour.
static double add_square(sums *m, const float c[4], float half, double x, double y) {
	const double corner[4][2] = {{x, y}, {x + 1, y}, {x + 1, y + 1}, {x, y + 1}};
	double p[8][2], contour = 0;
	int n = 0, leaves[2], enters[2], out = 0, in = 0;
	for (int k = 0; k < 4; k++) {
		const int l = (k + 1) & 3;
		const double *q = corner[k], *r = corner[l];
		if (c[k] >= half)
			p[n][0] = q[0], p[n++][1] = q[1];
		if ((c[k] >= half) != (c[l] >= half)) {
			double f = (double)(half - c[k]) / (double)(c[l] - c[k]);
			if (c[k] >= half)
				leaves[out++] = n;
			else
				enters[in++] = n;
			p[n][0] = q[0] + f * (r[0] - q[0]), p[n++][1] = q[1] + f * (r[1] - q[1]);
		}
	}
	add_edge(m, p[n - 1], p[0]);
	for (int k = 1; k < n; k++)
		add_edge(m, p[k - 1], p[k]);
	const int first = enters[0] < leaves[0]; // a way in follows the way out
	for (int k = 0; k < out; k++) {
		const double *a = p[leaves[k]], *b = p[enters[first && k + 1 < in ? k + 1 : first ? 0 : k]];
		contour += sqrt((a[0] - b[0]) * (a[0] - b[0]) + (a[1] - b[1]) * (a[1] - b[1]));
	}
	return contour;
}

// above also returns the contour's length.
static sums above(const window *w, float half, double *contour) {
	sums m = {0};
	*contour = 0;
	region(w, half);
	for (int k = 0; k + 1 < w->rows; k++) {
		const double y = (double)(w->y0 + k);
		int a = w->x0[k] < w->x0[k + 1] ? w->x0[k] : w->x0[k + 1], b = w->x1[k] > w->x1[k + 1] ? w->x1[k] : w->x1[k + 1];
		int m0 = w->m0[k] < w->m0[k + 1] ? w->m0[k] : w->m0[k + 1], m1 = w->m1[k] > w->m1[k + 1] ? w->m1[k] : w->m1[k + 1];
		a = m0 - 1 > a ? m0 - 1 : a, b = m1 + 1 < b ? m1 + 1 : b;
		int whole = a; // start of the whole squares that are not yet added
		for (int x = a; x + 1 < b; x++) {
			float c[4] = {value(w, w->smooth, k, x), value(w, w->smooth, k, x + 1), value(w, w->smooth, k + 1, x + 1),
			              value(w, w->smooth, k + 1, x)};
			int corners = (c[0] >= half) + (c[1] >= half) + (c[2] >= half) + (c[3] >= half);
			if (corners == 4)
				continue;
			if (x > whole)
				add_whole(&m, whole, x, y);
			whole = x + 1;
			if (corners > 0)
				*contour += add_square(&m, c, half, (double)x, y);
		}
		if (b - 1 > whole)
			add_whole(&m, whole, b - 1, y);
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
