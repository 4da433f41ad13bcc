/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RECORDING_H
#define DRIVETRIAL_RECORDING_H
/*
 * Reads a run folder back: rig and suites as they were, journal, samples.
 * A folder that is cut, foreign or tampered with gets a clear error.
 */
#include "journal.h"
#include "judge.h"
#include "samples_file.h"

struct recording {
	struct run_facts facts;
	/* tests[s][t]: of suite s, test t; NULL: not reached. */
	struct recorded_test ***tests;
	struct samples_map *maps;
	size_t map_count;
};

/*
 * path: the run folder. rig, suites: as loaded from it (or newer ones, for
 * judging anew; a test that the recording does not have is NULL). Everything
 * is in `arena` but the maps: recording_release().
 */
int recording_open(const char *path, const struct rig *rig, const struct suite *const *suites,
                   size_t suite_count, struct arena *arena, struct recording *ret_recording,
                   struct err *reterr);
void recording_release(struct recording *recording);

#endif
