/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_WINDOW_H
#define DRIVETRIAL_WINDOW_H
/*
 * Which rows a check judges. A row belongs to a span of time when its whole
 * interval lies in it. Rows that are no measurement (NaN, bad rows) are left
 * out and counted; what they leave is a gap, and the gap is what matters: each
 * check decides whether it lies where its answer lies. Rows out of order or
 * standing twice spoil the whole range, for then nobody knows when anything
 * was.
 *
 * Without missing rows the series is used in place; else the rows that remain
 * are copied to scratch memory.
 */
#include "check.h"
#include "statistics.h"

struct span {
	int64_t from_ns, to_ns;
};

struct rows {
	bool usable;   /* false: `why` says what is wrong and what to do */
	char why[224]; /* one sentence */
	struct series series;
	size_t first, count;
	size_t missing;            /* rows that were left out */
	int64_t gap_ns, gap_at_ns; /* longest time without a sample, and where it begins */
	int64_t interval_ns;       /* mean time from sample to sample */
	struct span span;
};

/* The span of a window: [latest of the mark + after, ... + for], cut at the end of the stimulus.
 * False where the mark was not reached or nothing is left; why[size] says so. */
bool window_span(const struct check_input *in, const struct window *window, struct span *ret_span,
                 char *why, size_t size);

/* The rows of a channel in a span. -1 with ERR_NOMEM only; else look at `usable`. */
int rows_take(const struct check_input *in, int channel, struct span span, struct rows *ret_rows,
              struct err *reterr);

/* Longest time without a sample that still counts as sampled: five intervals. */
int64_t rows_gap_limit(const struct check_input *in, const struct rows *rows);
/* Whether the rows have a gap beyond that; then why[size] says so. */
bool rows_have_gap(const struct check_input *in, const struct rows *rows, char *why, size_t size);

/*
 * The same between the rows [begin, end), and from the last of them to to_ns
 * where that is later.
 */
bool rows_gap_within(const struct check_input *in, const struct rows *rows, size_t begin,
                     size_t end, int64_t to_ns, char *why, size_t size);

/* Stretch over rows [begin, end) of the taken ones, with times from origin_ns. */
struct stretch rows_stretch(const struct rows *rows, size_t begin, size_t end, int64_t origin_ns);
/* Largest limit of error in [begin, end). */
double rows_error_limit(const struct rows *rows, size_t begin, size_t end);

/*
 * The value commanded when a span begins; false with why[size] where none was,
 * or another came within the span.
 */
bool command_constant(const struct check_input *in, int channel, struct span span,
                      double *ret_value, char *why, size_t size);

/* The mark of an index, or NULL with why[size] where it was not reached. */
const struct mark *mark_reached(const struct check_input *in, int mark, char *why, size_t size);

#endif
