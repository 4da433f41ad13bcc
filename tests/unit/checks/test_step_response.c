/* SPDX-License-Identifier: Apache-2.0 */
/* step_response on recordings as a bench makes them: verdicts, and when there is none. */
#include "decision.h"
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int speed, command, load;
};

struct story {
	double from, to, zeta, omega, noise, end_ms, before_ms, drift;
};

static const struct story usual = {100, 700, 0.5, 60, 0.3, 1000, 200, 0};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	bench->command =
	    recording_channel(&bench->rec, "speed_command", "rad/s_mech", EVIDENCE_SELF_REPORTED);
	bench->load = recording_channel(&bench->rec, "load_command", "Nm", EVIDENCE_INDEPENDENT);
	bench->rec.channels[bench->speed].resolution = 0.2;
	check_use(&bench->use, "step_response");
	check_int(&bench->use, "channel", bench->speed);
}

static double answer(const struct story *story, double t_s)
{
	if (t_s <= 0)
		return story->from;
	double x = t_s * story->omega, damped = sqrt(1 - story->zeta * story->zeta);
	double y =
	    1 - exp(-story->zeta * x) * (cos(damped * x) + story->zeta / damped * sin(damped * x));
	return story->from + (story->to - story->from) * y + story->drift * t_s;
}

