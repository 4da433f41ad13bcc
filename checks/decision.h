/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_DECISION_H
#define DRIVETRIAL_DECISION_H
/*
 * From a metric and a limit to a verdict.
 *
 * guarded: pass if [low, high] lies inside the limits, fail if it lies wholly
 *   outside, else inconclusive. The guard band equals the expanded
 *   uncertainty (w = U in the terms of ILAC-G8:09/2019 4.2.3 and JCGM 106).
 * simple: by the value alone (w = 0, ILAC-G8 4.2.1); unknown stays
 *   inconclusive.
 * Pure.
 */
#include "check.h"

enum verdict {
	VERDICT_PASS = 0,
	VERDICT_FAIL,
	VERDICT_INCONCLUSIVE,
	VERDICT_ERROR,
	VERDICT_SKIPPED,
};

enum decision_rule { DECISION_GUARDED = 0, DECISION_SIMPLE };

struct limit {
	int metric;      /* row of the check's metrics */
	double min, max; /* in the metric's unit; -INFINITY, INFINITY where open */
	enum decision_rule rule;
	const char *requirement;       /* NULL: that of the test */
	const struct unit *shown_unit; /* as the user wrote it; NULL: the metric's */
};

/*
 * The verdict of one metric against one limit, with one sentence (numbers,
 * unit, what decided) in reason[size].
 */
enum verdict decide(const struct metric *metric, const struct limit *limit, char *reason,
                    size_t size);

/* "pass", "fail", "inconclusive", "error", "skipped". Static. */
const char *verdict_name(enum verdict verdict);
/* The worse of two; error is worse than inconclusive, fail worst of all. */
enum verdict verdict_worse(enum verdict a, enum verdict b);

#endif
