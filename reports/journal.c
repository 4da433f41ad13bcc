/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The journal's writer. One table says which members of an event belong to its
 * kind and what they are called in the file; recording.c reads by the same
 * words. A line is built whole and goes out by one write(2) to a file opened
 * for appending: a killed run leaves at most its last line cut.
 *
 * Rejected: stdio (its buffer dies with the process), fsync a line (a line
 * would cost as long as a transaction), and a binary log (people read this).
 */
#include "journal.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <jansson.h>

#include "folder.h"

enum journal_keys {
	KEY_TEST = 1, /* with its suite */
	KEY_DEVICE = 2,
	KEY_LINK = 4,
	KEY_CHANNEL = 8,
	KEY_INTERVAL = 16,
	KEY_VALUE = 32,
	KEY_LINE = 64,
	KEY_COUNTS = 128,
	KEY_CONDITION = 256,
};

struct journal_row {
	const char *word;
	unsigned keys;
	const char *name, *text, *number, *expected, *status; /* NULL: not written */
	const char *const *status_words;                      /* NULL: yes or no */
};

static const char *const COMMAND_WORDS[] = {"done", "failed", NULL};
static const char *const OUTCOME_WORDS[] = {"accepted", "exception", "no_reply", "not_made", NULL};
static const char *const END_WORDS[] = {"not_started",  "completed", "await_expired",
                                        "precondition", "aborted",   NULL};
static const char *const COUNT_KEYS[] = {"requests", "timeouts", "garbled", "exceptions",
                                         "reconnects"};

static const struct journal_row ROWS[JOURNAL_KINDS] = {
    [JOURNAL_RUN_BEGIN] = {.word = "run_begin", .text = "mode"},
    [JOURNAL_IDENTITY] = {.word = "identity", .keys = KEY_DEVICE, .name = "key", .text = "text"},
    [JOURNAL_TEST_BEGIN] = {.word = "test_begin", .keys = KEY_TEST},
    [JOURNAL_BLOCK] =
        {.word = "block", .keys = KEY_TEST, .number = "block", .name = "file", .text = "channels"},
    [JOURNAL_STIMULUS] = {.word = "stimulus", .keys = KEY_TEST},
    [JOURNAL_STEP] = {.word = "step", .keys = KEY_TEST | KEY_LINE, .text = "text"},
    [JOURNAL_COMMAND] = {.word = "command",
                         .keys = KEY_TEST | KEY_CHANNEL | KEY_VALUE | KEY_INTERVAL,
                         .number = "exception",
                         .text = "reason",
                         .status = "end",
                         .status_words = COMMAND_WORDS},
    [JOURNAL_MARK] = {.word = "mark", .keys = KEY_TEST | KEY_INTERVAL, .name = "mark"},
    [JOURNAL_ATTEMPT] = {.word = "attempt",
                         .keys = KEY_TEST | KEY_INTERVAL,
                         .name = "attempt",
                         .number = "exception",
                         .expected = "expected_exception",
                         .status = "outcome",
                         .status_words = OUTCOME_WORDS},
    [JOURNAL_AWAIT_EXPIRED] = {.word = "await_expired",
                               .keys = KEY_TEST | KEY_CHANNEL | KEY_VALUE | KEY_LINE |
                                       KEY_INTERVAL | KEY_CONDITION,
                               .text = "text"},
    [JOURNAL_PRECONDITION] = {.word = "precondition",
                              .keys =
                                  KEY_TEST | KEY_CHANNEL | KEY_LINE | KEY_INTERVAL | KEY_CONDITION,
                              .text = "text"},
    [JOURNAL_STIMULUS_END] = {.word = "stimulus_end", .keys = KEY_TEST},
    [JOURNAL_TEST_END] = {.word = "test_end",
                          .keys = KEY_TEST,
                          .number = "missed_slots",
                          .expected = "lost_replies",
                          .text = "reason",
                          .status = "end",
                          .status_words = END_WORDS},
    [JOURNAL_LINK] = {.word = "link", .keys = KEY_LINK, .text = "text"},
    [JOURNAL_INTERLOCK] = {.word = "interlock",
                           .keys = KEY_CHANNEL | KEY_VALUE | KEY_INTERVAL,
                           .text = "text"},
    [JOURNAL_ABORT] = {.word = "abort", .text = "reason"},
    [JOURNAL_REST_BEGIN] = {.word = "rest_begin"},
    [JOURNAL_REST] = {.word = "rest", .text = "text", .expected = "last", .status = "confirmed"},
    [JOURNAL_LINK_COUNTS] = {.word = "link_counts", .keys = KEY_LINK | KEY_COUNTS},
    [JOURNAL_HEARTBEAT] = {.word = "heartbeat", .number = "rows"},
    [JOURNAL_RUN_END] = {.word = "run_end", .text = "realtime"},
    [JOURNAL_NOTE] = {.word = "note", .text = "text"},
};

