// Labels of runs, and the lists of blobs.
#include <stdlib.h>
#include <string.h>

#include "label.h"
#include "parts.h"

static int32_t root_of(int32_t *parent, int32_t i) {
	while (parent[i] != i) {
		parent[i] = parent[parent[i]];
		i = parent[i];
	}
	return i;
}

int64_t pg_label(const pg_run *runs, int64_t n, int32_t *label) {
	int64_t above = 0, sets = 0;
	for (int64_t i = 0; i < n; i++) {
		label[i] = (int32_t)i;
		while (runs[above].y < runs[i].y - 1 || (runs[above].y == runs[i].y - 1 && runs[above].x1 < runs[i].x0))
			above++;
		for (int64_t j = above; runs[j].y == runs[i].y - 1 && runs[j].x0 <= runs[i].x1; j++) {
			int32_t a = root_of(label, (int32_t)i), b = root_of(label, (int32_t)j);
			label[a > b ? a : b] = a > b ? b : a;
		}
	}
	for (int64_t i = 0; i < n; i++) // a root stands before its set, and is numbered first
		label[i] = label[i] == (int32_t)i ? (int32_t)(-1 - sets++) : label[label[i]];
	for (int64_t i = 0; i < n; i++)
		label[i] = -1 - label[i];
	return sets;
}

pg_blobs *pg_blobs_new(void) { return calloc(1, sizeof(pg_blobs)); }

static void drop_patch(pg_patch *p) {
	free(p->spans);
	free(p->start);
	free(p->first);
	free(p->values);
	*p = (pg_patch){0};
}

static void drop_index(pg_blobs *b) {
	free(b->row_start);
	free(b->by_row);
	free(b->owner);
	b->row_start = 0, b->by_row = 0, b->owner = 0;
}

void pg_blobs_free(pg_blobs *b) {
	if (b) {
		drop_index(b);
		drop_patch(&b->patch);
		free(b->blobs);
		free(b->candidates.at);
		free(b->runs.at);
		free(b);
	}
}

int64_t pg_blobs_bytes(const pg_blobs *b) {
	return (int64_t)sizeof(pg_run) * (b->candidates.room + b->runs.room) + (int64_t)sizeof(pg_blob) * b->room + 8 * b->runs.count +
	       16 * b->patch.room + 4 * b->patch.values_room;
}

int pg_collect(pg_blobs *b, pg_band *band) {
	pg_runs *r = &b->candidates;
	if (r->room == 0) { // the first band's runs are taken as they are
		*r = band->runs;
		band->runs = (pg_runs){0};
		return PG_OK;
	}
	while (r->room < r->count + band->runs.count)
		if (pg_grow(r))
			return PG_NO_MEMORY;
	if (band->runs.count > 0)
		memcpy(r->at + r->count, band->runs.at, sizeof(pg_run) * (size_t)band->runs.count);
	r->count += band->runs.count;
	return r->count > INT32_MAX / 8 ? PG_NO_MEMORY : PG_OK;
}

void pg_spans(const pg_run *runs, int64_t n, pg_span *out) {
	for (int64_t i = 0; i < n; i++)
		out[i] = (pg_span){(int32_t)runs[i].y, runs[i].x0, runs[i].x1};
}

void pg_keep(pg_blobs *b, const uint8_t *keep) {
	int64_t n = 0, runs = 0;
	for (int64_t i = 0; i < b->count; i++) {
		if (!keep[i])
			continue;
		pg_blob o = b->blobs[i];
		memmove(b->runs.at + runs, b->runs.at + o.first, sizeof(pg_run) * (size_t)o.runs);
		o.first = runs;
		runs += o.runs;
		b->blobs[n++] = o;
	}
	b->count = n, b->runs.count = runs;
}

int pg_index(const pg_frame *f, pg_blobs *b) {
	drop_index(b);
	int64_t n = b->runs.count;
	b->row_start = calloc((size_t)f->height + 2, sizeof(int64_t));
	b->by_row = malloc(sizeof(int32_t) * (size_t)(n + 1));
	b->owner = malloc(sizeof(int32_t) * (size_t)(n + 1));
	if (!b->row_start || !b->by_row || !b->owner)
		return PG_NO_MEMORY;
	for (int64_t i = 0; i < b->count; i++)
		for (int64_t k = 0; k < b->blobs[i].runs; k++)
			b->owner[b->blobs[i].first + k] = (int32_t)i;
	for (int64_t i = 0; i < n; i++)
		b->row_start[b->runs.at[i].y + 2]++;
	for (int y = 0; y < f->height; y++)
		b->row_start[y + 2] += b->row_start[y + 1];
	for (int64_t i = 0; i < n; i++)
		b->by_row[b->row_start[b->runs.at[i].y + 1]++] = (int32_t)i;
	return PG_OK;
}
