/* SPDX-License-Identifier: Apache-2.0 */
#include "near.h"

#include "recording.h"
#include "scratch.h"
#include "synthetic.h"

struct recorded_run {
	struct synthetic made;
	struct run_folder folder;
	struct arena arena;
	struct recording recording;
};

static void record(struct recorded_run *run, const char *name)
{
	struct err err = {0};
	*run = (struct recorded_run){0};
	synthetic_make(&run->made, "[speed=1500rpm]", "a title with <tags> & \"quotes\"");
	arena_init(&run->arena, 0);
	assert_int_equal(run_folder_new(scratch_path(name), "", "bench", &run->folder, &err), 0);
	assert_int_equal(synthetic_record(&run->made, &run->folder, &err), 0);
}

static int reopen(struct recorded_run *run, struct err *err)
{
	return recording_open(run->folder.path, &run->made.rig, run->made.suites, 1, &run->arena,
	                      &run->recording, err);
}

static void release(struct recorded_run *run)
{
	recording_release(&run->recording);
	arena_release(&run->arena);
	run_folder_close(&run->folder);
	synthetic_release(&run->made);
}

static void assert_same_test(const struct recorded_test *is, const struct recorded_test *was)
{
	assert_string_equal(is->name, was->name);
	assert_int_equal(is->end, was->end);
	assert_string_equal(is->reason, was->reason);
	assert_int_equal(is->begin_ns, was->begin_ns);
	assert_int_equal(is->end_ns, was->end_ns);
	assert_int_equal(is->missed_slots, was->missed_slots);
	assert_int_equal(is->lost_replies, was->lost_replies);
	assert_int_equal(is->condition.channel, was->condition.channel);
	if (was->condition.channel >= 0) {
		assert_int_equal(is->condition.kind, was->condition.kind);
		assert_true(is->condition.a == was->condition.a && is->condition.b == was->condition.b);
		assert_int_equal(is->condition.for_ns, was->condition.for_ns);
		assert_int_equal(is->condition_begin_ns, was->condition_begin_ns);
		assert_int_equal(is->condition_end_ns, was->condition_end_ns);
		assert_ptr_equal(is->step_at.file, was->step_at.file);
		assert_int_equal(is->step_at.line, was->step_at.line);
	}
	assert_int_equal(is->mark_count, was->mark_count);
	for (size_t i = 0; i < was->mark_count; i++) {
		assert_string_equal(is->marks[i].name, was->marks[i].name);
		assert_int_equal(is->marks[i].reached, was->marks[i].reached);
		assert_int_equal(is->marks[i].earliest_ns, was->marks[i].earliest_ns);
		assert_int_equal(is->marks[i].latest_ns, was->marks[i].latest_ns);
	}
	assert_int_equal(is->outcome_count, was->outcome_count);
	for (size_t i = 0; i < was->outcome_count; i++) {
		assert_string_equal(is->outcomes[i].name, was->outcomes[i].name);
		assert_int_equal(is->outcomes[i].status, was->outcomes[i].status);
		assert_int_equal(is->outcomes[i].exception, was->outcomes[i].exception);
		assert_int_equal(is->outcomes[i].expected_exception, was->outcomes[i].expected_exception);
		assert_int_equal(is->outcomes[i].sent_ns, was->outcomes[i].sent_ns);
		assert_int_equal(is->outcomes[i].received_ns, was->outcomes[i].received_ns);
	}
	assert_int_equal(is->command_count, was->command_count);
	for (size_t i = 0; i < was->command_count; i++) {
		assert_int_equal(is->commands[i].channel, was->commands[i].channel);
		assert_true(is->commands[i].value == was->commands[i].value);
		assert_int_equal(is->commands[i].earliest_ns, was->commands[i].earliest_ns);
		assert_int_equal(is->commands[i].latest_ns, was->commands[i].latest_ns);
	}
	assert_int_equal(is->block_count, was->block_count);
	for (size_t i = 0; i < was->block_count; i++) {
		const struct recorded_block *a = &is->blocks[i], *b = &was->blocks[i];
		assert_int_equal(a->rows, b->rows);
		assert_int_equal(a->channel_count, b->channel_count);
		assert_memory_equal(a->channels, b->channels, b->channel_count * sizeof(int));
		assert_memory_equal(a->row0, b->row0, b->rows * (16 + 8 * b->channel_count));
	}
}