struct journal {
	const struct run_folder *folder;
	const struct rig *rig;
	const struct suite *const *suites;
	size_t suite_count;
	int fd;
	off_t length; /* of whole lines */
};

static const char JOURNAL_NAME[] = "journal.jsonl";

const char *journal_kind_name(enum journal_kind kind)
{
	return (unsigned)kind < JOURNAL_KINDS ? ROWS[kind].word : "?";
}

int journal_kind_find(const char *word)
{
	for (int i = 0; i < JOURNAL_KINDS; i++)
		if (strcmp(ROWS[i].word, word) == 0)
			return i;
	return -1;
}

const char *journal_status_name(enum journal_kind kind, int status)
{
	const char *const *words = (unsigned)kind < JOURNAL_KINDS ? ROWS[kind].status_words : NULL;
	for (int i = 0; words && words[i]; i++)
		if (i == status)
			return words[i];
	return "?";
}

int journal_status_find(enum journal_kind kind, const char *word)
{
	const char *const *words = (unsigned)kind < JOURNAL_KINDS ? ROWS[kind].status_words : NULL;
	for (int i = 0; words && words[i]; i++)
		if (strcmp(words[i], word) == 0)
			return i;
	return -1;
}

const char *journal_suite_name(const struct suite *const *suites, size_t suite, char *buffer,
                               size_t size)
{
	size_t same = 1;
	for (size_t i = 0; i < suite; i++)
		if (strcmp(suites[i]->name, suites[suite]->name) == 0)
			same++;
	(void)snprintf(buffer, size, "%s", suites[suite]->name);
	size_t used = strlen(buffer);
	if (same > 1)
		(void)snprintf(buffer + used, size - used, "#%zu", same);
	return buffer;
}

static json_t *clean_string(const char *string)
{
	struct text text;
	text_init(&text, 0);
	text_add_clean(&text, string, strlen(string));
	json_t *value = json_string(text_string(&text));
	text_release(&text);
	return value;
}

/* json_object_set_new takes the value, on failure too; a NULL value makes it fail. */
static int put(json_t *object, const char *key, json_t *value)
{
	return json_object_set_new(object, key, value);
}

static int put_text(json_t *object, const char *key, const char *text)
{
	return put(object, key, clean_string(text));
}

static int put_condition(json_t *line, const struct rig *rig, const struct condition *condition)
{
	static const char *const words[] = {"is", "above", "below", "between"};
	if (condition->channel < 0 || (size_t)condition->channel >= rig->channel_count ||
	    !isfinite(condition->a) || !isfinite(condition->b))
		return 0;
	json_t *object = json_object();
	int bad = put_text(object, "channel", rig->channels[condition->channel].info.name);
	if (condition->kind == CONDITION_BETWEEN)
		bad |= put(object, words[condition->kind], json_pack("[f,f]", condition->a, condition->b));
	else
		bad |= put(object, words[condition->kind], json_real(condition->a));
	bad |= put(object, "for", json_integer(condition->for_ns));
	bad |= put(line, "condition", object);
	return bad;
}

