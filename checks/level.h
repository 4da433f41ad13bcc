/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_LEVEL_H
#define DRIVETRIAL_LEVEL_H
/*
 * The mean of a channel over a window with its expanded uncertainty: noise with
 * its autocorrelation, limits of error, rounding.
 */
#include "window.h"

struct level {
	bool known;
	char why[224];
	double mean, expanded; /* SI */
	double sd;             /* of the rows, SI */
};

/* -1: ERR_NOMEM; else look at `known`. */
int level_measure(const struct check_input *in, int channel, struct span span,
                  struct level *ret_level, struct err *reterr);

#endif
