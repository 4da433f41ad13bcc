/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PAIRS_H
#define DRIVETRIAL_PAIRS_H
/*
 * Two channels compared sample by sample. Rows that one transaction brought
 * are compared as they are. Otherwise the second channel is taken on the
 * straight line between its two nearest rows, and what the two instants may be
 * apart, times the rate of change, widens the difference. Rows beside the
 * other channel's rows, and rows in its gaps, have no difference; what they
 * leave is a gap.
 */
#include "window.h"

struct pairs {
	bool usable;
	char why[224];
	bool together; /* all from one transaction each */
	/*
	 * Rows of the first channel with the difference as value, in its unit;
	 * extra: limits of error of both and skew. Half the resolutions are apart.
	 */
	struct rows rows;
	double rounding;   /* half of both resolutions, first channel's unit */
	double resolution; /* both, first channel's unit */
	struct channel_info info;
};

/*
 * a - factor * b, in the unit of a; wrapped to half a turn on either side where
 * turn (in the unit of a) is above 0. b must be of a's dimension, times what
 * factor stands for. -1: ERR_NOMEM.
 */
int pairs_take(const struct check_input *in, int a, int b, double factor, double turn,
               struct span span, struct pairs *ret_pairs, struct err *reterr);

/* Mean of the differences and its expanded uncertainty. */
void pairs_mean(const struct pairs *pairs, double *ret_mean, double *ret_expanded);
/* Largest |difference - around| of a sample, its limit of error, its row. */
double pairs_largest(const struct pairs *pairs, double around, double turn, double *ret_doubt,
                     size_t *ret_row);

/* self-reported where one of the two is. */
enum evidence evidence_of_two(const struct channel_info *a, const struct channel_info *b);

#endif
