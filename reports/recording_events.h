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
	size_t identity_room, link_room, event_room; /* of the facts */
	size_t map_room;                 /* of recording->maps */
	const char **files;              /* samples files taken so far, one a map */
	int64_t last_ns;
	void *grown; /* by GROW */
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

struct event {
	const json_t *line;
	enum journal_kind kind;
	int64_t time_ns;
	/* Of the test that it names, where the suites have it. */
	const struct suite *suite;
	const struct test *test;
	struct recorded_test *recorded; /* NULL before its test_begin */
	struct test_state *state;
};

/* ---- what the two files that read events share ------------------------------ */

int reading_no_memory(struct err *reterr); /* ERR_NOMEM; -1 */
/* Members of a line; NULL, `otherwise`, NaN, false where they are missing or of another kind. */
const char *reading_text(const json_t *line, const char *key);
int64_t reading_integer(const json_t *line, const char *key, int64_t otherwise);
double reading_number(const json_t *line, const char *key);
bool reading_interval(const json_t *line, int64_t *ret_earliest, int64_t *ret_latest);
/* Cuts at the end of the buffer; text may be NULL. */
void reading_copy(char *buffer, size_t size, const char *text);
/* The array with room for one more item, perhaps moved; NULL: no memory. */
void *reading_grow(struct arena *arena, const void *items, size_t size, size_t count, size_t *room);
/* True where `items` now has room for one more. */
#define GROW(reading, items, count, room)                                                          \
	((reading)->grown = reading_grow((reading)->arena, (items), sizeof *(items), (count), (room)), \
	 (items) = (reading)->grown ? (reading)->grown : (items), (reading)->grown != NULL)

/* ---- recording_tests.c: events of a test ------------------------------------- */

int on_test_begin(struct reading *reading, struct event *event, struct err *reterr);
int on_block(struct reading *reading, struct event *event, struct err *reterr);
int on_stimulus(struct reading *reading, struct event *event, struct err *reterr);
int on_step(struct reading *reading, struct event *event, struct err *reterr);
int on_command(struct reading *reading, struct event *event, struct err *reterr);
int on_mark(struct reading *reading, struct event *event, struct err *reterr);
int on_attempt(struct reading *reading, struct event *event, struct err *reterr);
int on_condition(struct reading *reading, struct event *event, struct err *reterr);
int on_stimulus_end(struct reading *reading, struct event *event, struct err *reterr);
int on_test_end(struct reading *reading, struct event *event, struct err *reterr);
/* Of attempts of the stimulus that the run did not come to. */
int add_attempts_not_made(struct reading *reading, struct event *event, const struct step *steps,
                          size_t count, struct err *reterr);
/* What is said of rest while the recording does not tell it. */
extern const char READING_CUT_REST[];

#endif