static void what_was_written_comes_back_equal(void **state)
{
	(void)state;
	struct recorded_run run;
	struct err err = {0};
	record(&run, "equal");
	assert_int_equal(reopen(&run, &err), 0);
	for (int i = 0; i < SYN_TESTS; i++) {
		const struct recorded_test *was = run.made.suite_result.tests[i].recorded;
		if (was)
			assert_same_test(run.recording.tests[0][i], was);
		else
			assert_null(run.recording.tests[0][i]);
	}
	const struct run_facts *is = &run.recording.facts, *was = &run.made.run.facts;
	assert_ptr_equal(is->rig, was->rig);
	assert_string_equal(is->tool_version, was->tool_version);
	assert_string_equal(is->started_utc, was->started_utc);
	assert_string_equal(is->host, was->host);
	assert_true(is->rehearsal == was->rehearsal && is->partial == was->partial);
	assert_string_equal(is->defect, was->defect);
	assert_true(is->seed == was->seed);
	assert_int_equal(is->duration_ns, was->duration_ns);
	assert_false(is->aborted);
	assert_true(is->rest_confirmed && is->rest_was_needed);
	assert_string_equal(is->rest_reason, was->rest_reason);
	assert_string_equal(is->realtime, was->realtime);
	assert_int_equal(is->identity_count, 1);
	assert_string_equal(is->identities[0].device, "controller");
	assert_string_equal(is->identities[0].text, was->identities[0].text);
	assert_int_equal(is->link_count, 2);
	assert_memory_equal(&is->links[0].requests, &was->links[0].requests, 5 * sizeof(uint64_t));
	release(&run);
}

static void the_first_line_says_what_to_load(void **state)
{
	(void)state;
	struct recorded_run run;
	struct recording_head head;
	struct err err = {0};
	record(&run, "head");
	assert_int_equal(recording_head_read(run.folder.path, &run.arena, &head, &err), 0);
	assert_string_equal(head.rig, "invented-bench");
	assert_int_equal(head.suite_count, 1);
	assert_string_equal(head.suites[0].name, "release");
	assert_int_equal(head.suites[0].override_count, 1);
	assert_string_equal(head.suites[0].overrides[0].name, "half_speed");
	assert_string_equal(head.suites[0].overrides[0].value, "1200 rpm");
	assert_true(head.suites[0].partial);
	assert_int_equal(head.suites[0].selected_count, SYN_TESTS - 1);
	assert_string_equal(head.suites[0].selected[1], "SPD-02[speed=1500rpm]");
	release(&run);
}

static void a_test_is_found_by_name_in_a_newer_suite(void **state)
{
	(void)state;
	struct recorded_run run;
	struct err err = {0};
	record(&run, "newer");
	/* The newer suite: another test first, then the second one of the old suite. */
	struct test tests[2] = {run.made.suite.tests[0], run.made.suite.tests[1]};
	tests[0].name = "NEW-01";
	struct suite newer = run.made.suite;
	newer.tests = tests;
	newer.test_count = 2;
	const struct suite *suites[1] = {&newer};
	assert_int_equal(
	    recording_open(run.folder.path, &run.made.rig, suites, 1, &run.arena, &run.recording, &err),
	    0);
	assert_null(run.recording.tests[0][0]);
	assert_same_test(run.recording.tests[0][1], run.made.suite_result.tests[1].recorded);
	release(&run);
}