static int put_test(const struct journal *journal, const struct journal_event *event, json_t *line)
{
	char name[160];
	int suite = event->suite;
	if (suite < 0 && event->test >= 0 && journal->suite_count == 1)
		suite = 0;
	if (suite < 0 || (size_t)suite >= journal->suite_count)
		return 0;
	int bad = put_text(line, "suite",
	                   journal_suite_name(journal->suites, (size_t)suite, name, sizeof name));
	const struct suite *of = journal->suites[suite];
	if (event->test >= 0 && (size_t)event->test < of->test_count)
		bad |= put_text(line, "test", of->tests[event->test].name);
	return bad;
}

static int put_keys(const struct journal *journal, const struct journal_event *event, json_t *line)
{
	const struct rig *rig = journal->rig;
	unsigned keys = ROWS[event->kind].keys;
	int bad = 0;
	if (keys & KEY_TEST)
		bad |= put_test(journal, event, line);
	if ((keys & KEY_DEVICE) && event->device >= 0 && (size_t)event->device < rig->device_count)
		bad |= put_text(line, "device", rig->devices[event->device].name);
	if ((keys & KEY_LINK) && event->link >= 0 && (size_t)event->link < rig->link_count)
		bad |= put_text(line, "link", rig->links[event->link].name);
	if ((keys & KEY_CHANNEL) && event->channel >= 0 && (size_t)event->channel < rig->channel_count)
		bad |= put_text(line, "channel", rig->channels[event->channel].info.name);
	if ((keys & KEY_VALUE) && isfinite(event->value))
		bad |= put(line, "value", json_real(event->value));
	if (keys & KEY_INTERVAL) {
		bad |= put(line, "earliest", json_integer(event->earliest_ns));
		bad |= put(line, "latest", json_integer(event->latest_ns));
	}
	if ((keys & KEY_LINE) && event->line > 0)
		bad |= put(line, "line", json_integer(event->line));
	if ((keys & KEY_CONDITION) && event->condition)
		bad |= put_condition(line, rig, event->condition);
	for (int i = 0; (keys & KEY_COUNTS) && i < 5; i++)
		bad |= put(line, COUNT_KEYS[i], json_integer((json_int_t)event->counts[i]));
	return bad;
}

static int put_row(const struct journal_event *event, json_t *line)
{
	const struct journal_row *row = &ROWS[event->kind];
	int bad = 0;
	if (row->name && event->name[0])
		bad |= put_text(line, row->name, event->name);
	if (row->number)
		bad |= put(line, row->number, json_integer(event->number));
	if (row->expected)
		bad |= put(line, row->expected, json_integer(event->expected));
	if (row->status && row->status_words)
		bad |= put_text(line, row->status, journal_status_name(event->kind, event->status));
	else if (row->status)
		bad |= put(line, row->status, json_boolean(event->status == 1));
	if (row->text && event->text[0])
		bad |= put_text(line, row->text, event->text);
	return bad;
}

/* One write(2); half a line that went out before the disk was full is taken back. */
static int write_line(struct journal *journal, const json_t *line, struct err *reterr)
{
	char *bytes = json_dumps(line, JSON_COMPACT);
	if (!bytes)
		return err_set(reterr, ERR_NOMEM, "memory ran out while a line of the journal was made");
	size_t length = strlen(bytes);
	bytes[length++] = '\n'; /* in the place of the NUL */
	int rc = file_write_all(journal->fd, bytes, length);
	if (rc < 0) {
		int cause = errno;
		if (ftruncate(journal->fd, journal->length) < 0) {
			/* Then the line stays cut, and the reader says so. */
		}
		errno = cause;
		rc = folder_cannot(reterr, journal->folder->path, JOURNAL_NAME, "write");
	} else {
		journal->length += (off_t)length;
	}
	free(bytes);
	return rc;
}

static json_t *line_new(enum journal_kind kind, int64_t time_ns)
{
	json_t *line = json_object();
	if (put(line, "time", json_integer(time_ns)) | put_text(line, "event", ROWS[kind].word)) {
		json_decref(line);
		return NULL;
	}
	return line;
}

