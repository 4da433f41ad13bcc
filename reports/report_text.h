/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REPORT_TEXT_H
#define DRIVETRIAL_REPORT_TEXT_H
/*
 * How numbers, limits and the state of a run are put into words, the same in
 * every output. Pure. Private to this folder. Buffers always end in a NUL.
 */
#include "report.h"

/* In which unit a metric is shown: as the limit was written, else s, ms or us by its size. */
struct shown_unit {
	const char *name; /* "" for plain numbers */
	double factor;    /* from the metric's unit */
};
struct shown_unit metric_shown(const struct metric *metric, const struct limit *limit);

/* The larger distance of value to low and high; infinite where one of them is. */
double metric_uncertainty(const struct metric *metric);
/* "96.2", "yes", "unknown". */
const char *value_text(const struct metric *metric, struct shown_unit shown, char *buffer,
                       size_t size);
/* "94.1 to 98.4", "at least 94.1", "nothing is known"; "" where it is the value itself. */
const char *interval_text(const struct metric *metric, struct shown_unit shown, char *buffer,
                          size_t size);
/* "at most 120", "-5 to 5", "is yes"; without the unit. */
const char *limit_text(const struct metric *metric, const struct limit *limit,
                       struct shown_unit shown, char *buffer, size_t size);
/* A number as somebody wrote it: no digits for what binary fractions add. */
const char *plain_text(double value, char *buffer, size_t size);
const char *evidence_name(enum evidence evidence); /* "independent", "self-reported" */
const char *test_end_name(enum test_end end);      /* "completed", ... as in the journal */

/* The channel that a check is about: its field "channel", else the first that it has; -1: none. */
int use_channel(const struct check_use *use);
/*
 * How far the value lies inside its limit: the distance to the nearer bound,
 * in % of half the width between two bounds, else of the bound itself (of 1
 * where that is 0). Below zero it lies outside; NaN: no bound or no value.
 */
double margin_percent(double value, double min, double max);
/* The least margin of all limits of a test, and whose it is; NaN: none is known. */
double test_margin(const struct test_result *test, const struct metric_result **ret_metric);
/* How many tests of the suites are selected, bench tests not counted; *ret_all of how many. */
size_t run_selected(const struct run_result *run, size_t *ret_all);
/* Whether a value of a suite was overridden. */
bool run_overridden(const struct run_result *run);
/* The worst verdict of all tests; pass only where every selected test passed. */
enum verdict run_verdict(const struct run_result *run);
/* Of error tests: "aborted", "precondition", "await-expired", "not-reached", "error". */
const char *error_sort(const struct test_result *test);
/* Name of a suite, unique in the run: NAME, NAME#2. */
const char *suite_label(const struct run_result *run, size_t suite, char *buffer, size_t size);
/* "2.4 s"-like length of a test's stimulus in seconds; 0 where it was not begun. */
double test_seconds(const struct test_result *test);

#endif
