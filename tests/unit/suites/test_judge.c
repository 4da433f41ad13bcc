/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Verdicts on recordings made by hand: a drive with a life counter and one
 * channel, a torque transducer without one. The check is made here too, so
 * that only the judging is under test: it gives the mean of a channel with
 * the limits that its samples set.
 */
#include "judge.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "near.h"

enum { SPEED = 0, LIFE, TORQUE, CHANNELS };
enum { ROWS = 500, COLUMNS = 2 };
#define STEP_NS (2 * NS_PER_MS)

struct row {
	int64_t sent, received;
	double values[COLUMNS];
};

struct fixture {
	struct arena arena;
	struct rig rig;
	struct rig_channel channels[CHANNELS];
	struct channel_info infos[CHANNELS];
	struct rig_device devices[2];
	struct suite suite;
	struct test tests[3];
	struct check_use use;
	struct limit limit;
	struct row rows[ROWS];
	int block_channels[COLUMNS];
	struct recorded_block blocks[2];
	struct recorded_test recorded;
	struct test_result result;
};

/* --- a check of the test's own: the mean of channel SPEED, +- 1 ------------ */

static const struct metric_kind MEAN[] = {{"mean", METRIC_LEVEL, "mean of the channel", NULL}};
static const struct field_table NO_FIELDS = {"mean", "", NULL, 0};

static int evaluate_mean(const struct check_input *in, const void *params, struct metric *metrics,
                         size_t *ret_count, struct err *reterr)
{
	(void)params;
	(void)reterr;
	const struct series *s = &in->series[SPEED];
	char why[200] = "it was not sampled";
	*ret_count = 1;
	if (s->rows == 0 || series_fault(s, 0, s->rows - 1, 0, why, sizeof why)) {
		metric_unknown(&metrics[0], &MEAN[0], s->channel->unit, EVIDENCE_SELF_REPORTED, "%s", why);
		return 0;
	}
	double sum = 0;
	for (size_t i = 0; i < s->rows; i++)
		sum += series_value(s, i);
	double mean = sum / (double)s->rows;
	metrics[0] = (struct metric){.kind = &MEAN[0],
	                             .value = mean,
	                             .low = mean - 1,
	                             .high = mean + 1,
	                             .coverage = 0.95,
	                             .unit = s->channel->unit};
	return 0;
}

static int64_t seen_interval_ns;

static int evaluate_broken(const struct check_input *in, const void *params, struct metric *metrics,
                           size_t *ret_count, struct err *reterr)
{
	(void)params;
	(void)metrics;
	(void)ret_count;
	seen_interval_ns = in->sample_ns;
	return err_set(reterr, ERR_STATE, "a contradiction inside");
}

static const struct check_kind BROKEN_CHECK = {.name = "broken",
                                               .text = "broken",
                                               .fields = &NO_FIELDS,
                                               .metrics = MEAN,
                                               .metric_count = 1,
                                               .evaluate = evaluate_broken};

static const struct check_kind MEAN_CHECK = {.name = "mean",
                                             .text = "mean",
                                             .fields = &NO_FIELDS,
                                             .metrics = MEAN,
                                             .metric_count = 1,
                                             .evaluate = evaluate_mean};

/* --- a bench and a recording in which everything is right ------------------ */

static void name_channel(struct fixture *f, int channel, const char *name, int device)
{
	f->infos[channel] = (struct channel_info){.name = name, .unit = unit_one()};
	f->channels[channel] = (struct rig_channel){.device = device,
	                                            .place = PLACE_INPUT_REGISTER,
	                                            .codec = {.type = CODEC_INT16, .scale = 1}};
	f->channels[channel].info = f->infos[channel];
}