/* What every run_begin says: the format, the rig, the suites. */
static int put_files(const struct journal *journal, json_t *line)
{
	json_t *suites = json_array();
	int bad = put(line, "format", json_integer(1));
	bad |= put_text(line, "rig", journal->rig->name);
	for (size_t i = 0; i < journal->suite_count; i++) {
		const struct suite *suite = journal->suites[i];
		char name[160];
		json_t *one = json_object(), *overridden = json_object(), *selected = json_array();
		size_t left_out = 0;
		bad |= put_text(one, "name", journal_suite_name(journal->suites, i, name, sizeof name));
		for (size_t j = 0; j < suite->value_count; j++)
			if (suite->values[j].overridden)
				bad |= put_text(overridden, suite->values[j].name, suite->values[j].shown);
		for (size_t j = 0; j < suite->test_count; j++) {
			if (suite->tests[j].selected)
				bad |= json_array_append_new(selected, clean_string(suite->tests[j].name));
			else
				left_out++;
		}
		bad |= put(one, "tests", json_integer((json_int_t)suite->test_count));
		if (left_out)
			bad |= put(one, "selected", json_incref(selected));
		json_decref(selected);
		bad |= put(one, "overridden", overridden);
		bad |= json_array_append_new(suites, one);
	}
	bad |= put(line, "suites", suites);
	return bad;
}

int journal_begin(struct journal *journal, const struct run_facts *facts, struct err *reterr)
{
	json_t *line = line_new(JOURNAL_RUN_BEGIN, 0);
	int bad = !line || put_files(journal, line);
	if (!bad) {
		bad |= put_text(line, "mode", facts->rehearsal ? "rehearse" : "run");
		bad |= put_text(line, "tool_version", facts->tool_version);
		bad |= put_text(line, "started", facts->started_utc);
		bad |= put_text(line, "host", facts->host);
		if (facts->defect)
			bad |= put_text(line, "defect", facts->defect);
		/* As text: JSON readers keep 53 bits of a number. */
		char seed[32];
		(void)snprintf(seed, sizeof seed, "%llu", (unsigned long long)facts->seed);
		bad |= put_text(line, "seed", seed);
		bad |= put(line, "partial", json_boolean(facts->partial));
	}
	int rc = bad ? err_set(reterr, ERR_NOMEM, "memory ran out while the journal was begun")
	             : write_line(journal, line, reterr);
	json_decref(line);
	return rc;
}

int journal_write(struct journal *journal, const struct journal_event *event, struct err *reterr)
{
	if ((unsigned)event->kind >= JOURNAL_KINDS)
		return err_set(reterr, ERR_STATE, "there is no journal event %d", (int)event->kind);
	json_t *line = line_new(event->kind, event->time_ns);
	int bad = !line || put_keys(journal, event, line) | put_row(event, line);
	if (!bad && event->kind == JOURNAL_RUN_BEGIN)
		bad = put_files(journal, line);
	int rc = bad ? err_set(reterr, ERR_NOMEM, "memory ran out while a line of the journal was made")
	             : write_line(journal, line, reterr);
	json_decref(line);
	return rc;
}

int journal_new(const struct run_folder *folder, const struct rig *rig,
                const struct suite *const *suites, size_t suite_count, struct journal **ret_journal,
                struct err *reterr)
{
	struct journal *journal = calloc(1, sizeof *journal);
	if (!journal)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	*journal = (struct journal){
	    .folder = folder, .rig = rig, .suites = suites, .suite_count = suite_count, .fd = -1};
	if (run_folder_create(folder, JOURNAL_NAME, true, &journal->fd, reterr) < 0) {
		free(journal);
		return -1;
	}
	*ret_journal = journal;
	return 0;
}

int journal_close(struct journal *journal, struct err *reterr)
{
	if (!journal)
		return 0;
	int rc = 0;
	if (fsync(journal->fd) < 0)
		rc = folder_cannot(reterr, journal->folder->path, JOURNAL_NAME, "write to the disk");
	(void)close(journal->fd);
	free(journal);
	return rc;
}
