/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The record of a run and what is made of it: the folder is begun before the
 * first command, and judged only once rest is confirmed (or given up), so that
 * a check that crashes finds a bench at rest. Verdicts come from what was
 * written, read back, never from what was still in memory.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "disk_need.h"
#include "judging.h"
#include "report.h"
#include "session.h"

static const struct suite *const *suites_of(const struct session *session)
{
	return (const struct suite *const *)session->suites;
}

static int64_t start_seconds(const struct session *session)
{
	const char *epoch = getenv("SOURCE_DATE_EPOCH");
	if (session->options->rehearse && epoch && *epoch) {
		char *end;
		long long seconds = strtoll(epoch, &end, 10);
		if (*end == '\0' && seconds >= 0)
			return seconds;
	}
	return (int64_t)time(NULL);
}

static void fill_facts(struct session *session, char *compact, size_t size)
{
	struct run_facts *facts = &session->facts;
	time_t seconds = (time_t)start_seconds(session);
	struct tm utc;
	(void)gmtime_r(&seconds, &utc);
	(void)strftime(facts->started_utc, sizeof facts->started_utc, "%Y-%m-%dT%H:%M:%S", &utc);
	(void)strftime(compact, size, "%Y%m%dT%H%M%SZ", &utc);
	facts->rig = session->rig;
	(void)snprintf(facts->tool_version, sizeof facts->tool_version, "%s", DRIVETRIAL_VERSION);
	facts->rehearsal = session->options->rehearse;
	facts->defect = session->options->defect;
	facts->seed = session->options->seed;
	if (facts->rehearsal)
		(void)snprintf(facts->host, sizeof facts->host, "modelled-bench");
	else if (gethostname(facts->host, sizeof facts->host - 1) < 0)
		(void)snprintf(facts->host, sizeof facts->host, "unknown");
	(void)snprintf(facts->realtime, sizeof facts->realtime, "%s",
	               facts->rehearsal ? "virtual time" : "ordinary scheduling, timer slack 1 ns");
}

static int write_sources(struct session *session, struct err *err)
{
	const struct yaml_file *rig = session->rig->file;
	if (run_folder_write(&session->folder, "rig.yaml", rig->bytes, rig->length, err) < 0)
		return -1;
	const struct yaml_file *parameters = session->rig->parameters_file;
	if (parameters && run_folder_write(&session->folder, session->rig->parameters_name,
	                                   parameters->bytes, parameters->length, err) < 0)
		return -1;
	for (size_t i = 0; i < session->suite_count; i++) {
		char name[32] = "suite.yaml";
		const struct yaml_file *suite = session->suites[i]->file;
		if (i > 0)
			(void)snprintf(name, sizeof name, "suite-%zu.yaml", i + 1);
		if (run_folder_write(&session->folder, name, suite->bytes, suite->length, err) < 0)
			return -1;
	}
	return 0;
}

static int write_identities(struct session *session, struct err *err)
{
	const struct run_facts *facts = &session->facts;
	for (size_t i = 0; i < facts->identity_count; i++) {
		const struct identity_read *read = &facts->identities[i];
		struct journal_event event = {.kind = JOURNAL_IDENTITY,
		                              .suite = -1,
		                              .test = -1,
		                              .link = -1,
		                              .channel = -1,
		                              .value = (double)NAN};
		event.time_ns = clock_now(&session->clock);
		event.device = rig_device_find(session->rig, read->device, strlen(read->device));
		(void)snprintf(event.name, sizeof event.name, "%s", read->key);
		(void)snprintf(event.text, sizeof event.text, "%s", read->text);
		if (journal_write(session->journal, &event, err) < 0)
			return -1;
	}
	return 0;
}

int session_record(struct session *session)
{
	struct err err = {0};
	char compact[32];
	fill_facts(session, compact, sizeof compact);
	if (disk_need_check(session, &err) < 0)
		return session_exit_of(&err);
	if (run_folder_new(session->options->out, compact, session->rig->name, &session->folder, &err) <
	    0)
		return session_exit_of(&err);
	session->folder_made = true;
	if (write_sources(session, &err) < 0 ||
	    journal_new(&session->folder, session->rig, suites_of(session), session->suite_count,
	                &session->journal, &err) < 0 ||
	    journal_begin(session->journal, &session->facts, &err) < 0 ||
	    write_identities(session, &err) < 0 ||
	    capture_init(&session->capture, session->conductor, &session->folder, session->journal,
	                 session->rig, session->suites, session->suite_count, &session->stop, &err) < 0)
		return session_exit_of(&err);
	return 0;
}

/* ---- gates ------------------------------------------------------------------ */

