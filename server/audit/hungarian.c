/* Shortest augmenting paths with potentials, in 128-bit integers so that no tie is ever decided by rounding. */
#include "server/audit/hungarian.h"

#include <stdbool.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

/* Rows and columns count from 1 inside; column 0 is the start of the path, row 0 means free. */
struct work {
	const audit_wide *weight;
	size_t rows, columns;
	audit_wide *row_potential, *column_potential, *slack;
	size_t *row_of, *previous;
	bool *used;
};

static const audit_wide far_away = (audit_wide)1 << 120;

/* One step of the search: marks column j0, relaxes from its row, returns the nearest open column. */
static size_t advance(struct work *w, size_t j0)
{
	w->used[j0] = true;
	const size_t i0 = w->row_of[j0];
	const audit_wide *row = w->weight + (i0 - 1) * w->columns;
	audit_wide delta = far_away;
	size_t next = 0;
	for (size_t j = 1; j <= w->columns; j++) {
		if (w->used[j])
			continue;
		const audit_wide cost = -row[j - 1] - w->row_potential[i0] - w->column_potential[j];
		if (cost < w->slack[j]) {
			w->slack[j] = cost;
			w->previous[j] = j0;
		}
		if (w->slack[j] < delta) {
			delta = w->slack[j];
			next = j;
		}
	}
	CHECK(next != 0);
	for (size_t j = 0; j <= w->columns; j++) {
		if (w->used[j]) {
			w->row_potential[w->row_of[j]] += delta;
			w->column_potential[j] -= delta;
		} else {
			w->slack[j] -= delta;
		}
	}
	return next;
}

static void place_row(struct work *w, size_t row)
{
	for (size_t j = 0; j <= w->columns; j++) {
		w->slack[j] = far_away;
		w->used[j] = false;
	}
	w->row_of[0] = row;
	size_t j0 = 0;
	do
		j0 = advance(w, j0);
	while (w->row_of[j0] != 0);
	while (j0 != 0) {
		const size_t from = w->previous[j0];
		w->row_of[j0] = w->row_of[from];
		j0 = from;
	}
}

void hungarian_assign(const audit_wide *weight, size_t rows, size_t columns, size_t *column_of)
{
	CHECK(rows <= columns);
	struct work w = {
	    .weight = weight,
	    .rows = rows,
	    .columns = columns,
	    .row_potential = QB_NEW_ARRAY(audit_wide, rows + 1),
	    .column_potential = QB_NEW_ARRAY(audit_wide, columns + 1),
	    .slack = QB_NEW_ARRAY(audit_wide, columns + 1),
	    .row_of = QB_NEW_ARRAY(size_t, columns + 1),
	    .previous = QB_NEW_ARRAY(size_t, columns + 1),
	    .used = QB_NEW_ARRAY(bool, columns + 1),
	};
	for (size_t row = 1; row <= rows; row++)
		place_row(&w, row);
	for (size_t j = 1; j <= columns; j++)
		if (w.row_of[j] != 0)
			column_of[w.row_of[j] - 1] = j - 1;
	qb_free(w.row_potential);
	qb_free(w.column_potential);
	qb_free(w.slack);
	qb_free(w.row_of);
	qb_free(w.previous);
	qb_free(w.used);
}
