// The snr plane evaluated in floats, pixel for pixel as the reference does, but only
// where it is asked for.
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "correct.h"
#include "label.h"
#include "parts.h"
#include "signal.h"
#include "spans.h"

// rows is a growing list of spans by row.
typedef struct {
	pg_span *at;
	int64_t count, room;
	int32_t *start; // height + 1
} rows;

static int rows_add(rows *r, int y, int x0, int x1) {
	if (r->count == r->room) {
		int64_t room = r->room + r->room / 4 + 1024;
		if (room > INT32_MAX)
			return PG_NO_MEMORY;
		pg_span *at = realloc(r->at, sizeof(pg_span) * (size_t)room);
		if (!at)
			return PG_NO_MEMORY;
		r->at = at, r->room = room;
	}
	r->at[r->count++] = (pg_span){y, x0, x1};
	return PG_OK;
}

// merged adds to r the union of the spans of rows y − 2 to y + 2 of from, grown by grow
// px along x, as spans of row y.
static int merged(rows *r, const rows *from, int height, int y, int grow) {
	int64_t at[5], end[5];
	for (int k = 0; k < 5; k++) {
		int v = y - 2 + k, in = v >= 0 && v < height;
		at[k] = in ? from->start[v] : 0, end[k] = in ? from->start[v + 1] : 0;
	}
	for (int x0 = -1, x1 = -1;;) {
		int best = -1;
		for (int k = 0; k < 5; k++)
			if (at[k] < end[k] && (best < 0 || from->at[at[k]].x0 < from->at[at[best]].x0))
				best = k;
		if (best < 0)
			return x1 > x0 ? rows_add(r, y, x0, x1) : PG_OK;
		const pg_span *p = from->at + at[best]++;
		if (p->x0 - grow > x1 || x1 == -1) {
			if (x1 > x0 && rows_add(r, y, x0, x1))
				return PG_NO_MEMORY;
			x0 = p->x0 - grow, x1 = p->x1 + grow;
		} else if (p->x1 + grow > x1) {
			x1 = p->x1 + grow;
		}
	}
}

// worth_a_look writes the candidate runs of sets that may reach the high threshold.
static int worth_a_look(const pg_frame *f, const pg_runs *c, rows *out) {
	int32_t *label = malloc(sizeof(int32_t) * (size_t)(c->count + 1));
	uint8_t *high = calloc((size_t)c->count / 8 + 1, 1); // a bit for each set
	int e = label && high && out->start ? PG_OK : PG_NO_MEMORY;
	if (!e) {
		pg_label(c->at, c->count, label);
		for (int64_t i = 0; i < c->count; i++)
			high[label[i] / 8] |= (uint8_t)(c->at[i].high << label[i] % 8);
	}
	int64_t i = 0;
	for (int y = 0; y < f->height && !e; y++) {
		out->start[y] = (int32_t)out->count;
		for (; i < c->count && (int)c->at[i].y == y && !e; i++)
			if (high[label[i] / 8] >> label[i] % 8 & 1)
				e = rows_add(out, y, c->at[i].x0, c->at[i].x1);
		out->start[y + 1] = (int32_t)out->count;
	}
	free(label);
	free(high);
	return e;
}

// region_part keeps what of row y's spans from at on lies in the region.
static int region_part(const pg_frame *f, rows *r, int64_t at, int y) {
	int n, m = (int)(r->count - at);
	const pg_span *p = spans_of(f, y, &n);
	pg_span *copy = malloc(sizeof(pg_span) * (size_t)(m + 1));
	if (!copy)
		return PG_NO_MEMORY;
	memcpy(copy, r->at + at, sizeof(pg_span) * (size_t)m);
	r->count = at;
	int e = PG_OK;
	for (int i = 0, j = 0; i < m && j < n && !e;) {
		int x0 = copy[i].x0 > p[j].x0 ? copy[i].x0 : p[j].x0, x1 = copy[i].x1 < p[j].x1 ? copy[i].x1 : p[j].x1;
		if (x0 < x1)
			e = rows_add(r, y, x0, x1);
		if (copy[i].x1 < p[j].x1)
			i++;
		else
			j++;
	}
	free(copy);
	return e;
}

