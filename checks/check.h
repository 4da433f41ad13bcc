/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CHECK_H
#define DRIVETRIAL_CHECK_H
/*
 * Checks: pure functions from samples, marks, nameplate and fields to metrics.
 *
 * Each kind is one file that ends with one const `struct check_kind`, and one
 * row in check_list.h. No clock, no file, no thread, no Modbus, no YAML.
 *
 * A metric is an interval [low, high] with a value inside. What cannot be
 * measured is no error: low = -INFINITY, high = INFINITY, value NaN and a
 * note; the decision then is inconclusive, whatever the limit. A yes/no metric
 * has the value 1 or 0; unknown is [0, 1] with value NaN.
 *
 *     struct check_input in = {...};
 *     struct metric metrics[CHECK_METRICS_MOST];
 *     size_t count;
 *     if (kind->evaluate(&in, params, metrics, &count, &err) < 0) ... (a fault of the program
 *                                                                      or of memory)
 */
#include "arena.h"
#include "err.h"
#include "field.h"
#include "machine.h"
#include "samples.h"

enum { CHECK_METRICS_MOST = 24, CHECK_POINTS_MOST = 6 };

enum metric_shape {
	METRIC_TIME = 0,   /* ns in the metric's value as seconds: value, low, high in s */
	METRIC_LEVEL,      /* in the unit of the field "channel" */
	METRIC_PERCENT,    /* value in %: 4.3 means 4.3 % */
	METRIC_ANGLE_ELEC, /* in deg, electrical */
	METRIC_ANGLE_MECH, /* in deg, mechanical */
	METRIC_COUNT,      /* a plain number */
	METRIC_YES_NO,     /* 1 or 0; limits are written `is: yes` or `is: no` */
	METRIC_LEVEL_TIME, /* unit of the channel times seconds (areas) */
};

struct metric_kind {
	const char *name;
	enum metric_shape shape;
	const char *text; /* one line: what is measured, with its formula */
	/* Fields that may stand inside the metric's limit (band: 2 %), in params; or NULL. */
	const struct field_table *options;
};

/* Where a metric lies, for plots: a point or, with a second time, a stretch. */
struct metric_point {
	const char *label;
	int64_t earliest_ns, latest_ns;
	double level; /* in the channel's unit; NaN: none */
};

struct metric {
	const struct metric_kind *kind;
	double value, low, high; /* in `unit` */
	double coverage;         /* 0.95, or 1 for guaranteed bounds */
	const struct unit *unit;
	enum evidence evidence;
	char note[256]; /* why it is unknown, or what widened it; may be empty */
	struct metric_point points[CHECK_POINTS_MOST];
	size_t point_count;
};

/* The samples that a check judges: a window after a mark. */
struct window {
	int from;         /* index of a mark; -1: the begin of the test */
	int64_t after_ns; /* from the mark's latest instant */
	int64_t for_ns;   /* length; 0: to the end of the test */
};

enum condition_kind { CONDITION_IS = 0, CONDITION_ABOVE, CONDITION_BELOW, CONDITION_BETWEEN };

/* A condition on one channel; a and b are in the channel's unit. */
struct condition {
	int channel; /* -1: absent */
	enum condition_kind kind;
	double a, b;    /* is: a; above: a; below: a; between: [a, b] inclusive */
	int64_t for_ns; /* dwell: holds for at least this long */
};

/* True where the value fulfils the condition; NaN fulfils none. */
bool condition_holds(const struct condition *condition, double value);

/* An assignment that the stimulus made: known to be in effect from an instant in the interval. */
struct command {
	int channel;
	double value; /* in the channel's unit */
	int64_t earliest_ns, latest_ns;
};

struct check_input {
	/* One per channel of the rig, in the rig's order; rows == 0: not sampled. */
	const struct series *series;
	const struct channel_info *channels;
	size_t channel_count;
	const struct mark *marks; /* of this test, in the order of the suite */
	size_t mark_count;
	const struct outcome *outcomes;
	size_t outcome_count;
	const struct command *commands; /* of this test, in the order in which they were made */
	size_t command_count;
	const struct machine *machine;
	int64_t begin_ns, end_ns; /* of the test's stimulus */
	int64_t sample_ns;        /* the interval that the suite asked for */
	struct arena *scratch;    /* cleared by the caller after each check */
};

struct check_kind {
	const char *name;
	const char *text; /* one line */
	const struct field_table *fields;
	/*
	 * The loader zeroes params, sets what is absent (channels, marks and
	 * condition.channel -1, levels NaN, a window {-1, 0, 0}), then applies
	 * the defaults of the fields and of the metrics' options.
	 */
	size_t params_size;
	const struct metric_kind *metrics;
	size_t metric_count;
	/*
	 * Fills ret_metrics (one per row of `metrics`, in that order) and
	 * *ret_count. Returns -1 only where memory ran out or the caller broke
	 * the contract. Missing or bad data is no error.
	 */
	int (*evaluate)(const struct check_input *in, const void *params, struct metric *ret_metrics,
	                size_t *ret_count, struct err *reterr);
	/*
	 * Refuses fields that contradict each other (a one-sentence message in
	 * reterr, no position), or NULL.
	 */
	int (*verify)(const void *params, const struct channel_info *channels,
	              const struct machine *machine, struct err *reterr);
};

/* All kinds, in the order of check_list.h. */
const struct check_kind *const *check_table(size_t *ret_count);
const struct check_kind *check_find(const char *name, size_t length);

/* A metric that is not known, with its reason. */
void metric_unknown(struct metric *metric, const struct metric_kind *kind, const struct unit *unit,
                    enum evidence evidence, const char *format, ...)
    __attribute__((format(printf, 5, 6)));

#endif
