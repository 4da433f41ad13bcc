/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TEST_TALLY_H
#define DRIVETRIAL_TEST_TALLY_H
/*
 * What is counted of each metric over many simulated measurements: how often
 * its interval held the truth, how wide it was against the errors made, and
 * what a guarded verdict on a limit near the truth would have been.
 */
#include "recording.h"

enum { TALLIES = 48, BINS = 5 };

struct tally {
	const char *check, *metric;
	bool guaranteed; /* bounds of coverage 1: not one miss is allowed */
	size_t draws, known, held;
	double *errors, *widths;
	double scale; /* typical half-width: limits are drawn at so many of it */
	/* by distance of the limit from the truth */
	size_t violating[BINS], passed[BINS], conforming[BINS], failed[BINS];
};

struct campaign {
	size_t draws;
	struct random random;
	struct tally tallies[TALLIES];
	size_t count;
};

/* Enters one measurement of the metric of a check that was just run. */
void tally_add(struct campaign *campaign, const struct used_check *use, const char *metric,
               double truth);

/* generators.c: one simulated measurement each, entered into the campaign. */
typedef void generator(struct campaign *campaign);
extern generator *const generators[];
extern const size_t generator_count;

#endif