// taken notes how much memory a step of the search takes at most: bytes beside the blobs'.
static void taken(pg_blobs *b, int64_t bytes) {
	bytes += pg_blobs_bytes(b);
	b->peak = bytes > b->peak ? bytes : b->peak;
}

// candidates turns b's candidates, which it frees, into spans of those worth a look.
static int candidates(const pg_frame *f, pg_blobs *b, rows *out) {
	pg_runs *c = &b->candidates;
	pg_run *less = c->count > 0 ? realloc(c->at, sizeof(pg_run) * (size_t)c->count) : 0;
	if (less)
		c->at = less, c->room = c->count;
	int e = worth_a_look(f, c, out);
	taken(b, (int64_t)sizeof(int32_t) * (f->height + c->count) + c->count / 8 + (int64_t)sizeof(pg_span) * out->room);
	free(c->at);
	*c = (pg_runs){0};
	return e;
}

// wanted writes where the snr plane is to be evaluated: around the candidates, or with
// all in the whole region. out's start and at are to be freed.
static int wanted(const pg_frame *f, pg_blobs *b, int all, rows *out) {
	rows near = {.start = calloc((size_t)f->height + 1, sizeof(int32_t))};
	int e = near.start ? candidates(f, b, &near) : PG_NO_MEMORY;
	out->start = calloc((size_t)f->height + 1, sizeof(int32_t));
	e = e || out->start ? e : PG_NO_MEMORY;
	for (int y = 0; y < f->height && !e; y++) {
		int n;
		const pg_span *p = spans_of(f, y, &n);
		int64_t at = out->count;
		out->start[y] = (int32_t)at;
		for (int i = 0; i < n && all && !e; i++)
			e = rows_add(out, y, p[i].x0, p[i].x1);
		if (!all && !e) {
			e = merged(out, &near, f->height, y, 2);
			e = e || out->count == at ? e : region_part(f, out, at, y);
		}
		out->start[y + 1] = (int32_t)out->count;
	}
	taken(b, 2 * (int64_t)sizeof(int32_t) * f->height + (int64_t)sizeof(pg_span) * (near.room + out->room));
	free(near.at);
	free(near.start);
	return e;
}

// line holds rows of floats that can be read 8 px beyond both ends.
typedef struct {
	float *signal, *ring[8], *out, *noise;
	uint16_t *counts;
	pg_span *a, *b;
	rows need;
	pg_patch *patch; // NULL: not kept
	int64_t lent, bytes; // by the band for these rows, or taken for them beside it
} line;

static const float weights[5] = {1.f / 16, 4.f / 16, 6.f / 16, 4.f / 16, 1.f / 16};

static void along(float *restrict dst, const float *restrict s, int x0, int x1) {
	for (int x = x0; x < x1; x++)
		dst[x] = weights[0] * (s[x - 2] + s[x + 2]) + weights[1] * (s[x - 1] + s[x + 1]) + weights[2] * s[x];
}

// PATCH_SHARE of the frame's pixels at most are kept; what lies beyond is evaluated anew
// where it is measured.
#define PATCH_SHARE (1. / 1024)

// keep copies the signal of a span of row y to the patch, as long as there is room.
static int keep(pg_patch *p, const float *signal, pg_span s) {
	int64_t n = s.x1 - s.x0;
	if (p->used + n > p->most)
		return PG_OK;
	if (p->used + n > p->values_room) {
		int64_t room = p->values_room + p->values_room / 8 + n + 4096;
		float *v = realloc(p->values, sizeof(float) * (size_t)room);
		if (!v)
			return PG_NO_MEMORY;
		p->values = v, p->values_room = room;
	}
	if (p->count == p->room) {
		int64_t room = p->room + p->room / 4 + 1024;
		pg_span *spans = realloc(p->spans, sizeof(pg_span) * (size_t)room);
		p->spans = spans ? spans : p->spans;
		int32_t *first = spans ? realloc(p->first, sizeof(int32_t) * (size_t)room) : 0;
		if (!first)
			return PG_NO_MEMORY;
		p->first = first, p->room = room;
	}
	memcpy(p->values + p->used, signal + s.x0, sizeof(float) * (size_t)n);
	p->first[p->count] = (int32_t)p->used;
	p->spans[p->count++] = s;
	p->used += n;
	return PG_OK;
}

