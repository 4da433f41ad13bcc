/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_EVENT_H
#define DRIVETRIAL_EVENT_H
/*
 * Latencies of events seen by polling, as guaranteed intervals.
 *
 * A value returned at [sent, received] was true inside it, or as much earlier
 * as refresh and delay say. An event first seen in row k happened after the
 * begin of the row before it and before the end of row k; a cause is in effect
 * from an instant in [earliest, latest] of its mark. So
 *     latency in [max(0, earliest of row k-1 - latest of the mark),
 *                 latest of row k - earliest of the mark].
 * No distribution is assumed. It holds if the indication is held until it is
 * read, and all times are of one clock. Missing rows only widen it.
 */
#include "window.h"

struct latency {
	bool known;              /* low and high say something */
	bool seen;               /* false: not until the rows ended; high is INFINITY */
	double value, low, high; /* s */
	size_t before, after;    /* rows of `rows`; after only where seen */
	char note[224];
};

/* Rows of a channel from shortly before a mark to a time. -1: ERR_NOMEM. */
int event_rows(const struct check_input *in, int channel, const struct mark *mark, int64_t to_ns,
               struct rows *ret_rows, struct err *reterr);
/* Number of rows that were surely true before the mark. */
size_t event_rows_before(const struct rows *rows, const struct mark *mark);

/*
 * The first change of a channel of codes after the mark, from what it last
 * showed before the mark. Not known where there is no row before the mark.
 */
void event_change(const struct rows *rows, const struct mark *mark, struct latency *ret_latency);

/*
 * The last instant at which |value| was above the level, before it stays below
 * for at least dwell_ns. Not known where |value| was not surely above the
 * level just before the mark.
 */
void event_off(const struct rows *rows, const struct mark *mark, double level, int64_t dwell_ns,
               struct latency *ret_latency);

/* -1: |value| of the row is surely below the level; +1: surely above; 0: neither. */
int event_side(const struct rows *rows, size_t row, double level);

#endif
