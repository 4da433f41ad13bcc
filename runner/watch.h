/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_WATCH_H
#define DRIVETRIAL_WATCH_H
/*
 * A condition followed row by row while the bench runs: an interlock, an
 * await, or an event that sets a mark. Pure state; the worker that reads the
 * channel feeds it, under the worker's mutex.
 *
 * An await holds only on what was measured: the condition was true on every
 * row of a stretch that surely lasted `for`. An interlock is violated as soon
 * as it may have been untrue for `for`. A missing value restarts an await and
 * leaves an interlock as it is (a silent link has its own interlock).
 */
#include "check.h"

enum watch_kind { WATCH_AWAIT = 0, WATCH_INTERLOCK };

struct watch {
	enum watch_kind kind;
	struct condition condition;
	bool active, fired;
	int64_t not_before_ns; /* rows whose value may be older do not count */
	bool have_false;
	int64_t false_earliest_ns; /* of the last row on which it was surely not true */
	bool in_stretch;
	int64_t first_earliest_ns, first_latest_ns;   /* of the first row of the stretch */
	int64_t became_earliest_ns, became_latest_ns; /* when fired: in which it became true */
	double value;                                 /* the last value seen; NaN none */
	size_t rows;                                  /* good rows seen */
};

void watch_start(struct watch *watch, enum watch_kind kind, const struct condition *condition,
                 int64_t not_before_ns);
/* One row; NaN is missing. [earliest, latest]: when the value was true. */
void watch_row(struct watch *watch, int64_t earliest_ns, int64_t latest_ns, double value);

#endif
