/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PLAN_TIMELINE_H
#define DRIVETRIAL_PLAN_TIMELINE_H
/*
 * What a test will do and when, as far as files say: how often each channel is
 * read, where the marks lie, how long it takes. Made from the same read plans
 * as a run (test_plans.c). Pure but for memory.
 */
#include "conductor_state.h"
#include "plan_timing.h"

struct plan_link {
	size_t transactions;             /* of a sample of the fastest group */
	int64_t wanted_ns;               /* the shortest interval asked for; 0: as fast as it goes */
	int64_t round_ns, round_most_ns; /* of all groups once */
	int64_t reach_ns, reach_most_ns; /* the interval of the fastest group */
};

/* How a channel is read during the test; derived ones take the worst of their inputs. */
struct plan_channel {
	bool read;
	int link;
	int64_t interval_ns, interval_most_ns; /* from row to row */
	int64_t row_ns, row_most_ns;           /* from request to reply */
};

struct plan_mark {
	bool set, certain;               /* certain: no await before it */
	int64_t at_ns;                   /* since the stimulus began, if awaits end at once */
	int64_t width_ns, width_most_ns; /* how far apart its earliest and latest instants lie */
	const struct step *step;         /* that bears it */
	double *before; /* a value per channel of the rig: commanded before it; NaN: nothing */
};

struct plan_test {
	const struct suite *suite;
	const struct test *test;
	struct plan_link *link;
	struct plan_channel *channel;
	struct plan_mark *mark; /* one a name in test->marks */
	int64_t stimulus_ns, stimulus_most_ns;
	int64_t whole_ns, whole_most_ns; /* with restore and the safe state after it */
	int64_t begin_ns;                /* since the run began, if nothing waits */
};

/* Everything in `arena`. Errors: ERR_NOMEM, and what test_plan_make refuses. */
int plan_test_make(const struct bench_timing *timing, const struct suite *suite,
                   const struct test *test, struct arena *arena, struct plan_test *ret,
                   struct err *reterr);
/* The interval that a link would reach if only some channels were asked for; 0: none of its. */
int plan_reach_alone(const struct bench_timing *timing, const struct test *test,
                     const int *channels, size_t count, int link, struct arena *arena,
                     int64_t *ret_ns, struct err *reterr);

#endif
