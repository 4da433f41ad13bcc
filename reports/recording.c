/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Reads a run folder back. The journal is read a line at a time (it may be
 * long, and nothing of it is kept but what becomes a struct); the samples are
 * mapped. The reading of single events is in recording_events.c.
 *
 * Rejected: reading the rig and suites from the folder here (the caller may
 * want newer ones), and mending what is not understood: a report that rests on
 * a guess is worse than none.
 */
#include "recording.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "folder.h"
#include "recording_events.h"

enum { LINE_MOST = 1 << 20 };

static int open_journal(struct reading *reading, struct err *reterr)
{
	char path[1200];
	(void)snprintf(path, sizeof path, "%.1100s/journal.jsonl", reading->path);
	int fd = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
	if (fd < 0)
		return err_set_at(reterr, ERR_FILE, reading->path, 0, 0,
		                  "is no run folder: its journal.jsonl cannot be opened: %s",
		                  strerror(errno));
	reading->file = fdopen(fd, "r");
	reading->line = malloc(LINE_MOST);
	if (!reading->file)
		(void)close(fd);
	if (!reading->file || !reading->line)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	return 0;
}

static void close_journal(struct reading *reading)
{
	if (reading->file)
		(void)fclose(reading->file);
	free(reading->line);
	reading->file = NULL;
	reading->line = NULL;
}

/* 1: a line without its end is in reading->line; 0: there is no whole line any more; -1. */
static int next_line(struct reading *reading, size_t *ret_length, struct err *reterr)
{
	size_t length = 0;
	int c;
	while ((c = getc_unlocked(reading->file)) != EOF) {
		if (c == '\n') {
			reading->number++;
			*ret_length = length;
			return 1;
		}
		if (length == LINE_MOST)
			return reading_refuse(reading, reterr, "it has a line that is too long");
		reading->line[length++] = (char)c;
	}
	if (ferror(reading->file))
		return reading_refuse(reading, reterr, "it cannot be read");
	return 0;
}

static int next_event(struct reading *reading, json_t **ret_line, struct err *reterr)
{
	size_t length = 0;
	json_error_t error;
	int more = next_line(reading, &length, reterr);
	if (more <= 0)
		return more;
	json_t *line = json_loadb(reading->line, length, JSON_REJECT_DUPLICATES, &error);
	if (!line || !json_is_object(line)) {
		json_decref(line);
		return reading_refuse(reading, reterr, "the line is no JSON object");
	}
	*ret_line = line;
	return 1;
}

/* The first line, which says what the rest is of. */
static int read_head(struct reading *reading, struct recording_head *head, json_t **ret_line,
                     struct err *reterr)
{
	json_t *line = NULL;
	int more = next_event(reading, &line, reterr);
	if (more < 0)
		return -1;
	if (more == 0)
		return err_set_at(reterr, ERR_FILE, reading->path, 0, 0,
		                  "has an empty journal: the run was cut before it began");
	if (reading_head(reading, line, head, reterr) < 0) {
		json_decref(line);
		return -1;
	}
	*ret_line = line;
	return 0;
}

int recording_head_read(const char *path, struct arena *arena, struct recording_head *ret_head,
                        struct err *reterr)
{
	struct reading reading = {.path = path, .arena = arena};
	json_t *line = NULL;
	int rc = open_journal(&reading, reterr);
	if (rc == 0)
		rc = read_head(&reading, ret_head, &line, reterr);
	json_decref(line);
	close_journal(&reading);
	return rc;
}

