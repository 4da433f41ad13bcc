/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_COMPARISON_H
#define DRIVETRIAL_COMPARISON_H
/*
 * Two or more runs side by side, metric by metric, from their results.json.
 *
 * The change is last minus first. It is significant where it is larger than
 * the uncertainties of both, combined: as the root of the sum of squares of
 * the two expanded uncertainties (JCGM 100:2008, 5.1.2, for values that do not
 * depend on each other), or, where one of the two is a guaranteed interval, as
 * their sum. Errors that both runs share (the same instrument) are counted
 * twice so: a change that is called significant is one, a small one may be
 * missed.
 *
 * It is worse where the value moved significantly towards or beyond its limit,
 * by more than `share` of the margin that it had. A verdict that fell from
 * pass is worse, whatever the numbers.
 *
 * Everything lives in the arena. Single-threaded.
 */
#include "report_text.h"

enum { COMPARED_RUNS_MOST = 32 };

struct compared_run {
	const char *path, *started, *rig, *verdict, *identities;
	bool rehearsal, partial;
};

struct compared_value {
	bool there;              /* the run has this metric */
	double value, low, high; /* NaN, infinite: not known */
	double min, max;         /* infinite: open */
	bool guaranteed;         /* coverage 1 */
	const char *verdict;     /* NULL: not judged */
};

struct compared_metric {
	const char *suite, *test, *check, *name, *unit, *evidence;
	struct compared_value *values; /* one per run */
	double change, uncertainty;    /* NaN: not known */
	bool significant, worse, flipped, limit_changed;
	double margin_before, margin_after; /* in the metric's unit; NaN: no limit, or not known */
	double lost;                        /* share of the margin before; NaN */
	/* Three runs or more: the straight line through the values, per run. */
	double slope, slope_uncertainty;
	bool trend;
};

struct compared_test {
	const char *suite, *test;
	const char **verdicts; /* one per run; NULL: the run does not have it */
	bool flipped, worse;
};

struct comparison {
	double share;
	struct compared_run *runs;
	size_t run_count;
	struct compared_metric *metrics;
	size_t metric_count;
	struct compared_test *tests;
	size_t test_count;
	size_t significant, worse, flips, missing; /* worse: metrics and tests */
};

/* "rise_time" of "SPD-01": worse enough that the program ends with 1. */
bool comparison_is_worse(const struct comparison *comparison);

/*
 * Reads results.json of each folder; that SHA256SUMS is right is the caller's
 * to know. Errors: ERR_FILE (not there, none of this program's), ERR_NOMEM.
 */
int comparison_make(const char *const *paths, size_t count, double share, struct arena *arena,
                    struct comparison *ret_comparison, struct err *reterr);

/* all: also what did not change. */
void comparison_print(const struct comparison *comparison, bool all, FILE *out);
/* The whole file's bytes, to be freed; NULL: no memory. */
char *comparison_json(const struct comparison *comparison);
/* Into the folder, with report.css beside it where there is none. */
int comparison_html(const struct comparison *comparison, const struct run_folder *folder,
                    const char *name, struct err *reterr);

#endif