static int setup(void **state)
{
	struct fixture *f = calloc(1, sizeof *f);
	arena_init(&f->arena, 0);
	name_channel(f, SPEED, "speed", 0);
	name_channel(f, LIFE, "life", 0);
	name_channel(f, TORQUE, "torque", 1);
	f->devices[0] =
	    (struct rig_device){.name = "drive", .life = LIFE, .life_within_ns = 100 * NS_PER_MS};
	f->devices[1] = (struct rig_device){.name = "transducer", .life = -1};
	f->rig = (struct rig){.name = "hand-made",
	                      .channels = f->channels,
	                      .infos = f->infos,
	                      .channel_count = CHANNELS,
	                      .devices = f->devices,
	                      .device_count = 2};
	f->limit = (struct limit){.metric = 0, .min = 90, .max = 110};
	f->use = (struct check_use){
	    .kind = &MEAN_CHECK, .name = "mean", .limits = &f->limit, .limit_count = 1};
	for (int i = 0; i < 3; i++)
		f->tests[i] = (struct test){.checks = &f->use, .check_count = 1, .selected = true};
	f->tests[0].name = "T-1";
	f->tests[1].name = "T-2";
	f->tests[2].name = "T-3";
	f->suite = (struct suite){.name = "s", .tests = f->tests, .test_count = 3};
	for (int i = 0; i < ROWS; i++)
		f->rows[i] = (struct row){i * STEP_NS, i * STEP_NS + NS_PER_MS, {100, i % 65536}};
	f->block_channels[0] = SPEED;
	f->block_channels[1] = LIFE;
	f->blocks[0] = (struct recorded_block){.channels = f->block_channels,
	                                       .channel_count = COLUMNS,
	                                       .rows = ROWS,
	                                       .row0 = (const unsigned char *)f->rows};
	f->recorded = (struct recorded_test){.name = "T-2",
	                                     .end = TEST_COMPLETED,
	                                     .end_ns = ROWS * STEP_NS,
	                                     .blocks = f->blocks,
	                                     .block_count = 1,
	                                     .condition = {.channel = -1}};
	*state = f;
	return 0;
}

static int teardown(void **state)
{
	struct fixture *f = *state;
	arena_release(&f->arena);
	free(f);
	return 0;
}

static enum verdict judged(struct fixture *f)
{
	struct err err = {0};
	assert_int_equal(
	    judge_test(&f->rig, &f->suite, &f->tests[1], &f->recorded, &f->arena, &f->result, &err), 0);
	assert_string_not_equal(f->result.reason, "");
	return f->result.verdict;
}

static void assert_reason(const struct fixture *f, const char *part)
{
	if (!strstr(f->result.reason, part))
		fail_msg("'%s' is not in the reason: %s", part, f->result.reason);
}

/* --- limits ---------------------------------------------------------------- */

static void a_value_inside_its_limits_passes(void **state)
{
	struct fixture *f = *state;
	assert_int_equal(judged(f), VERDICT_PASS);
	assert_int_equal(f->result.check_count, 1);
	assert_int_equal(f->result.checks[0].verdict, VERDICT_PASS);
	assert_near(f->result.checks[0].metrics[0].metric.value, 100, 0, "");
}

static void a_value_outside_its_limits_fails(void **state)
{
	struct fixture *f = *state;
	f->limit.max = 98.5; /* the interval is 99 to 101 */
	assert_int_equal(judged(f), VERDICT_FAIL);
	assert_reason(f, "mean");
}

static void an_interval_across_its_limit_is_inconclusive(void **state)
{
	struct fixture *f = *state;
	f->limit.max = 100.5;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	f->limit.rule = DECISION_SIMPLE;
	assert_int_equal(judged(f), VERDICT_PASS);
}

static void one_failed_limit_of_two_fails_the_test(void **state)
{
	struct fixture *f = *state;
	struct limit limits[2] = {f->limit, f->limit};
	limits[1].min = 200;
	limits[1].max = 300;
	f->use.limits = limits;
	f->use.limit_count = 2;
	assert_int_equal(judged(f), VERDICT_FAIL);
	assert_int_equal(f->result.checks[0].metrics[0].limits[0].verdict, VERDICT_PASS);
	assert_int_equal(f->result.checks[0].metrics[0].limits[1].verdict, VERDICT_FAIL);
}

