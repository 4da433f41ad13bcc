/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_JOURNAL_H
#define DRIVETRIAL_JOURNAL_H
/*
 * journal.jsonl: every command, event and error with its times, one JSON
 * object a line, flushed as it happens. The last line may be cut.
 *
 * Every line has "time" (ns since the start of the run) and "event". The run
 * is rebuilt from it; a struct journal_event is one line. Keys that do not
 * belong to an event are not written.
 *
 * Indices become names in the file: "suite" (with two suites of one name the
 * second is NAME#2), "test", "device", "link", "channel", and marks, attempts
 * and blocks by their own names. So a recording can be judged anew with a
 * suite that has other tests before the one that is looked for. An index that
 * is out of range is not written. Texts go through text_add_clean().
 *
 * The first line is run_begin: "format" 1, the rig, the suites with what was
 * overridden and selected, and the facts that journal_begin() is given.
 *
 * A write that fails takes the line back, so that a later one that succeeds
 * does not stand behind half a line.
 */
#include "judge.h"
#include "run_folder.h"

enum journal_kind {
	JOURNAL_RUN_BEGIN = 0, /* text: "run" or "rehearse"; journal_begin() writes it with all facts */
	JOURNAL_IDENTITY,      /* device, name (key), text */
	JOURNAL_TEST_BEGIN,    /* suite, test */
	JOURNAL_BLOCK,         /* test, number (block), name: samples_writer_name() */
	JOURNAL_STIMULUS,      /* test: the stimulus begins */
	JOURNAL_STEP,          /* test, text, line */
	/* channel, value, earliest, latest, status (0: in effect), number (exception), text: why not;
	 * test or -1 */
	JOURNAL_COMMAND,
	JOURNAL_MARK,    /* test, name, earliest, latest */
	JOURNAL_ATTEMPT, /* test, name, status (enum outcome_status), number (exception), expected,
	                    earliest, latest */
	JOURNAL_AWAIT_EXPIRED, /* test, text, condition, line, earliest (begin), latest (end) */
	JOURNAL_PRECONDITION,  /* test, text, condition, line, earliest, latest */
	JOURNAL_STIMULUS_END,  /* test: the restore begins */
	JOURNAL_TEST_END,      /* test, number (missed slots), expected (lost replies), status (enum
	                          test_end), text: the reason where it was not completed */
	JOURNAL_LINK,          /* link, text: fault, reconnect */
	JOURNAL_INTERLOCK,     /* text, channel, value, earliest, latest */
	JOURNAL_ABORT,         /* text: the reason */
	JOURNAL_REST_BEGIN,
	JOURNAL_REST, /* status 1: confirmed, 0: not; text: how or why not; expected 1: the last */
	JOURNAL_LINK_COUNTS, /* link, counts[5] */
	JOURNAL_HEARTBEAT,   /* number: rows written so far */
	JOURNAL_RUN_END,     /* text: what was obtained of the scheduler */
	JOURNAL_NOTE,        /* text */
	JOURNAL_KINDS,
};

struct journal_event {
	enum journal_kind kind;
	int64_t time_ns;
	int suite, test;           /* indices; -1 none */
	int device, link, channel; /* indices; -1 none */
	int64_t earliest_ns, latest_ns;
	double value; /* NaN: none */
	int status, number, expected, line;
	uint64_t counts[5];
	char name[65];
	char text[384];
	/* AWAIT_EXPIRED, PRECONDITION: of the rig or suite, which outlive the event; NULL: none. */
	const struct condition *condition;
};

struct journal;
/* The folder, rig and suites are borrowed until close. */
int journal_new(const struct run_folder *folder, const struct rig *rig,
                const struct suite *const *suites, size_t suite_count, struct journal **ret_journal,
                struct err *reterr);
/*
 * The line run_begin with everything that a report needs and no later event
 * says: mode, tool version, start, host, defect, seed, selection.
 */
int journal_begin(struct journal *journal, const struct run_facts *facts, struct err *reterr);
/* One line, by one write(2). Errors: ERR_OUTPUT. */
int journal_write(struct journal *journal, const struct journal_event *event, struct err *reterr);
/* Puts it on the disk and frees, on failure too. Takes NULL. */
int journal_close(struct journal *journal, struct err *reterr);

/* The name of a suite in the file: its own, or NAME#2 where it is the second of that name. */
const char *journal_suite_name(const struct suite *const *suites, size_t suite, char *buffer,
                               size_t size);
/* The words of the file for statuses, in the order of their enums. "?" outside. Static. */
const char *journal_status_name(enum journal_kind kind, int status);
int journal_status_find(enum journal_kind kind, const char *word); /* -1 */

/* "command", "test_begin": the word in the file. Static. */
const char *journal_kind_name(enum journal_kind kind);
int journal_kind_find(const char *word); /* -1 */

#endif
