/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JUDGING_H
#define DRIVETRIAL_JUDGING_H
/* From a recording to the verdicts of a whole run. Used after a run and by `report`. */
#include "recording.h"

/*
 * Judges every test of every suite. Everything is in `arena`; the recording
 * must outlive the result. Tests that were not selected are skipped, tests
 * that the run did not reach are errors.
 */
int judge_recording(const struct rig *rig, const struct suite *const *suites, size_t suite_count,
                    const struct recording *recording, struct arena *arena,
                    struct run_result *ret_run, struct err *reterr);

#endif
