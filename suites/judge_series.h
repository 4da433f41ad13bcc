/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JUDGE_SERIES_H
#define DRIVETRIAL_JUDGE_SERIES_H
/*
 * Series for the checks out of recorded blocks: one per channel of the rig,
 * derived channels computed, rows without proof of life marked bad. Pure.
 */
#include "recorded.h"

/*
 * *ret_series: one series per channel of the rig, in the rig's order; rows is
 * 0 where a channel was not recorded. Read channels lie in place in the
 * blocks, the rest in `arena`. Errors: ERR_NOMEM, ERR_STATE (a block that
 * names a channel that the rig does not have).
 */
int judge_series(const struct rig *rig, const struct recorded_test *recorded, struct arena *arena,
                 struct series **ret_series, struct err *reterr);

/* How an expired `await` is to be read. */
struct await_finding {
	bool proven;      /* the samples prove that the condition did not come true */
	char reason[768]; /* one sentence */
};
/*
 * Looks for proof in the series of the awaited channel that the condition
 * never held for its dwell in [begin, end]: good rows from end to end, no gap
 * between them longer than a few sample intervals, and no stretch of rows
 * that fulfil it as long as the dwell.
 */
void judge_await(const struct rig *rig, const struct series *series,
                 const struct condition *condition, int64_t begin_ns, int64_t end_ns,
                 struct await_finding *ret_finding);

#endif
