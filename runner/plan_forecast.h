/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PLAN_FORECAST_H
#define DRIVETRIAL_PLAN_FORECAST_H
/*
 * What is to be expected of a limit before anything is measured: how far the
 * interval of a metric will reach beyond the truth, and so whether the limit
 * can be decided.
 *
 * A forecast at a true value v says that the metric's interval will lie within
 * [v - down, v + up], and reach at least down_least and up_least: what lies
 * between hangs on where samples fall. From it:
 *
 *   decided     any interval that may come is wholly inside or wholly outside
 *   open        it hangs on chance
 *   undecidable every interval that may come crosses the limit
 *
 * Where no value is known (from an earlier run), a limit counts as decidable
 * if conformity can surely be shown for at least half of what it allows.
 * Noise that the rig file does not know is not foreseen, unless an earlier
 * run shows it.
 */
#include "plan_timeline.h"

enum answer { ANSWER_DECIDABLE = 0, ANSWER_OPEN, ANSWER_UNDECIDABLE, ANSWER_NONE };

struct forecast_case {
	const struct bench_timing *timing;
	const struct plan_test *plan;
	const struct check_use *use;
	const struct limit *limit;
	double known;        /* an earlier run's value in the metric's unit; NaN: none */
	double known_u;      /* and its expanded uncertainty; NaN */
	double known_rise;   /* rise_time of the same check there, s; NaN */
	double known_spread; /* spread of the same check there, in its unit; NaN */
	int64_t interval_ns; /* 0: as planned; else what if samples came so often */
};

struct forecast {
	double up, down, up_least, down_least; /* in the metric's unit, not negative */
	bool impossible;                       /* unknown, whatever the value */
	bool chance;                           /* it may be unknown */
	char why[200];                         /* what limits it; "" where nothing notable */
	const char *formula;                   /* static: what the widths are made of */
};

/* At a true value. Pure. */
void forecast_at(const struct forecast_case *c, double value, struct forecast *ret);

struct answered {
	enum answer answer;
	double sure_from, sure_to; /* true values for which conformity will surely be shown */
	struct forecast forecast;  /* at the known value, or at that in the middle */
};
/* ANSWER_NONE: no forecast is known for this check. */
void forecast_answer(const struct forecast_case *c, struct answered *ret);

/* The channels that a check reads; ret: at least CHANNELS_OF_CHECK_MOST. */
enum { CHANNELS_OF_CHECK_MOST = 32 };
size_t check_channels(const struct check_use *use, int *ret_channels);

const char *answer_name(enum answer answer);

#endif