/* The rig and every suite must be of the run. */
static int match_head(const struct reading *reading, const struct recording_head *head,
                      struct err *reterr)
{
	if (strcmp(head->rig, reading->rig->name) != 0)
		return err_set_at(reterr, ERR_FILE, reading->path, 0, 0,
		                  "is a run of the rig '%.64s', not of '%.64s'", head->rig,
		                  reading->rig->name);
	for (size_t i = 0; i < reading->suite_count; i++) {
		char name[160];
		bool found = false;
		(void)journal_suite_name(reading->suites, i, name, sizeof name);
		for (size_t j = 0; j < head->suite_count && !found; j++)
			found = strcmp(head->suites[j].name, name) == 0;
		if (!found)
			return err_set_at(reterr, ERR_FILE, reading->path, 0, 0,
			                  "is a run of the suite '%.64s', not of '%.64s'",
			                  head->suite_count ? head->suites[0].name : "", name);
	}
	return 0;
}

/* Where the run was closed, its files must still be those that were written. */
static int match_sums(const char *path, struct err *reterr)
{
	struct folder_changes changes = {0};
	char sums[1200];
	(void)snprintf(sums, sizeof sums, "%.1100s/" FOLDER_SUMS, path);
	if (access(sums, F_OK) < 0)
		return 0;
	struct text out;
	text_init(&out, 1 << 20);
	int rc = run_folder_compare(path, &out, &changes, reterr);
	if (rc == 0 && changes.changed + changes.missing > 0) {
		const char *first = text_string(&out);
		/* Additions come last, so the first line is of a file that does harm. */
		rc = err_set_at(reterr, ERR_FILE, path, 0, 0,
		                "was altered after the run (%zu of its files; the first: %.*s), so that "
		                "nothing can be concluded from it",
		                changes.changed + changes.missing, (int)strcspn(first, "\n"), first);
	}
	text_release(&out);
	return rc;
}

static int make_tests(struct reading *reading, struct recording *recording)
{
	recording->tests = arena_array(reading->arena, reading->suite_count + 1, sizeof(void *));
	reading->states = arena_array(reading->arena, reading->suite_count + 1, sizeof(void *));
	if (!recording->tests || !reading->states)
		return -1;
	for (size_t i = 0; i < reading->suite_count; i++) {
		size_t count = reading->suites[i]->test_count + 1;
		recording->tests[i] = arena_array(reading->arena, count, sizeof(void *));
		reading->states[i] = arena_array(reading->arena, count, sizeof **reading->states);
		if (!recording->tests[i] || !reading->states[i])
			return -1;
	}
	return 0;
}

int recording_open(const char *path, const struct rig *rig, const struct suite *const *suites,
                   size_t suite_count, struct arena *arena, struct recording *ret_recording,
                   struct err *reterr)
{
	struct recording recording = {0};
	struct recording_head head;
	struct reading reading = {.path = path,
	                          .arena = arena,
	                          .rig = rig,
	                          .suites = suites,
	                          .suite_count = suite_count,
	                          .recording = &recording};
	json_t *line = NULL;
	int rc = match_sums(path, reterr);
	if (rc == 0)
		rc = open_journal(&reading, reterr);
	if (rc == 0 && make_tests(&reading, &recording) < 0)
		rc = err_set(reterr, ERR_NOMEM, "memory ran out while the recording was read");
	if (rc == 0)
		rc = read_head(&reading, &head, &line, reterr);
	if (rc == 0)
		rc = match_head(&reading, &head, reterr);
	if (rc == 0)
		rc = reading_begin(&reading, line, reterr);
	json_decref(line);
	int more = rc == 0;
	while (more > 0) {
		line = NULL;
		more = next_event(&reading, &line, reterr);
		if (more > 0 && reading_event(&reading, line, reterr) < 0)
			more = -1;
		json_decref(line);
	}
	if (rc == 0 && more == 0)
		rc = reading_end(&reading, reterr);
	else
		rc = -1;
	close_journal(&reading);
	free(reading.files);
	if (rc < 0) {
		recording_release(&recording);
		return -1;
	}
	*ret_recording = recording;
	return 0;
}

void recording_release(struct recording *recording)
{
	if (!recording)
		return;
	for (size_t i = 0; i < recording->map_count; i++)
		samples_map_release(&recording->maps[i]);
	free(recording->maps);
	*recording = (struct recording){0};
}
