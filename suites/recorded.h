/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RECORDED_H
#define DRIVETRIAL_RECORDED_H
/*
 * What a run has recorded of one test: the only thing that judge() sees. It is
 * read back from the run folder (samples/ and journal.jsonl), both right after
 * the run and by `report DIR`, so that both give the same verdicts.
 */
#include "suite.h"

enum test_end {
	TEST_NOT_STARTED = 0,
	TEST_COMPLETED,
	TEST_AWAIT_EXPIRED, /* a condition of the stimulus did not come true in time */
	TEST_PRECONDITION,  /* `before` does not hold */
	TEST_ABORTED,       /* interlock, lost link, signal, fault of the program */
};

struct recorded_block {
	int *channels; /* indices into the rig's channels, in the order of the columns */
	size_t channel_count;
	size_t rows;
	const unsigned char *row0; /* {int64 sent, int64 received, double[channel_count]} */
};

struct recorded_test {
	const char *name;
	enum test_end end;
	char reason[256];                             /* of the end, where it is not completed */
	struct position step_at;                      /* the step that ended it; file NULL: none */
	struct condition condition;                   /* TEST_AWAIT_EXPIRED, TEST_PRECONDITION */
	int64_t condition_begin_ns, condition_end_ns; /* when it was waited for */
	int64_t begin_ns, end_ns;                     /* of the stimulus */
	struct recorded_block *blocks;
	size_t block_count;
	struct mark *marks; /* in the order of test->marks */
	size_t mark_count;
	struct outcome *outcomes;
	size_t outcome_count;
	struct command
	    *commands; /* assignments of the stimulus, in the order in which they were made */
	size_t command_count;
	size_t missed_slots; /* polls that were due and not made */
	size_t lost_replies; /* requests without a good reply */
};

#endif