static void an_attempt_that_was_not_made_is_told(void **state)
{
	(void)state;
	struct recorded_run run;
	struct err err = {0};
	record(&run, "attempts");
	struct step *steps = run.made.suite.tests[0].stimulus;
	steps[1] = steps[3];
	steps[1].attempt.name = "another";
	assert_int_equal(reopen(&run, &err), 0);
	const struct recorded_test *test = run.recording.tests[0][0];
	assert_int_equal(test->outcome_count, 2);
	assert_string_equal(test->outcomes[1].name, "another");
	assert_int_equal(test->outcomes[1].status, OUTCOME_NOT_MADE);
	release(&run);
}

static void the_condition_is_found_in_the_suite_where_the_event_does_not_tell_it(void **state)
{
	(void)state;
	struct recorded_run run;
	struct err err = {0};
	record(&run, "condition");
	char *bytes = scratch_read(scratch_path("condition/journal.jsonl"), NULL);
	char *at = strstr(bytes, "\"condition\":");
	assert_non_null(at);
	memcpy(at, "\"conditioN\":", 12);
	assert_true(scratch_write(scratch_path("condition/journal.jsonl"), bytes, strlen(bytes)));
	free(bytes);
	assert_int_equal(reopen(&run, &err), 0);
	assert_same_test(run.recording.tests[0][3], run.made.suite_result.tests[3].recorded);
	release(&run);
}

/* A journal of one test with one command whose times are reversed. */
static int open_with_command(const char *name, int status, struct err *err)
{
	struct recorded_run run = {0};
	struct journal *journal;
	synthetic_make(&run.made, "", "");
	arena_init(&run.arena, 0);
	assert_int_equal(run_folder_new(scratch_path(name), "", "bench", &run.folder, NULL), 0);
	assert_int_equal(journal_new(&run.folder, &run.made.rig, run.made.suites, 1, &journal, NULL),
	                 0);
	assert_int_equal(journal_begin(journal, &run.made.run.facts, NULL), 0);
	struct journal_event events[3] = {syn_event(JOURNAL_TEST_BEGIN, 1, 0),
	                                  syn_event(JOURNAL_STIMULUS, 2, 0),
	                                  syn_event(JOURNAL_COMMAND, 3, 0)};
	events[2].channel = SYN_COMMAND;
	events[2].value = 1500;
	events[2].earliest_ns = 9;
	events[2].status = status;
	for (int i = 0; i < 3; i++)
		assert_int_equal(journal_write(journal, &events[i], NULL), 0);
	assert_int_equal(journal_close(journal, NULL), 0);
	int rc = reopen(&run, err);
	if (rc == 0)
		assert_int_equal(run.recording.tests[0][0]->command_count, 0);
	release(&run);
	return rc;
}

