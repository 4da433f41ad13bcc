/* SPDX-License-Identifier: Apache-2.0 */
/*
 * tracking. Closed form: behind a ramp of rate r a first-order lag T settles at
 * r T below the command, so the lag is T.
 */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int speed, command;
};

enum { RATE = 2000, LAG_MS = 20 }; /* rpm/s */

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	bench->command = recording_channel(&bench->rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
	check_use(&bench->use, "tracking");
	check_int(&bench->use, "channel", bench->speed);
	check_int(&bench->use, "command", bench->command);
	check_window(&bench->use, 0, MS(200), MS(600));
}

/* A staircase of 1 ms, known to `doubt` ms; the answer follows the line through its middles. */
static void play(struct bench *bench, double sign, double doubt)
{
	recording_clear(&bench->rec);
	bench->rec.begin_ns = MS(-100);
	bench->rec.end_ns = S(1);
	recording_mark(&bench->rec, "ramp", 0, 0);
	recording_command(&bench->rec, bench->command, 0, MS(-50), MS(-50));
	for (int k = 0; k < 1000; k++)
		recording_command(&bench->rec, bench->command, sign * RATE * (k + 0.5) * 1e-3, MS(k),
		                  MS(k + doubt));
	for (double t = -99.3; t < 1000; t += 2) {
		double x = t / LAG_MS, lagged = t > 0 ? t - LAG_MS * (1 - exp(-x)) : 0;
		recording_at(&bench->rec, bench->speed, MS(t), sign * RATE * lagged * 1e-3);
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void a_first_order_lag_follows_by_its_time_constant(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	for (int sign = -1; sign <= 1; sign += 2) {
		play(&bench, sign, 0);
		assert_near(run(&bench, "mean_error")->value, -sign * 40, 0.5, "rpm");
		assert_near(run(&bench, "lag")->value, 20e-3, 0.3e-3, "s");
		const struct metric *largest = run(&bench, "following_error");
		assert_near(largest->value, 40, 1.01, "rpm");
		assert_edges(run(&bench, "lag"));
		assert_int_equal(largest->evidence, EVIDENCE_SELF_REPORTED);
	}
	recording_release(&bench.rec);
}

static void stairs_that_may_have_been_in_effect_widen_it(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0);
	assert_near(run(&bench, "following_error")->high - run(&bench, "following_error")->value, 0,
	            1e-9, "rpm");
	play(&bench, 1, 3);
	const struct metric *metric = run(&bench, "following_error");
	assert_true(metric->high - metric->low >= 2 && metric->high - metric->low <= 9);
	assert_edges(metric);
	bench.rec.channels[bench.speed].refresh_ns = MS(5); /* 10 rpm of ramp */
	assert_true(run(&bench, "following_error")->high - run(&bench, "following_error")->low > 9);
	bench.rec.channels[bench.speed].refresh_ns = 0;
	bench.rec.channels[bench.speed].resolution = 4;
	play(&bench, 1, 0);
	metric = run(&bench, "following_error");
	assert_near(metric->high - metric->value, 2, 1e-9, "rpm");
	recording_release(&bench.rec);
}

static void without_a_ramp_there_is_no_lag(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0);
	bench.rec.command_count = 1;
	assert_unknown(run(&bench, "lag"), "no ramp");
	assert_known(run(&bench, "mean_error"));
	bench.rec.command_count = 0;
	assert_unknown(run(&bench, "mean_error"), "not commanded");
	recording_release(&bench.rec);
}

static void holes_and_short_windows_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0);
	recording_hole(&bench.rec, bench.speed, 300, 330);
	assert_unknown(run(&bench, "following_error"), "no sample");
	play(&bench, 1, 0);
	recording_hole(&bench.rec, bench.speed, -200, 2000);
	assert_unknown(run(&bench, "lag"), "measurement");
	play(&bench, 1, 0);
	check_window(&bench.use, 0, MS(200), MS(6));
	assert_unknown(run(&bench, "mean_error"), "5 are needed");
	check_window(&bench.use, 0, MS(200), S(2));
	assert_unknown(run(&bench, "mean_error"), "hold longer");
	recording_release(&bench.rec);
}

static void fields_that_cannot_be_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.channels[bench.command].unit = unit_find("Nm", 2);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.channels[bench.command].unit = unit_find("rpm", 3);
	bench.rec.channels[bench.speed].wraps = 10;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_first_order_lag_follows_by_its_time_constant),
	    cmocka_unit_test(stairs_that_may_have_been_in_effect_widen_it),
	    cmocka_unit_test(without_a_ramp_there_is_no_lag),
	    cmocka_unit_test(holes_and_short_windows_are_inconclusive),
	    cmocka_unit_test(fields_that_cannot_be_are_refused),
	};
	return RUN_GROUP(tests);
}
