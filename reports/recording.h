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

/* What the first line of the journal says: enough to load rig and suites as they were. */
struct recorded_suite {
	const char *name;
	struct override *overrides; /* `used` is false */
	size_t override_count;
	bool partial;
	const char **selected; /* partial: names of the tests that were */
	size_t selected_count;
};
struct recording_head {
	const char *rig;
	struct recorded_suite *suites; /* suite.yaml, suite-2.yaml ... */
	size_t suite_count;
};
/* Errors: ERR_FILE where there is no journal, or it is none of this program's. */
int recording_head_read(const char *path, struct arena *arena, struct recording_head *ret_head,
                        struct err *reterr);

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
 *
 * Works on the folder of a run that goes on, too: a test that has ended is
 * whole. What the journal does not tell because it was cut is told as such
 * (TEST_ABORTED, rest not confirmed); a last line without its end is passed
 * over. Where SHA256SUMS is there, a changed or missing file is refused.
 *
 * Tests, marks, channels are found by name. Refused with ERR_FILE: another
 * rig, a suite that was not in the run, a channel that the rig lacks, a line
 * that is no event, samples that are missing or have other columns.
 */
int recording_open(const char *path, const struct rig *rig, const struct suite *const *suites,
                   size_t suite_count, struct arena *arena, struct recording *ret_recording,
                   struct err *reterr);
void recording_release(struct recording *recording);

#endif