// filter_row makes the ring's row y where rows y − 2 to y + 2 of spans need it.
PG_WHOLE int filter_row(const pg_frame *f, const pg_grid *g, const rows *spans, line *l, int y) {
	if (y < 0 || y >= f->height)
		return PG_OK;
	l->need.count = 0;
	if (merged(&l->need, spans, f->height, y, 2))
		return PG_NO_MEMORY;
	if (l->patch)
		l->patch->start[2 * y] = (int32_t)l->patch->count;
	for (int64_t i = 0; i < l->need.count; i++) {
		pg_span p = l->need.at[i];
		signal_row(f, g, l->signal, l->counts, y, p.x0, p.x1);
		if (l->patch && keep(l->patch, l->signal, p))
			return PG_NO_MEMORY;
		along(l->ring[y & 7], l->signal, p.x0 + 2, p.x1 - 2);
	}
	if (l->patch)
		l->patch->start[2 * y + 1] = (int32_t)l->patch->count;
	return PG_OK;
}

static void down(const pg_frame *f, line *l, int y, int x0, int x1) {
	float *restrict out = l->out;
	for (int x = x0; x < x1; x++)
		out[x] = 0;
	for (int k = 0; k < 5; k++) {
		int v = y - 2 + k;
		if (v < 0 || v >= f->height)
			continue;
		const float *restrict r = l->ring[v & 7], w = weights[k];
		for (int x = x0; x < x1; x++)
			out[x] += w * r[x];
	}
}

static int in_region(const pg_frame *f, int x, int y) {
	int n, a = 0;
	const pg_span *p = spans_of(f, y, &n);
	while (a < n) {
		int m = (a + n) / 2;
		if (x < p[m].x0)
			n = m;
		else if (x >= p[m].x1)
			a = m + 1;
		else
			return 1;
	}
	return 0;
}

static float edge_scale(const pg_frame *f, int x, int y) {
	double sum = 0;
	for (int dy = -2; dy <= 2; dy++)
		for (int dx = -2; dx <= 2; dx++)
			if (in_region(f, x + dx, y + dy)) {
				double w = (double)(weights[dx + 2] * weights[dy + 2]);
				sum += w * w;
			}
	return (float)(PG_GAIN / sqrt(sum));
}

// rescale corrects the pixels of x0 … x1 whose 5 × 5 are not all in the region: those in
// none of the n inner spans.
static void rescale(const pg_frame *f, line *l, int n, int y, int x0, int x1) {
	for (int i = 0, x = x0; x < x1; x++) {
		while (i < n && l->a[i].x1 <= x)
			i++;
		if (i < n && l->a[i].x0 <= x)
			x = l->a[i].x1 - 1;
		else
			l->out[x] *= edge_scale(f, x, y);
	}
}

static void to_snr(const pg_frame *f, line *l, int x0, int x1) {
	float *restrict out = l->out;
	const float *restrict noise = l->noise;
	for (int x = x0; x < x1; x++) {
		float v = noise[x] > 0 ? out[x] / ((float)PG_GAIN * noise[x]) : 0;
		out[x] = f->polarity > 0 ? v : f->polarity < 0 || v < 0 ? -v : v;
	}
}

static int above(const pg_frame *f, const line *l, pg_runs *runs, int y, int x0, int x1) {
	const float low = (float)f->low, high = (float)f->high;
	for (int x = x0; x < x1; x++)
		if (l->out[x] >= low && pg_run_add(runs, y, x, x + 1, l->out[x] >= high))
			return PG_NO_MEMORY;
	return PG_OK;
}