static void a_test_without_a_limit_never_passes(void **state)
{
	struct fixture *f = *state;
	f->use.limit_count = 0;
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void a_check_that_breaks_makes_the_test_an_error(void **state)
{
	struct fixture *f = *state;
	f->use.kind = &BROKEN_CHECK;
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_reason(f, "a contradiction inside");
}

/* Else the gaps of a fast group would be measured by the interval of a slow one. */
static void checks_are_told_the_shortest_interval(void **state)
{
	struct fixture *f = *state;
	struct sample_group groups[] = {{.every_ns = 100 * NS_PER_MS}, {.every_ns = 2 * NS_PER_MS}};
	f->tests[1].groups = groups;
	f->tests[1].group_count = 2;
	f->use.kind = &BROKEN_CHECK;
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_int_equal(seen_interval_ns, 2 * NS_PER_MS);
}

/* --- data that are none ---------------------------------------------------- */

static void an_emptied_recording_never_passes(void **state)
{
	struct fixture *f = *state;
	f->blocks[0].rows = 0;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	f->recorded.block_count = 0;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
}

static void nan_never_passes(void **state)
{
	struct fixture *f = *state;
	f->rows[250].values[0] = (double)NAN;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	for (int i = 0; i < ROWS; i++)
		f->rows[i].values[0] = (double)NAN;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
}

static void a_life_counter_that_never_moves_makes_every_row_bad(void **state)
{
	struct fixture *f = *state;
	for (int i = 0; i < ROWS; i++)
		f->rows[i].values[1] = 7;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	assert_reason(f, "life");
}

static void a_life_counter_of_nan_proves_nothing(void **state)
{
	struct fixture *f = *state;
	for (int i = 0; i < ROWS; i++)
		f->rows[i].values[1] = (double)NAN;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
}

static void a_counter_that_never_moves_in_a_short_test_is_no_proof_either(void **state)
{
	struct fixture *f = *state;
	f->blocks[0].rows = 20; /* 40 ms, and it need move only once in 100 ms */
	for (int i = 0; i < ROWS; i++)
		f->rows[i].values[1] = 7;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
}

/* The rows that are bad are those after the last movement, up to the next. */
static void rows_are_bad_from_the_last_movement_to_the_next(void **state)
{
	struct fixture *f = *state;
	for (int i = 200; i < 300; i++)
		f->rows[i].values[1] = 200; /* stands for 198 ms of the 100 ms allowed */
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	const struct series *s = &f->result.series[SPEED];
	assert_int_equal(s->bad_count, 1);
	assert_int_equal(s->bad[0].first, 201);
	assert_int_equal(s->bad[0].last, 299);
}

static void a_counter_may_stand_for_as_long_as_the_rig_says(void **state)
{
	struct fixture *f = *state;
	for (int i = 200; i < 245; i++)
		f->rows[i].values[1] = 200; /* 88 ms */
	assert_int_equal(judged(f), VERDICT_PASS);
}

static void a_counter_that_stands_at_the_end_makes_the_end_bad(void **state)
{
	struct fixture *f = *state;
	for (int i = 400; i < ROWS; i++)
		f->rows[i].values[1] = 400;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	assert_int_equal(f->result.series[SPEED].bad[0].first, 401);
	assert_int_equal(f->result.series[SPEED].bad[0].last, ROWS - 1);
}

/* The counter lies in a block of its own, read ten times as rarely. */
static void rows_of_another_block_are_bad_by_time(void **state)
{
	struct fixture *f = *state;
	int life_channels[1] = {LIFE};
	struct life_row {
		int64_t sent, received;
		double value;
	} rows[50];
	for (int i = 0; i < 50; i++)
		rows[i] =
		    (struct life_row){i * 10 * STEP_NS, i * 10 * STEP_NS + NS_PER_MS, i < 20 ? i : 20};
	f->block_channels[1] = TORQUE;
	f->blocks[1] = (struct recorded_block){.channels = life_channels,
	                                       .channel_count = 1,
	                                       .rows = 50,
	                                       .row0 = (const unsigned char *)rows};
	f->recorded.block_count = 2;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
	/* It moved for the last time in its row 20, which is row 200 of the other block. */
	assert_int_equal(f->result.series[SPEED].bad[0].first, 201);
	assert_int_equal(f->result.series[SPEED].bad[0].last, ROWS - 1);
	assert_int_equal(f->result.series[TORQUE].bad_count, 0);
}

static void a_device_whose_counter_was_not_recorded_has_no_such_proof(void **state)
{
	struct fixture *f = *state;
	f->block_channels[1] = TORQUE;
	assert_int_equal(judged(f), VERDICT_PASS);
}

static void a_counter_that_was_recorded_without_rows_is_no_proof(void **state)
{
	struct fixture *f = *state;
	int life_channels[1] = {LIFE};
	f->block_channels[1] = TORQUE;
	f->blocks[1] = (struct recorded_block){.channels = life_channels, .channel_count = 1};
	f->recorded.block_count = 2;
	assert_int_equal(judged(f), VERDICT_INCONCLUSIVE);
}

/* --- ends ------------------------------------------------------------------ */

static void await_of(struct fixture *f, double wanted, int64_t dwell_ns)
{
	f->recorded.end = TEST_AWAIT_EXPIRED;
	f->recorded.condition = (struct condition){
	    .channel = SPEED, .kind = CONDITION_ABOVE, .a = wanted, .for_ns = dwell_ns};
	f->recorded.condition_begin_ns = 100 * NS_PER_MS;
	f->recorded.condition_end_ns = 900 * NS_PER_MS;
}

static void an_expired_await_fails_where_samples_prove_it(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 0);
	assert_int_equal(judged(f), VERDICT_FAIL);
	assert_reason(f, "speed above 150");
	assert_int_equal(f->result.checks[0].verdict, VERDICT_SKIPPED);
}

