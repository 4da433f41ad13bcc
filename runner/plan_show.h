/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PLAN_SHOW_H
#define DRIVETRIAL_PLAN_SHOW_H
/* The plan of a run, for people and as JSON, with the nearest remedy for what cannot be decided. */
#include "plan_forecast.h"
#include "text.h"

struct plan_limit {
	const struct check_use *use;
	const struct limit *limit;
	struct answered answered;
	double known;     /* NaN: none */
	char remedy[320]; /* "" where decidable */
};

struct plan_row {
	struct plan_test plan;
	struct plan_limit *limits;
	size_t limit_count;
};

struct plan {
	const struct bench_timing *timing;
	struct plan_row *rows;
	size_t count;
	int64_t whole_ns, whole_most_ns;
	size_t decidable, open, undecidable, none;
	const char *known_path; /* the earlier run, or NULL */
};

/* What stands in the way, and what would help; into limit->remedy. Errors: ERR_NOMEM. */
int plan_remedy(const struct forecast_case *c, struct plan_limit *limit, struct arena *arena,
                struct err *reterr);

void plan_show(const struct plan *plan, struct text *out);
/* Errors: ERR_NOMEM. */
int plan_json(const struct plan *plan, struct text *out, struct err *reterr);

#endif
