/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PLAN_TIMING_H
#define DRIVETRIAL_PLAN_TIMING_H
/*
 * How long transactions of a rig take: as rigs/links/timing.h says, or as a
 * survey measured and recorded it (`survey --record FILE`, `plan --timing
 * FILE`). A device that the file does not know keeps the first.
 */
#include "plan.h"

struct survey;

struct device_timing {
	bool measured;
	struct timing timing;
};

struct bench_timing {
	const struct rig *rig;
	struct device_timing *device; /* one a device of the rig */
	int64_t *between_ns;          /* one a link: from a reply to the next request */
	char taken[40];               /* when it was measured; empty: nothing was */
};

/* What the rig file alone says. Errors: ERR_NOMEM. */
int bench_timing_assume(const struct rig *rig, struct arena *arena, struct bench_timing *ret,
                        struct err *reterr);
/* Reads a recorded file over it. Errors: ERR_FILE (another rig, no such file), ERR_NOMEM. */
int bench_timing_load(const char *path, struct bench_timing *timing, struct err *reterr);
/* Writes what a survey measured. Errors: ERR_OUTPUT, ERR_NOMEM. */
int bench_timing_record(const char *path, const struct survey *survey, struct err *reterr);

/* From the request to the reply as a row shows them, usual and at most (19 of 20 where measured).
 */
void bench_timing_row(const struct bench_timing *timing, int device, int function, int count,
                      int64_t *ret_usual, int64_t *ret_most);
/* The same up to when the next request can go out. */
void bench_timing_transaction(const struct bench_timing *timing, int device, int function,
                              int count, int64_t *ret_usual, int64_t *ret_most);

#endif
