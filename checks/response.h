/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RESPONSE_H
#define DRIVETRIAL_RESPONSE_H
/*
 * The shape of a step response between two known levels: times of crossings,
 * peak, swing back, last entry into a band. The levels and the noise come from
 * the caller, who has proven them.
 *
 * Values are turned so that the step goes up: y' = direction * y. Times are
 * seconds from the middle of the mark. Pure; reads the rows in place.
 */
#include "crossing.h"

struct response {
	struct stretch rows; /* from before the step to the end of what is judged */
	double mark_half;    /* the mark lies in [-mark_half, mark_half] */
	int direction;       /* +1 or -1: the sign of the step */
	double initial, initial_u, final, final_u;
	double noise, nu;   /* of a row, quantisation included */
	double independent; /* share of rows that are independent, 0 to 1 */
	double resolution;  /* of the channel */
	double hundred;     /* what 100 % are, in the channel's unit; positive */
	bool of_step;       /* hundred is the measured step, and shares its uncertainty */
	double error_limit; /* limits of error of a row, already in the levels' uncertainty */
	int64_t gap_most;   /* ns */
};

/* What was measured: known, then the value and its interval; else `why`. */
struct measured {
	bool known;
	double value, low, high, coverage;
	double at_low, at_high; /* s: where it lies, for plots */
	double level;
	char why[224];
};

/* From the mark to the first crossing of a level, given as a part of the step. */
void response_crossing(const struct response *response, double part, struct measured *ret);
/* From the crossing of one part to that of another. */
void response_transition(const struct response *response, double from, double to,
                         struct measured *ret);
/*
 * The peak beyond the final value (percent of `hundred`), its time, and the
 * swing back after it. A peak that noise alone could make counts as none: its
 * interval then begins at 0 and its time is not known.
 */
void response_peak(const struct response *response, struct measured *ret_over,
                   struct measured *ret_time, struct measured *ret_under);
/*
 * The last entry into the band of half-width band * hundred. Where the values
 * leave it up to the end, low is the observed time and high INFINITY.
 */
void response_settling(const struct response *response, double band, struct measured *ret);

/*
 * Index of the last row after which the rows still spread over more than
 * `width` (noise and error taken off), or SIZE_MAX: no value's band of that
 * full width was entered before it.
 */
size_t response_unsettled(const struct stretch *rows, double width);

/* Noise sd of a stretch by second differences, which a slow signal hardly touches. */
double noise_by_differences(const struct stretch *rows);

#endif