// peaks[k] is the highest value of run k and where; runs from first on lie in row y.
static int note_peaks(const line *l, const pg_runs *runs, int64_t first, float **peaks, int64_t *room) {
	if (runs->count > *room) {
		int64_t n = runs->count + runs->count / 4 + 1024;
		float *p = realloc(*peaks, sizeof(float) * 2 * (size_t)n);
		if (!p)
			return PG_NO_MEMORY;
		*peaks = p, *room = n;
	}
	for (int64_t i = first; i < runs->count; i++) {
		float top = 0;
		int at = runs->at[i].x0;
		for (int x = at; x < runs->at[i].x1; x++)
			if (l->out[x] > top)
				top = l->out[x], at = x;
		(*peaks)[2 * i] = top, (*peaks)[2 * i + 1] = (float)at;
	}
	return PG_OK;
}

// snr_span evaluates x0 … x1 of row y to l->out; inner spans as for rescale.
PG_WHOLE void snr_span(const pg_frame *f, const pg_grid *g, line *l, int inner, int y, int x0, int x1) {
	down(f, l, y, x0, x1);
	rescale(f, l, inner, y, x0, x1);
	noise_row(f, g, l->noise, y, x0, x1);
	to_snr(f, l, x0, x1);
}

enum { ROWS_AHEAD = 8 };

// ask_row asks for the memory that the spans of row y will need beside that of the rows
// above: two rows further down, and all five where a span is the first of its column.
static void ask_row(const pg_frame *f, const rows *spans, int y) {
	if (y >= f->height)
		return;
	int64_t above = y > 0 ? spans->start[y - 1] : 0, end = spans->start[y];
	for (int64_t i = end; i < spans->start[y + 1]; i++) {
		const pg_span p = spans->at[i];
		while (above < end && spans->at[above].x1 <= p.x0)
			above++;
		for (int k = above < end && spans->at[above].x0 < p.x1 ? 2 : -2; k <= 2; k++)
			pg_ask_span(f, y + k, p.x0 - 4, p.x1 + 4);
	}
}

static int evaluate(const pg_frame *f, const pg_grid *g, const rows *spans, line *l, pg_runs *runs, float **peaks, float *snr) {
	int64_t room = 0;
	int next = 0; // first row that the ring does not hold yet
	for (int y = 0; y < f->height; y++) {
		ask_row(f, spans, y + ROWS_AHEAD);
		if (spans->start[y] == spans->start[y + 1])
			continue;
		for (next = next > y - 2 ? next : y - 2; next <= y + 2; next++)
			if (filter_row(f, g, spans, l, next))
				return PG_NO_MEMORY;
		int inner = span_inner(f, y, &l->a, &l->b);
		int64_t first = runs->count;
		for (int64_t i = spans->start[y]; i < spans->start[y + 1]; i++) {
			int x0 = spans->at[i].x0, x1 = spans->at[i].x1;
			snr_span(f, g, l, inner, y, x0, x1);
			if (snr)
				memcpy(snr + (int64_t)y * f->width + x0, l->out + x0, sizeof(float) * (size_t)(x1 - x0));
			if (above(f, l, runs, y, x0, x1))
				return PG_NO_MEMORY;
		}
		if (note_peaks(l, runs, first, peaks, &room))
			return PG_NO_MEMORY;
	}
	return PG_OK;
}

static void add_run(pg_blob *o, const pg_run *r, float peak, int x) {
	if (o->runs++ == 0)
		o->x0 = r->x0, o->x1 = r->x1, o->y0 = (int32_t)r->y;
	o->x0 = r->x0 < o->x0 ? r->x0 : o->x0;
	o->x1 = r->x1 > o->x1 ? r->x1 : o->x1;
	o->y1 = (int32_t)r->y + 1;
	o->area += r->x1 - r->x0;
	if (peak > o->peak)
		o->peak = peak, o->peak_x = x, o->peak_y = (int32_t)r->y;
}