static void a_command_that_failed_is_none_whatever_its_times(void **state)
{
	(void)state;
	struct err err = {0};
	assert_int_equal(open_with_command("failed", 1, &err), 0);
	assert_int_equal(open_with_command("done", 0, &err), -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_non_null(strstr(err.message, "without its times"));
}

static void a_journal_cut_at_any_byte_is_read_and_said_to_be_cut(void **state)
{
	(void)state;
	struct recorded_run run;
	size_t length = 0;
	record(&run, "cut");
	char *bytes = scratch_read(scratch_path("cut/journal.jsonl"), &length);
	size_t first = (size_t)(strchr(bytes, '\n') - bytes) + 1;
	int whole_tests = -1;
	for (size_t cut = 0; cut<length; cut += cut> length - 150 ? 1 : 37) {
		struct err err = {0};
		assert_true(scratch_write(scratch_path("cut/journal.jsonl"), bytes, cut));
		int rc = reopen(&run, &err);
		if (cut < first) {
			assert_int_equal(rc, -1);
			assert_int_equal(err.code, ERR_FILE);
			continue;
		}
		assert_int_equal(rc, 0);
		assert_true(run.recording.facts.aborted);
		assert_non_null(strstr(run.recording.facts.abort_reason, "recording ends"));
		int whole = 0;
		for (int i = 0; i < SYN_TESTS; i++) {
			const struct recorded_test *test = run.recording.tests[0][i];
			whole += test && test->end != TEST_ABORTED;
			if (test && test->end == TEST_ABORTED)
				assert_non_null(strstr(test->reason, "recording ends"));
		}
		assert_true(whole >= whole_tests);
		whole_tests = whole;
		if (run.recording.facts.rest_confirmed)
			assert_non_null(memmem(bytes, cut, "\"rest\"", 6));
		recording_release(&run.recording);
	}
	assert_int_equal(whole_tests, 4);
	free(bytes);
	release(&run);
}

/* Each row spoils one place of the journal; the message names the line and the fault. */
static void a_spoilt_journal_is_refused_with_its_line(void **state)
{
	(void)state;
	static const struct {
		const char *find, *put, *why;
	} rows[] = {
	    {"{\"time\":1,", "{\"time\"x1,", "no JSON object"},
	    {"\"run_begin\"", "\"run_begun\"", "does not begin as"},
	    {"\"format\":1", "\"format\":2", "does not know"},
	    {"\"stimulus\"", "\"stimuluS\"", "no event"},
	    {"\"invented-bench\"", "\"invented-besch\"", "is a run of the rig"},
	    {"\"name\":\"release\"", "\"name\":\"releasE\"", "is a run of the suite"},
	    {"\"end\":\"completed\"", "\"end\":\"completeD\"", "not known"},
	    {"\"outcome\":\"exception\"", "\"outcome\":\"exceptioN\"", "an attempt without"},
	    {"SPD-01_speed_1500rpm_.0.npy", "../../../../etc/passwd_.npy", "none of ours"},
	    {"SPD-01_speed_1500rpm_.0.npy", "SPD-09_speed_1500rpm_.0.npy", "cannot be opened"},
	    {"\"event\":\"block\"", "\"event\":\"abort\"", ""},
	};
	struct recorded_run run;
	size_t length = 0;
	record(&run, "spoilt");
	char *bytes = scratch_read(scratch_path("spoilt/journal.jsonl"), &length);
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
		struct err err = {0};
		char *copy = malloc(length);
		assert_non_null(copy);
		memcpy(copy, bytes, length);
		char *at = memmem(copy, length, rows[i].find, strlen(rows[i].find));
		assert_non_null(at);
		memcpy(at, rows[i].put, strlen(rows[i].put));
		assert_true(scratch_write(scratch_path("spoilt/journal.jsonl"), copy, length));
		int rc = reopen(&run, &err);
		free(copy);
		if (!*rows[i].why) { /* an event of another kind is not a fault of the file */
			assert_int_equal(rc, 0);
			recording_release(&run.recording);
			continue;
		}
		assert_int_equal(rc, -1);
		assert_int_equal(err.code, ERR_FILE);
		if (!strstr(err.message, rows[i].why))
			fail_msg("'%s' does not say '%s'", err.message, rows[i].why);
	}
	free(bytes);
	release(&run);
}