static void an_expired_await_is_an_error_where_it_held_after_all(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 0);
	f->rows[200].values[0] = 160;
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void an_expired_await_with_a_dwell_fails_where_it_held_too_shortly(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 50 * NS_PER_MS);
	for (int i = 200; i < 210; i++)
		f->rows[i].values[0] = 160; /* at most 23 ms */
	assert_int_equal(judged(f), VERDICT_FAIL);
	for (int i = 210; i < 230; i++)
		f->rows[i].values[0] = 160;
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void an_expired_await_is_an_error_where_samples_are_missing(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 0);
	f->rows[200].values[0] = (double)NAN;
	assert_int_equal(judged(f), VERDICT_ERROR);
	f->rows[200].values[0] = 100;
	for (int i = 200; i < ROWS; i++) { /* a gap of 100 ms */
		f->rows[i].sent += 100 * NS_PER_MS;
		f->rows[i].received += 100 * NS_PER_MS;
	}
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void an_expired_await_is_an_error_where_the_begin_or_end_was_not_seen(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 0);
	f->blocks[0].rows = 300; /* seen up to 600 ms of 900 ms */
	assert_int_equal(judged(f), VERDICT_ERROR);
	f->blocks[0].rows = 0;
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void an_expired_await_is_an_error_where_the_life_counter_stands(void **state)
{
	struct fixture *f = *state;
	await_of(f, 150, 0);
	for (int i = 0; i < ROWS; i++)
		f->rows[i].values[1] = 7;
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_reason(f, "life");
}

static void a_failed_precondition_is_an_error_that_names_the_test_before(void **state)
{
	struct fixture *f = *state;
	f->recorded.end = TEST_PRECONDITION;
	f->recorded.condition = (struct condition){.channel = SPEED, .kind = CONDITION_BELOW, .a = 10};
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_reason(f, "speed below 10");
	assert_reason(f, "T-1");
	f->tests[0].selected = false;
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_null(strstr(f->result.reason, "T-1"));
}

static void an_aborted_test_is_an_error_with_the_cause(void **state)
{
	struct fixture *f = *state;
	f->recorded.end = TEST_ABORTED;
	(void)snprintf(f->recorded.reason, sizeof f->recorded.reason, "interlock bench_speed");
	assert_int_equal(judged(f), VERDICT_ERROR);
	assert_reason(f, "interlock bench_speed");
	f->recorded.end = TEST_NOT_STARTED;
	assert_int_equal(judged(f), VERDICT_ERROR);
}

static void a_test_without_a_recording_is_skipped_only_by_selection(void **state)
{
	struct fixture *f = *state;
	struct err err = {0};
	assert_int_equal(
	    judge_test(&f->rig, &f->suite, &f->tests[1], NULL, &f->arena, &f->result, &err), 0);
	assert_int_equal(f->result.verdict, VERDICT_ERROR);
	f->tests[1].selected = false;
	assert_int_equal(
	    judge_test(&f->rig, &f->suite, &f->tests[1], NULL, &f->arena, &f->result, &err), 0);
	assert_int_equal(f->result.verdict, VERDICT_SKIPPED);
}

static void a_recording_of_a_foreign_channel_is_refused(void **state)
{
	struct fixture *f = *state;
	struct err err = {0};
	f->block_channels[0] = CHANNELS;
	assert_int_equal(
	    judge_test(&f->rig, &f->suite, &f->tests[1], &f->recorded, &f->arena, &f->result, &err),
	    -1);
	assert_int_equal(err.code, ERR_STATE);
}

static void memory_that_runs_out_is_an_error_and_no_verdict(void **state)
{
	struct fixture *f = *state;
	int rc = -1;
	long n = 1;
	for (; rc < 0 && n < 200; n++) {
		struct err err = {0};
		arena_fail_at(n);
		rc =
		    judge_test(&f->rig, &f->suite, &f->tests[1], &f->recorded, &f->arena, &f->result, &err);
		arena_fail_at(0);
		if (rc < 0)
			assert_int_equal(err.code, ERR_NOMEM);
	}
	assert_int_equal(rc, 0);
	assert_true(n > 4);
}

/* --- exit codes ------------------------------------------------------------ */

struct exit_row {
	const char *name;
	size_t pass, fail, inconclusive, error, skipped;
	bool aborted, moved, at_rest;
	int expected;
};

