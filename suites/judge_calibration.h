/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JUDGE_CALIBRATION_H
#define DRIVETRIAL_JUDGE_CALIBRATION_H
/*
 * Instruments past the date until which their calibration holds, on the day of
 * the run. A verdict that rests on one names it; where the rig file says
 * `calibration: required` it is an error. Pure.
 */
#include "judge.h"

/* Days from 1970-01-01 of "YYYY-MM-DD..."; 0 where it is no date. */
int64_t day_of(const char *utc);
/* Every judged test of the suite, by the run's day. */
void judge_calibrations(const struct rig *rig, int64_t day, struct suite_result *suite);

#endif