void session_answer_gate(struct session *session)
{
	struct arena arena;
	struct err err = {0};
	struct recording recording = {0};
	struct test_result result = {.verdict = VERDICT_ERROR};
	int suite, test;
	if (!conductor_gate_asked(session->conductor, &suite, &test))
		return;
	arena_init(&arena, 0);
	capture_flush(&session->capture);
	const struct test *asked = &session->suites[suite]->tests[test];
	if (recording_open(session->folder.path, session->rig, suites_of(session), session->suite_count,
	                   &arena, &recording, &err) == 0 &&
	    judge_test(session->rig, session->suites[suite], asked, recording.tests[suite][test],
	               &arena, &result, &err) == 0)
		(void)snprintf(err.message, sizeof err.message, "%.100s: %.600s", asked->name,
		               result.reason);
	conductor_gate_answer(session->conductor, result.verdict == VERDICT_PASS, err.message);
	recording_release(&recording);
	arena_release(&arena);
}

/* ---- the end ------------------------------------------------------------------ */

static int end_journal(struct session *session, struct err *err)
{
	struct journal_event event = {
	    .suite = -1, .test = -1, .device = -1, .link = -1, .channel = -1, .value = (double)NAN};
	event.time_ns = clock_now(&session->clock);
	int result = 0;
	for (size_t i = 0; i < session->rig->link_count; i++) {
		struct worker_counts counts = worker_counts(conductor_worker(session->conductor, i));
		event.kind = JOURNAL_LINK_COUNTS;
		event.link = (int)i;
		event.counts[0] = counts.requests;
		event.counts[1] = counts.timeouts;
		event.counts[2] = counts.garbled;
		event.counts[3] = counts.exceptions;
		event.counts[4] = counts.reconnects;
		if (journal_write(session->journal, &event, err) < 0)
			result = -1;
	}
	event.link = -1;
	event.time_ns = clock_now(&session->clock);
	event.kind = JOURNAL_ABORT;
	if (!stop_raised(&session->stop) &&
	    !session_drive_same(session, event.text, sizeof event.text) &&
	    journal_write(session->journal, &event, err) < 0)
		result = -1;
	event.kind = JOURNAL_RUN_END;
	(void)snprintf(event.text, sizeof event.text, "%s", session->facts.realtime);
	if (journal_write(session->journal, &event, err) < 0)
		result = -1;
	if (journal_close(session->journal, err) < 0)
		result = -1;
	session->journal = NULL;
	return result;
}

static int judge_run(struct session *session, struct recording *recording, struct run_result *run,
                     struct err *err)
{
	if (recording_open(session->folder.path, session->rig, suites_of(session), session->suite_count,
	                   &session->arena, recording, err) < 0)
		return -1;
	return judge_recording(session->rig, suites_of(session), session->suite_count, recording,
	                       &session->arena, run, err);
}

/* The last word on a bench that may still be moving. */
static void say_not_at_rest(const struct rest_outcome *rest)
{
	(void)fprintf(stderr,
	              "\nNOT AT REST: the bench may still be moving (%s). Use the emergency stop, and "
	              "keep clear.\n",
	              rest->reason[0] ? rest->reason : "the reason is not known");
}

int session_finish(struct session *session)
{
	struct err err = {0};
	struct recording recording = {0};
	struct run_result run = {0};
	struct rest_outcome rest = conductor_rest(session->conductor);
	int code = EXIT_INTERNAL;
	if (end_journal(session, &err) < 0)
		session_print_error(&err);
	err = (struct err){0};
	if (judge_run(session, &recording, &run, &err) < 0) {
		session_print_error(&err);
		goto out;
	}
	run.facts.partial = session->facts.partial;
	code = run.exit_code;
	err = (struct err){0};
	int written = reports_write(&run, &session->folder, &err);
	if (written == 0)
		written = run_folder_seal(&session->folder, &err);
	summary_print(&run, isatty(STDOUT_FILENO) && !getenv("NO_COLOR"), stdout);
	(void)printf("reports: %s\n", session->folder.path);
	if (fflush(stdout) != 0)
		(void)fprintf(stderr, "drivetrial: the summary could not be written to stdout\n");
	if (written < 0) {
		session_print_error(&err);
		if (code == EXIT_ALL_PASS || code == EXIT_UNDECIDED || code == EXIT_TEST_FAILED)
			code = EXIT_NO_OUTPUT;
	}
out:
	if (rest.needed && !rest.confirmed) {
		say_not_at_rest(&rest);
		code = EXIT_NOT_AT_REST;
	}
	recording_release(&recording);
	return code;
}