/* Ranked 4, 3, 1, 2, 0 (README, exit codes). */
static const struct exit_row EXITS[] = {
    {"all pass", 3, 0, 0, 0, 0, false, true, true, 0},
    {"all pass, some not selected", 3, 0, 0, 0, 4, false, true, true, 0},
    {"one fails", 2, 1, 0, 0, 0, false, true, true, 1},
    {"a failure outranks an error", 0, 1, 1, 1, 0, false, true, true, 1},
    {"inconclusive", 2, 0, 1, 0, 0, false, true, true, 2},
    {"error", 2, 0, 0, 1, 0, false, true, true, 2},
    {"nothing was judged", 0, 0, 0, 0, 5, false, false, false, 2},
    {"aborted outranks a failure", 1, 1, 0, 1, 0, true, true, true, 3},
    {"aborted with all passed so far", 3, 0, 0, 0, 0, true, true, true, 3},
    {"not at rest outranks everything", 3, 0, 0, 0, 0, false, true, false, 4},
    {"not at rest after an abort", 1, 1, 1, 1, 0, true, true, false, 4},
    {"rest was not needed", 3, 0, 0, 0, 0, false, false, false, 0},
};

static void exit_codes_are_ranked(void **state)
{
	(void)state;
	for (size_t i = 0; i < FIELD_COUNT(EXITS); i++) {
		const struct exit_row *row = &EXITS[i];
		const size_t counts[] = {row->pass, row->fail, row->inconclusive, row->error, row->skipped};
		struct test_result tests[16] = {0};
		size_t count = 0;
		for (size_t v = 0; v < 5; v++)
			for (size_t k = 0; k < counts[v]; k++)
				tests[count++].verdict = (enum verdict)v;
		struct suite_result suite = {.tests = tests, .test_count = count};
		struct run_result run = {.suites = &suite, .suite_count = 1};
		run.facts.aborted = row->aborted;
		run.facts.rest_was_needed = row->moved;
		run.facts.rest_confirmed = row->at_rest;
		judge_totals(&run);
		if (run.exit_code != row->expected)
			fail_msg("%s: exit code %d, expected %d", row->name, run.exit_code, row->expected);
		assert_int_equal(run.totals.tests, count);
		assert_int_equal(run.totals.pass, row->pass);
		assert_int_equal(run.totals.skipped, row->skipped);
		assert_int_equal(suite.totals.error, row->error);
	}
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
	const struct CMUnitTest tests[] = {
	    TEST(a_value_inside_its_limits_passes),
	    TEST(a_value_outside_its_limits_fails),
	    TEST(an_interval_across_its_limit_is_inconclusive),
	    TEST(one_failed_limit_of_two_fails_the_test),
	    TEST(a_test_without_a_limit_never_passes),
	    TEST(a_check_that_breaks_makes_the_test_an_error),
	    TEST(checks_are_told_the_shortest_interval),
	    TEST(an_emptied_recording_never_passes),
	    TEST(nan_never_passes),
	    TEST(a_life_counter_that_never_moves_makes_every_row_bad),
	    TEST(a_life_counter_of_nan_proves_nothing),
	    TEST(a_counter_that_never_moves_in_a_short_test_is_no_proof_either),
	    TEST(rows_are_bad_from_the_last_movement_to_the_next),
	    TEST(a_counter_may_stand_for_as_long_as_the_rig_says),
	    TEST(a_counter_that_stands_at_the_end_makes_the_end_bad),
	    TEST(rows_of_another_block_are_bad_by_time),
	    TEST(a_device_whose_counter_was_not_recorded_has_no_such_proof),
	    TEST(a_counter_that_was_recorded_without_rows_is_no_proof),
	    TEST(an_expired_await_fails_where_samples_prove_it),
	    TEST(an_expired_await_is_an_error_where_it_held_after_all),
	    TEST(an_expired_await_with_a_dwell_fails_where_it_held_too_shortly),
	    TEST(an_expired_await_is_an_error_where_samples_are_missing),
	    TEST(an_expired_await_is_an_error_where_the_begin_or_end_was_not_seen),
	    TEST(an_expired_await_is_an_error_where_the_life_counter_stands),
	    TEST(a_failed_precondition_is_an_error_that_names_the_test_before),
	    TEST(an_aborted_test_is_an_error_with_the_cause),
	    TEST(a_test_without_a_recording_is_skipped_only_by_selection),
	    TEST(a_recording_of_a_foreign_channel_is_refused),
	    TEST(memory_that_runs_out_is_an_error_and_no_verdict),
	    cmocka_unit_test(exit_codes_are_ranked),
	};
	return RUN_GROUP(tests);
}
