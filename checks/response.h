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

/*
 * Smallest and largest value of each block of rows, so that a search need not
 * look at blocks that cannot hold what it seeks. blocks 0: not there.
 */
struct extents {
	const double *least, *most;
	size_t rows, blocks; /* rows of a block; the last one may have fewer */
};

struct response {
	struct extents extents;
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
	int64_t gap_most;   /* ns; neighbours further apart hide a part of the answer */
	double rise;        /* s: 10 to 90 %, roughly; 0: not known */
	double busy_until;  /* s: peak and swing back lie before it; 0: not known */
};

/*
 * Bounds gap_most (filled in) by how fast the answer is, and fills rise and
 * busy_until. With fewer than two samples on the way up neither interpolation nor a
 * parabola holds the truth: polls of 4 to 7 ms of a rise of 13 ms gave
 * overshoots whose interval missed it in half of all draws.
 */
void response_pace(struct response *response);

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
 * The largest excursion from the final value to one side (sign +1 or -1, as
 * values are) among the rows [begin, end), in percent of `hundred`, and its
 * time. shortest: nothing in the answer is shorter, in s. Here the levels may
 * be equal: it is the dip after a step of load, not the top of a step.
 */
void response_excursion(const struct response *response, size_t begin, size_t end, int sign,
                        double shortest, struct measured *ret_height, struct measured *ret_time);
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