// gather makes blobs of labelled runs and puts their runs together.
static int gather(const pg_frame *f, pg_blobs *b, const pg_runs *runs, const float *peaks, const int32_t *label, int64_t sets, int area) {
	pg_blob *all = calloc((size_t)sets + 1, sizeof(pg_blob));
	if (!all)
		return PG_NO_MEMORY;
	for (int64_t i = 0; i < runs->count; i++)
		add_run(all + label[i], runs->at + i, peaks[2 * i], (int)peaks[2 * i + 1]);
	int64_t total = 0;
	b->count = 0;
	for (int64_t k = 0; k < sets; k++) {
		int keep = all[k].peak >= (float)f->high && all[k].area >= area;
		all[k].first = keep ? total : -1;
		total += keep ? all[k].runs : 0;
		b->count += keep;
	}
	while (b->runs.room < total)
		if (pg_grow(&b->runs))
			break;
	free(b->blobs);
	b->blobs = malloc(sizeof(pg_blob) * (size_t)(b->count + 1));
	b->room = b->count + 1;
	int e = b->blobs && b->runs.room >= total ? PG_OK : PG_NO_MEMORY;
	for (int64_t k = 0, n = 0; k < sets && !e; k++)
		if (all[k].first >= 0)
			b->blobs[n++] = all[k];
	for (int64_t i = 0; i < runs->count && !e; i++)
		if (all[label[i]].first >= 0)
			b->runs.at[all[label[i]].first++] = runs->at[i];
	b->runs.count = total;
	b->count = e ? 0 : b->count;
	free(all);
	return e;
}

// line_rows carves the buffers of l out of the band's memory, which is free by now, or
// where that is too small out of a block that is to be freed.
static int line_rows(const pg_frame *f, pg_band *band, line *l, void **block) {
	const size_t n = ((size_t)f->width + 31) / 16 * 16, bytes = n * (11 * sizeof(float) + 2 + sizeof(pg_span));
	char *p = pg_band_room(band, (int64_t)bytes);
	l->lent = p ? (int64_t)bytes : 0, l->bytes = p ? 0 : (int64_t)bytes;
	if (!p)
		p = *block = malloc(bytes);
	if (!p)
		return PG_NO_MEMORY;
	memset(p, 0, bytes);
	float *r = (float *)(void *)p + 8;
	l->signal = r, l->out = r + n, l->noise = r + 2 * n;
	for (size_t k = 0; k < 8; k++)
		l->ring[k] = r + (3 + k) * n;
	l->a = (pg_span *)(void *)(p + 11 * sizeof(float) * n);
	l->b = l->a + n / 2;
	l->counts = (uint16_t *)(void *)(p + (11 * sizeof(float) + sizeof(pg_span)) * n);
	return PG_OK;
}

// give_back leaves the band's memory as the next pass wants it: zero beside the rows.
static void give_back(pg_band *band, const line *l, void *block) {
	if (l->lent > 0)
		memset(pg_band_room(band, l->lent), 0, (size_t)l->lent);
	free(block);
}

int pg_find(const pg_frame *f, const pg_grid *g, pg_band *band, pg_blobs *b, int32_t area, float *snr) {
	rows spans = {0};
	line l = {0};
	pg_runs runs = {0};
	float *peaks = 0;
	int32_t *label = 0;
	void *block = 0;
	int e = wanted(f, b, snr != 0, &spans);
	e = e ? e : line_rows(f, band, &l, &block);
	if (!snr && !e) {
		b->patch.start = calloc((size_t)f->height, 2 * sizeof(int32_t));
		l.patch = &b->patch;
		b->patch.most = (int64_t)(PATCH_SHARE * f->width * f->height);
		e = b->patch.start ? PG_OK : PG_NO_MEMORY;
	}
	e = e ? e : evaluate(f, g, &spans, &l, &runs, &peaks, snr);
	taken(b, (int64_t)sizeof(pg_span) * (spans.room + l.need.room) + 4 * (int64_t)f->height + 20 * runs.room + l.bytes);
	free(spans.at);
	free(spans.start);
	free(l.need.at);
	give_back(band, &l, block);
	if (!e) {
		label = malloc(sizeof(int32_t) * (size_t)(runs.count + 1));
		e = label ? gather(f, b, &runs, peaks, label, pg_label(runs.at, runs.count, label), area) : PG_NO_MEMORY;
	}
	taken(b, 20 * runs.room);
	free(label);
	free(peaks);
	free(runs.at);
	return e;
}
