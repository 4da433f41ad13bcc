/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RECORDING_EVENTS_H
#define DRIVETRIAL_RECORDING_EVENTS_H
/* One event of a journal at a time becomes part of a struct recording. Private to this folder. */
#include <stdio.h>

#include <jansson.h>

#include "recording.h"

/* What is known of a test while its events come in. */
struct test_state {
	bool ended, in_stimulus;
	int last_line; /* of the step that began last */
	size_t block_room, outcome_room, command_room;
};

struct reading {
	const char *path; /* of the run folder */
	struct arena *arena;
	const struct rig *rig;
	const struct suite *const *suites;
	size_t suite_count;
	struct recording *recording;
	struct test_state **states; /* as recording->tests */
	FILE *file;
	char *line;
	int number;                      /* of the line, 1-based */
	size_t last_suite, last_test;    /* where the last test was found */
	size_t identity_room, link_room; /* of the facts */
	size_t map_room;                 /* of recording->maps */
	const char **files;              /* samples files taken so far, one a map */
	int64_t last_ns;
	bool run_ended;
};

/* "journal.jsonl:12: WHAT", ERR_FILE. Always -1. */
int reading_refuse(const struct reading *reading, struct err *reterr, const char *what);
int reading_head(struct reading *reading, const json_t *line, struct recording_head *ret_head,
                 struct err *reterr);
/* The facts of the first line. */
int reading_begin(struct reading *reading, const json_t *line, struct err *reterr);
int reading_event(struct reading *reading, const json_t *line, struct err *reterr);
/* After the last line: what was not told is told as such. */
int reading_end(struct reading *reading, struct err *reterr);

#endif
