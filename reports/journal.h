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
 */
#include "recorded.h"
#include "run_folder.h"

enum journal_kind {
	JOURNAL_RUN_BEGIN = 0, /* text: "run" or "rehearse" */
	JOURNAL_IDENTITY,      /* device, name (key), text */
	JOURNAL_TEST_BEGIN,    /* suite, test */
	JOURNAL_BLOCK,         /* test, number (block), text: channels, blank-separated */
	JOURNAL_STIMULUS,      /* test: the stimulus begins */
	JOURNAL_STEP,          /* test, text, line */
	JOURNAL_COMMAND,       /* channel, value, earliest, latest, status */
	JOURNAL_MARK,          /* test, name, earliest, latest */
	JOURNAL_ATTEMPT,       /* test, name, status, number (exception), expected, earliest, latest */
	JOURNAL_AWAIT_EXPIRED, /* test, text, channel, line, earliest (begin), latest (end) */
	JOURNAL_PRECONDITION,  /* test, text, channel, line, earliest, latest */
	JOURNAL_STIMULUS_END,  /* test: the restore begins */
	JOURNAL_TEST_END,      /* test, number (missed slots), expected (lost replies), status */
	JOURNAL_LINK,          /* link, text: fault, reconnect */
	JOURNAL_INTERLOCK,     /* text, channel, value, earliest, latest */
	JOURNAL_ABORT,         /* text: the reason */
	JOURNAL_REST_BEGIN,
	JOURNAL_REST,        /* status 1: confirmed, 0: not; text: how or why not */
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
};

struct journal;
int journal_new(const struct run_folder *folder, const struct rig *rig,
                const struct suite *const *suites, size_t suite_count, struct journal **ret_journal,
                struct err *reterr);
int journal_write(struct journal *journal, const struct journal_event *event, struct err *reterr);
int journal_close(struct journal *journal, struct err *reterr);

/* "command", "test_begin": the word in the file. Static. */
const char *journal_kind_name(enum journal_kind kind);

#endif