static void play(struct bench *bench, const struct story *story)
{
	struct recording *rec = &bench->rec;
	struct random random = {31};
	recording_clear(rec);
	rec->begin_ns = MS(-story->before_ms);
	rec->end_ns = MS(story->end_ms);
	check_int(&bench->use, "from", recording_mark(rec, "commanded", MS(0), MS(0.4)));
	recording_command(rec, bench->command, story->to * 2 * 3.14159265358979 / 60, MS(0), MS(0.2));
	recording_command(rec, bench->load, 1, MS(0.2), MS(0.4));
	for (double t = -story->before_ms; t < story->end_ms; t += 2) {
		double y = answer(story, (t + 0.2) / 1e3) + story->noise * random_normal(&random);
		recording_add(rec, bench->speed, MS(t), MS(t + 0.4), 0.2 * round(y / 0.2));
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static enum verdict at_most(const struct metric *metric, double max)
{
	char reason[512];
	struct limit limit = {.min = -(double)INFINITY, .max = max};
	enum verdict verdict = decide(metric, &limit, reason, sizeof reason);
	if (verdict != VERDICT_PASS)
		assert_true(strlen(reason) > 20);
	return verdict;
}

/* Limits just beyond, just before and at the true value. */
static void limits_are_passed_failed_and_left_open(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	check_run(&bench.use, &bench.rec);
	static const struct {
		const char *metric;
		double truth, near;
	} rows[] = {
	    {"overshoot", 16.303353, 0.4},       {"rise_time", 1.637573 / 60, 0.001},
	    {"peak_time", 3.627599 / 60, 0.004}, {"settling_time", 8.076349 / 60, 0.005},
	    {"dead_time", 0.0054, 0.001}, /* 5 % level; by interpolating the closed form */
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		const struct metric *metric = check_metric(&bench.use, rows[i].metric);
		assert_known(metric);
		assert_int_equal(at_most(metric, rows[i].truth + rows[i].near), VERDICT_PASS);
		assert_int_equal(at_most(metric, rows[i].truth - rows[i].near), VERDICT_FAIL);
		assert_int_equal(at_most(metric, metric->value), VERDICT_INCONCLUSIVE);
		assert_int_equal(metric->evidence, EVIDENCE_SELF_REPORTED);
		assert_true(metric->point_count >= 1);
	}
	recording_release(&bench.rec);
}

static void the_command_of_the_same_dimension_is_the_target(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = usual;
	play(&bench, &story);
	const struct metric *error = run(&bench, "steady_state_error");
	assert_true(error->low <= 0 && error->high >= 0 && error->high - error->low < 0.3);
	bench.rec.commands[0].value += 3.0 * 2 * 3.14159265358979 / 60;
	error = run(&bench, "steady_state_error");
	assert_near(error->value, -3, 0.1, "rpm");
	bench.rec.command_count = 0;
	assert_unknown(run(&bench, "steady_state_error"), "no command");
	assert_known(check_metric(&bench.use, "overshoot"));
	/* A command long before the mark counts only where the channel is named. */
	recording_command(&bench.rec, bench.command, 70, MS(-150), MS(-149));
	assert_unknown(run(&bench, "steady_state_error"), "no command");
	check_int(&bench.use, "command", bench.command);
	assert_known(run(&bench, "steady_state_error"));
	recording_release(&bench.rec);
}

static void the_instruments_limit_of_error_is_not_averaged_away(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	bench.rec.channels[bench.speed].accuracy = (struct accuracy){.given = true, .absolute = 3};
	const struct metric *error = run(&bench, "steady_state_error");
	assert_near((error->high - error->low) / 2, 2 * 3 / sqrt(3), 0.1, "rpm");
	recording_release(&bench.rec);
}

static void ripple_is_that_of_the_settled_part(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = usual;
	story.noise = 2;
	check_ns(&bench.use, "initial_for", MS(200));
	play(&bench, &story);
	const struct metric *rms = run(&bench, "ripple_rms");
	assert_known(rms);
	assert_true(rms->low <= 2 && rms->high >= 2 && rms->high - rms->low < 1);
	const struct metric *peak = check_metric(&bench.use, "ripple");
	assert_true(peak->value > 3 * 2 && peak->value < 8 * 2);
	recording_release(&bench.rec);
}

static void what_never_settles_fails_settling_and_leaves_the_rest_open(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = usual;
	story.zeta = 0.005; /* rings on */
	play(&bench, &story);
	const struct metric *settling = run(&bench, "settling_time");
	assert_true(settling->low > 0.8 && isinf(settling->high));
	assert_int_equal(at_most(settling, 0.3), VERDICT_FAIL);
	assert_int_equal(at_most(settling, 5), VERDICT_INCONCLUSIVE);
	assert_unknown(check_metric(&bench.use, "steady_state_error"), "not proven steady");
	assert_unknown(check_metric(&bench.use, "overshoot"), "not proven steady");
	story = usual;
	story.drift = 200; /* runs away by 200 rpm/s */
	play(&bench, &story);
	settling = run(&bench, "settling_time");
	assert_int_equal(at_most(settling, 0.3), VERDICT_FAIL);
	assert_unknown(check_metric(&bench.use, "steady_state_error"), "not proven steady");
	recording_release(&bench.rec);
}

static void fast_oscillation_around_a_steady_mean_never_settles(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	struct recorded_row *rows = bench.rec.rows[bench.speed];
	for (size_t i = 101; i < bench.rec.series[bench.speed].rows; i++)
		rows[i].value += 60 * sin(0.37 * (double)i); /* +-10 % at some 30 Hz */
	const struct metric *settling = run(&bench, "settling_time");
	assert_int_equal(at_most(settling, 0.3), VERDICT_FAIL);
	recording_release(&bench.rec);
}

static void a_drive_that_does_not_move_has_an_error_and_no_shape(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = usual;
	play(&bench, &story);
	struct recorded_row *rows = bench.rec.rows[bench.speed];
	for (size_t i = 0; i < bench.rec.series[bench.speed].rows; i++)
		rows[i].value = 100 + 0.2 * (double)(i % 2);
	const struct metric *error = run(&bench, "steady_state_error");
	assert_near(error->value, -600, 0.5, "rpm");
	assert_unknown(check_metric(&bench.use, "rise_time"), "no step");
	recording_release(&bench.rec);
}

static void an_unsteady_begin_leaves_the_final_value_known(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	struct recorded_row *rows = bench.rec.rows[bench.speed];
	for (size_t i = 0; i < 100; i++)
		rows[i].value += 0.5 * (double)i; /* still on its way when the step comes */
	assert_unknown(run(&bench, "rise_time"), "the initial value of speed is not proven steady");
	assert_unknown(check_metric(&bench.use, "settling_time"), "initial");
	assert_known(check_metric(&bench.use, "steady_state_error"));
	recording_release(&bench.rec);
}

static void short_and_missing_data_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct story story = usual;
	story.before_ms = 3;
	play(&bench, &story);
	assert_unknown(run(&bench, "overshoot"), "before the mark");
	story = usual;
	story.end_ms = 30;
	play(&bench, &story);
	assert_unknown(run(&bench, "overshoot"), "hold longer");
	play(&bench, &usual);
	check_ns(&bench.use, "for", MS(2000));
	assert_unknown(run(&bench, "overshoot"), "hold longer");
	check_ns(&bench.use, "for", MS(800));
	assert_known(run(&bench, "overshoot"));
	bench.rec.marks[0].reached = false;
	assert_unknown(run(&bench, "overshoot"), "ended before");
	bench.rec.marks[0].reached = true;
	bench.rec.series[bench.speed].rows = 0;
	assert_unknown(run(&bench, "rise_time"), "not sampled");
	recording_release(&bench.rec);
}

static void blank(struct bench *bench, double from_ms, double to_ms)
{
	struct recorded_row *rows = bench->rec.rows[bench->speed];
	for (size_t i = 0; i < bench->rec.series[bench->speed].rows; i++)
		if (rows[i].sent >= MS(from_ms) && rows[i].sent <= MS(to_ms))
			rows[i].value = (double)NAN;
}

static void gaps_matter_where_the_answer_lies(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	blank(&bench, 500, 500); /* one lost poll costs nothing */
	assert_known(run(&bench, "settling_time"));
	assert_known(check_metric(&bench.use, "overshoot"));
	play(&bench, &usual);
	blank(&bench, 50, 75); /* over the peak, after the rise */
	assert_unknown(run(&bench, "overshoot"), "where the answer lies");
	assert_unknown(check_metric(&bench.use, "settling_time"), "where the answer lies");
	assert_known(check_metric(&bench.use, "rise_time"));
	play(&bench, &usual);
	blank(&bench, 2, 34); /* over the rise */
	const struct metric *rise = run(&bench, "rise_time");
	assert_true(isnan(rise->value) || rise->high - rise->low > 0.02);
	play(&bench, &usual);
	blank(&bench, 900, 930);
	assert_unknown(run(&bench, "steady_state_error"), "where the answer lies");
	play(&bench, &usual);
	blank(&bench, -1000, 2000);
	assert_unknown(run(&bench, "overshoot"), "measurement");
	recording_release(&bench.rec);
}

static void disorder_frozen_and_bad_rows_never_pass(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	struct recorded_row *rows = bench.rec.rows[bench.speed];
	rows[200] = rows[199];
	assert_unknown(run(&bench, "rise_time"), "out of order or stand twice");
	play(&bench, &usual);
	rows = bench.rec.rows[bench.speed];
	rows[150].received = rows[150].sent - 1;
	assert_unknown(run(&bench, "rise_time"), "out of order");
	play(&bench, &usual);
	const struct bad_rows bad = {90, 600, "the life counter of controller stands"};
	bench.rec.series[bench.speed].bad = &bad;
	bench.rec.series[bench.speed].bad_count = 1;
	check_run(&bench.use, &bench.rec);
	for (size_t i = 0; i < bench.use.count; i++)
		assert_true(isnan(bench.use.metrics[i].value));
	recording_release(&bench.rec);
}

static void percent_of_rated_is_of_the_nameplate(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	check_int(&bench.use, "percent_of", 1);
	/* 16.303 % of a step of 600 rpm are 3.261 % of 3000 rpm. */
	assert_near(run(&bench, "overshoot")->value, 16.303353 * 600 / 3000, 0.05, "%");
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.machine.rated_speed.value = (double)NAN;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	assert_unknown(run(&bench, "overshoot"), "no rated value");
	recording_release(&bench.rec);
}

static void fields_that_contradict_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	check_int(&bench.use, "command", bench.load);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "command", -1);
	check_double(&bench.use, "to", 0.1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_double(&bench.use, "to", 0.9);
	check_ns(&bench.use, "for", MS(100));
	check_ns(&bench.use, "final_for", MS(100));
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_ns(&bench.use, "final_for", 0);
	bench.rec.channels[bench.speed].wraps = 360;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

static void memory_that_runs_out_is_an_error(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, &usual);
	blank(&bench, 500, 500); /* rows must be copied */
	const struct check_input in = {
	    .series = bench.rec.series,
	    .channels = bench.rec.channels,
	    .channel_count = bench.rec.channel_count,
	    .marks = bench.rec.marks,
	    .mark_count = bench.rec.mark_count,
	    .machine = &bench.rec.machine,
	    .begin_ns = bench.rec.begin_ns,
	    .end_ns = bench.rec.end_ns,
	    .sample_ns = bench.rec.sample_ns,
	    .scratch = &bench.rec.arena,
	};
	for (long n = 1; n <= 2; n++) {
		struct err err = {0};
		arena_clear(&bench.rec.arena);
		arena_fail_at(n);
		assert_int_equal(bench.use.kind->evaluate(&in, bench.use.params, bench.use.metrics,
		                                          &bench.use.count, &err),
		                 -1);
		arena_fail_at(0);
		assert_int_equal(err.code, ERR_NOMEM);
	}
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(limits_are_passed_failed_and_left_open),
	    cmocka_unit_test(the_command_of_the_same_dimension_is_the_target),
	    cmocka_unit_test(the_instruments_limit_of_error_is_not_averaged_away),
	    cmocka_unit_test(ripple_is_that_of_the_settled_part),
	    cmocka_unit_test(what_never_settles_fails_settling_and_leaves_the_rest_open),
	    cmocka_unit_test(fast_oscillation_around_a_steady_mean_never_settles),
	    cmocka_unit_test(a_drive_that_does_not_move_has_an_error_and_no_shape),
	    cmocka_unit_test(an_unsteady_begin_leaves_the_final_value_known),
	    cmocka_unit_test(short_and_missing_data_are_inconclusive),
	    cmocka_unit_test(gaps_matter_where_the_answer_lies),
	    cmocka_unit_test(disorder_frozen_and_bad_rows_never_pass),
	    cmocka_unit_test(percent_of_rated_is_of_the_nameplate),
	    cmocka_unit_test(fields_that_contradict_are_refused),
	    cmocka_unit_test(memory_that_runs_out_is_an_error),
	};
	return RUN_GROUP(tests);
}
