/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SAMPLES_H
#define DRIVETRIAL_SAMPLES_H
/*
 * What was read: rows with an earliest and a latest time, then values.
 *
 * A block is what one transaction brings again and again: its channels were
 * read together. A series is one column of a block, seen in place: the rows
 * may lie in a mapped file (structured rows, a stride apart) or in plain
 * arrays. Values are in the channel's own unit; NaN is a missing value.
 *
 * Times are int64 nanoseconds since the start of the run. The block stores
 * when the request was sent and when its reply was there; the time at which
 * the *value* was true is wider, by what the device and instrument add:
 *     [request sent - refresh - delay.most, reply received - delay.least]
 * Only series_earliest() and series_latest() give that interval.
 *
 * Everything here is read-only and pure.
 */
#include <math.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "quantity.h"

enum evidence { EVIDENCE_INDEPENDENT = 0, EVIDENCE_SELF_REPORTED };

/* Limits of error of an instrument: |error| <= of_reading*|value| + of_range*range + absolute. */
struct accuracy {
	double of_reading; /* share, 0.002 for 0.2 % */
	double of_range;   /* share of range */
	double range;      /* in the channel's unit */
	double absolute;   /* in the channel's unit */
	bool given;
	int64_t calibrated_until_day; /* days since 1970-01-01; 0: not given */
	bool calibration_required;
};

/* What a check knows about a channel. Borrowed from the rig; never changes. */
struct channel_info {
	const char *name;
	const char *device;      /* name; for a derived channel that of its first input */
	const struct unit *unit; /* never NULL; unit_one() where there is none */
	double resolution;       /* one step of the coding, in `unit`; 0: continuous */
	double wraps;            /* modulus in `unit`: counters, angles; 0: does not wrap */
	int64_t refresh_ns;      /* how old the device's own value may be */
	int64_t delay_least_ns, delay_most_ns; /* of the instrument */
	struct accuracy accuracy;
	enum evidence evidence;
	/* Named values, as in names: {0: none, 3: encoder_loss}; count may be 0. */
	const double *named_values;
	const char *const *value_names;
	size_t name_count;
};

/* A stretch of rows [first, last] that is no measurement, and why. */
struct bad_rows {
	size_t first, last;
	const char *why; /* "the life counter of controller stands" */
};

struct series {
	const struct channel_info *channel;
	size_t rows;
	const unsigned char *row0;               /* the first row */
	size_t stride;                           /* bytes from row to row */
	size_t earliest_at, latest_at, value_at; /* byte offsets in a row */
	int block;                               /* equal numbers: read in one transaction */
	const struct bad_rows *bad;
	size_t bad_count;
	/*
	 * Extra half-width of a value, in the channel's unit, beyond resolution
	 * and accuracy: what derivation from unequal times or tolerances adds.
	 * NULL: none. Else one per row.
	 */
	const double *extra;
};

static inline int64_t series_sent(const struct series *series, size_t row)
{
	int64_t ns;
	__builtin_memcpy(&ns, series->row0 + row * series->stride + series->earliest_at, sizeof ns);
	return ns;
}

static inline int64_t series_received(const struct series *series, size_t row)
{
	int64_t ns;
	__builtin_memcpy(&ns, series->row0 + row * series->stride + series->latest_at, sizeof ns);
	return ns;
}

/* Earliest and latest instant at which the value of a row was true. */
static inline int64_t series_earliest(const struct series *series, size_t row)
{
	return series_sent(series, row) - series->channel->refresh_ns - series->channel->delay_most_ns;
}

static inline int64_t series_latest(const struct series *series, size_t row)
{
	return series_received(series, row) - series->channel->delay_least_ns;
}

static inline double series_value(const struct series *series, size_t row)
{
	double value;
	__builtin_memcpy(&value, series->row0 + row * series->stride + series->value_at, sizeof value);
	return value;
}

/* First row whose received time is >= t_ns (rows if none). Binary search; rows must be in order. */
size_t series_first_at(const struct series *series, int64_t t_ns);

/*
 * Looks through rows [first, last] for what makes them no measurement: NaN,
 * rows out of order or with latest < earliest, repeated rows, bad rows, a gap
 * between neighbours longer than gap_most_ns (0: not asked). Returns true and
 * writes one sentence into why[size] when something is found.
 */
bool series_fault(const struct series *series, size_t first, size_t last, int64_t gap_most_ns,
                  char *why, size_t size);

/*
 * Limits of error of one value that averaging does not reduce, in the
 * channel's unit: accuracy plus extra. The resolution is apart:
 * half of channel->resolution.
 */
double series_error_limit(const struct series *series, size_t row);

/* The name of a value (0 -> "none"), or NULL. */
const char *channel_value_name(const struct channel_info *channel, double value);

/* A named instant of the run, known as an interval. */
struct mark {
	const char *name;
	int64_t earliest_ns, latest_ns;
	bool reached; /* false: the run ended before it */
};

/* What became of an `attempt`: a request that must be refused. */
enum outcome_status {
	OUTCOME_ACCEPTED = 0, /* answered as if it were allowed */
	OUTCOME_EXCEPTION,    /* refused with a Modbus exception */
	OUTCOME_NO_REPLY,
	OUTCOME_NOT_MADE, /* the run ended before it */
};

struct outcome {
	const char *name; /* of the attempt step */
	enum outcome_status status;
	int exception;          /* the code received, where status is OUTCOME_EXCEPTION */
	int expected_exception; /* 0: any */
	int64_t sent_ns, received_ns;
};

/* A name for a Modbus exception code: 2 -> "illegal data address". Static. */
const char *modbus_exception_name(int code);

#endif
