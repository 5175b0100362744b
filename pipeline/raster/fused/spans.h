// Arithmetic on sorted spans.
#ifndef LAPGATE_SPANS_H
#define LAPGATE_SPANS_H

#include "pass.h"

PG_INLINE const pg_span *spans_of(const pg_frame *f, int y, int *n) {
	if (y < 0 || y >= f->height) {
		*n = 0;
		return 0;
	}
	*n = f->span_start[y + 1] - f->span_start[y];
	return f->spans + f->span_start[y];
}

// span_meet writes the parts of n spans a that lie within m spans b shrunk by less px.
static inline int span_meet(pg_span *dst, const pg_span *a, int n, const pg_span *b, int m, int less) {
	int count = 0;
	for (int i = 0, j = 0; i < n && j < m;) {
		int x0 = a[i].x0 > b[j].x0 + less ? a[i].x0 : b[j].x0 + less, x1 = a[i].x1 < b[j].x1 - less ? a[i].x1 : b[j].x1 - less;
		if (x0 < x1)
			dst[count++] = (pg_span){a[i].y, x0, x1};
		if (a[i].x1 < b[j].x1 - less)
			i++;
		else
			j++;
	}
	return count;
}

// span_inner_one is span_inner where each of the five rows has one span, and −1 elsewhere.
PG_INLINE int span_inner_one(const pg_frame *f, int y, pg_span *dst) {
	if (y < 2 || y + 2 >= f->height)
		return -1;
	const int32_t *start = f->span_start + y - 2;
	const pg_span *p = f->spans + start[0];
	if (start[1] - start[0] != 1 || start[2] - start[1] != 1 || start[3] - start[2] != 1 || start[4] - start[3] != 1 || start[5] - start[4] != 1)
		return -1;
	int x0 = p->x0, x1 = p->x1;
	for (int k = 1; k < 5; k++) {
		x0 = p[k].x0 > x0 ? p[k].x0 : x0;
		x1 = p[k].x1 < x1 ? p[k].x1 : x1;
	}
	*dst = (pg_span){y, x0 + 2, x1 - 2};
	return x0 + 2 < x1 - 2;
}

// span_inner is where in row y all of 5 × 5 pixels lie in the region. a and b hold a row;
// the result is in *a.
static inline int span_inner(const pg_frame *f, int y, pg_span **a, pg_span **b) {
	int n = span_inner_one(f, y, *a);
	if (n >= 0)
		return n;
	const pg_span *p = spans_of(f, y, &n);
	n = span_meet(*a, p, n, p, n, 2);
	for (int k = -2; k <= 2 && n > 0; k++) {
		int m;
		const pg_span *q = spans_of(f, y + k, &m);
		if (k == 0)
			continue;
		n = span_meet(*b, *a, n, q, m, 2);
		pg_span *t = *a;
		*a = *b, *b = t;
	}
	return n;
}

#endif