static void a_sealed_folder_that_was_changed_is_refused(void **state)
{
	(void)state;
	struct recorded_run run;
	struct err err = {0};
	size_t length = 0;
	record(&run, "tampered");
	assert_int_equal(run_folder_seal(&run.folder, &err), 0);
	assert_int_equal(reopen(&run, &err), 0);
	recording_release(&run.recording);
	/* One bit of one value. */
	const char *path = scratch_path("tampered/samples/SPD-01_speed_1500rpm_.0.npy");
	char *bytes = scratch_read(path, &length);
	if (!bytes || length < 100) {
		fail();
		return;
	}
	bytes[length - 9] ^= 1;
	assert_true(scratch_write(path, bytes, length));
	assert_int_equal(reopen(&run, &err), -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_non_null(strstr(err.message, "changed samples/SPD-01_speed_1500rpm_.0.npy"));
	bytes[length - 9] ^= 1;
	assert_true(scratch_write(path, bytes, length));
	free(bytes);
	err = (struct err){0};
	assert_int_equal(reopen(&run, &err), 0);
	recording_release(&run.recording);
	assert_int_equal(unlink(path), 0);
	assert_int_equal(reopen(&run, &err), -1);
	assert_non_null(strstr(err.message, "missing samples/"));
	release(&run);
}

static void a_folder_that_is_none_is_refused(void **state)
{
	(void)state;
	struct recorded_run run = {0};
	struct err err = {0};
	synthetic_make(&run.made, "", "");
	arena_init(&run.arena, 0);
	assert_int_equal(recording_open(scratch, &run.made.rig, run.made.suites, 1, &run.arena,
	                                &run.recording, &err),
	                 -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_non_null(strstr(err.message, "no run folder"));
	run.folder.fd = -1;
	release(&run);
}

static void each_allocation_may_fail(void **state)
{
	(void)state;
	struct recorded_run run;
	record(&run, "memory");
	bool opened = false;
	for (long n = 1; n < 1000 && !opened; n++) {
		struct err err = {0};
		struct arena arena;
		struct recording recording;
		arena_init(&arena, 0);
		arena_fail_at(n);
		int rc = recording_open(run.folder.path, &run.made.rig, run.made.suites, 1, &arena,
		                        &recording, &err);
		arena_fail_at(0);
		opened = rc == 0;
		if (opened)
			recording_release(&recording);
		else
			assert_int_equal(err.code, ERR_NOMEM);
		arena_release(&arena);
	}
	assert_true(opened);
	release(&run);
}

static void a_journal_line_that_does_not_fit_on_the_disk_is_taken_back(void **state)
{
	(void)state;
	struct synthetic made;
	struct run_folder folder;
	struct journal *journal;
	struct err err = {0};
	synthetic_make(&made, "", "text");
	assert_int_equal(run_folder_new(scratch_path("disk"), "", "bench", &folder, &err), 0);
	assert_int_equal(journal_new(&folder, &made.rig, made.suites, 1, &journal, &err), 0);
	assert_int_equal(journal_begin(journal, &made.run.facts, &err), 0);
	struct journal_event event = syn_event(JOURNAL_NOTE, 5, -1);
	memset(event.text, 'x', sizeof event.text - 1);
	scratch_disk(2000);
	int rc = 0;
	for (int i = 0; i < 100 && rc == 0; i++)
		rc = journal_write(journal, &event, &err);
	scratch_disk_again();
	assert_int_equal(rc, -1);
	assert_int_equal(err.code, ERR_OUTPUT);
	event.text[5] = '\0';
	assert_int_equal(journal_write(journal, &event, NULL), 0);
	assert_int_equal(journal_close(journal, NULL), 0);
	size_t length = 0;
	char *bytes = scratch_read(scratch_path("disk/journal.jsonl"), &length);
	assert_int_equal(bytes[length - 1], '\n');
	static const char last[] = "\n{\"time\":5,\"event\":\"note\",\"text\":\"xxxxx\"}\n";
	assert_memory_equal(bytes + length - strlen(last), last, strlen(last));
	free(bytes);
	run_folder_close(&folder);
	synthetic_release(&made);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(what_was_written_comes_back_equal),
	    cmocka_unit_test(the_first_line_says_what_to_load),
	    cmocka_unit_test(a_test_is_found_by_name_in_a_newer_suite),
	    cmocka_unit_test(an_attempt_that_was_not_made_is_told),
	    cmocka_unit_test(the_condition_is_found_in_the_suite_where_the_event_does_not_tell_it),
	    cmocka_unit_test(a_command_that_failed_is_none_whatever_its_times),
	    cmocka_unit_test(a_journal_cut_at_any_byte_is_read_and_said_to_be_cut),
	    cmocka_unit_test(a_spoilt_journal_is_refused_with_its_line),
	    cmocka_unit_test(a_sealed_folder_that_was_changed_is_refused),
	    cmocka_unit_test(a_folder_that_is_none_is_refused),
	    cmocka_unit_test(each_allocation_may_fail),
	    cmocka_unit_test(a_journal_line_that_does_not_fit_on_the_disk_is_taken_back),
	};
	return cmocka_run_group_tests(tests, scratch_make, scratch_remove) != 0;
}
