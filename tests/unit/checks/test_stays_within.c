/* SPDX-License-Identifier: Apache-2.0 */
/* stays_within: only sampled instants are known. */
#include "decision.h"
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int speed;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "bench_speed", "rpm", EVIDENCE_INDEPENDENT);
	bench->rec.channels[bench->speed].resolution = 0.2;
	check_use(&bench->use, "stays_within");
	check_int(&bench->use, "channel", bench->speed);
	check_double(&bench->use, "below", 1510);
	check_double(&bench->use, "above", 1490);
	check_ns(&bench->use, "ignore_shorter_than", MS(6));
}

/* 1500 rpm every 2 ms, `outside` from one time to another (ms). */
static void play(struct bench *bench, double outside, double from, double to)
{
	recording_clear(&bench->rec);
	bench->rec.begin_ns = 0;
	bench->rec.end_ns = MS(200);
	for (double t = 1; t < 199; t += 2)
		recording_add(&bench->rec, bench->speed, MS(t), MS(t + 0.5),
		              t >= from && t < to ? outside : 1500);
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void inside_passes_and_a_long_excursion_fails(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0);
	assert_yes_no(run(&bench, "inside"), true);
	assert_near(check_metric(&bench.use, "largest")->high, 1500.1, 1e-9, "rpm");
	assert_near(check_metric(&bench.use, "smallest")->low, 1499.9, 1e-9, "rpm");
	play(&bench, 1512, 50, 70);
	assert_yes_no(run(&bench, "inside"), false);
	assert_near(check_metric(&bench.use, "largest")->value, 1512, 1e-9, "rpm");
	assert_int_equal(check_metric(&bench.use, "largest")->evidence, EVIDENCE_INDEPENDENT);
	play(&bench, 1480, 50, 70);
	assert_yes_no(run(&bench, "inside"), false);
	recording_release(&bench.rec);
}

static void what_is_surely_too_short_is_ignored_and_the_rest_left_open(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1512, 51, 52); /* one sample: at most 4.5 ms from inside to inside */
	assert_yes_no(run(&bench, "inside"), true);
	play(&bench, 1512, 51, 56); /* three samples: 3.5 to 8.5 ms */
	assert_unknown(run(&bench, "inside"), "excursion lasted between");
	play(&bench, 1512, 51, 60); /* five: at least 7.5 ms */
	assert_yes_no(run(&bench, "inside"), false);
	recording_release(&bench.rec);
}

static void values_within_the_doubt_of_the_bound_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1510.05, 50, 90);
	assert_unknown(run(&bench, "inside"), "1510");
	bench.rec.channels[bench.speed].accuracy = (struct accuracy){.given = true, .absolute = 5};
	play(&bench, 1507, 50, 90);
	assert_unknown(run(&bench, "inside"), "1507");
	play(&bench, 1516, 50, 90);
	assert_yes_no(run(&bench, "inside"), false);
	recording_release(&bench.rec);
}

static void sparse_samples_are_inconclusive_unless_they_prove_the_opposite(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0);
	check_ns(&bench.use, "ignore_shorter_than", MS(2));
	assert_unknown(run(&bench, "inside"), "sample faster");
	assert_unknown(check_metric(&bench.use, "largest"), "sample faster");
	play(&bench, 1512, 50, 70);
	assert_yes_no(run(&bench, "inside"), false);
	check_ns(&bench.use, "ignore_shorter_than", MS(6));
	bench.rec.channels[bench.speed].refresh_ns = MS(5); /* the value may be older */
	play(&bench, 0, 0, 0);
	assert_unknown(run(&bench, "inside"), "sample faster");
	recording_release(&bench.rec);
}

static void missing_samples_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (double)NAN, 51, 52);
	assert_unknown(run(&bench, "inside"), "no measurement");
	assert_unknown(check_metric(&bench.use, "smallest"), "no measurement");
	play(&bench, (double)NAN, 50, 90);
	assert_unknown(run(&bench, "inside"), "sample faster");
	play(&bench, (double)NAN, 0, 1000);
	assert_unknown(run(&bench, "inside"), "measurement");
	check_window(&bench.use, -1, MS(100), MS(500));
	assert_unknown(run(&bench, "largest"), "hold longer");
	check_window(&bench.use, -1, MS(300), 0);
	assert_unknown(run(&bench, "largest"), "after the stimulus ended");
	recording_release(&bench.rec);
}

static void a_window_too_short_for_a_sample_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0);
	check_window(&bench.use, -1, MS(10), MS(0.9));
	assert_unknown(run(&bench, "inside"), "not sampled");
	check_window(&bench.use, -1, MS(10), MS(50));
	assert_yes_no(run(&bench, "inside"), true);
	recording_release(&bench.rec);
}

static void bounds_are_needed_and_must_not_contradict(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	check_double(&bench.use, "below", 1400);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_double(&bench.use, "below", (double)NAN);
	check_double(&bench.use, "above", (double)NAN);
	assert_unknown(run(&bench, "inside"), "no bounds");
	assert_known(check_metric(&bench.use, "largest"));
	const double between[2] = {1490, 1510};
	memcpy(check_field(&bench.use, "between"), between, sizeof between);
	assert_yes_no(run(&bench, "inside"), true);
	check_double(&bench.use, "above", 1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(inside_passes_and_a_long_excursion_fails),
	    cmocka_unit_test(what_is_surely_too_short_is_ignored_and_the_rest_left_open),
	    cmocka_unit_test(values_within_the_doubt_of_the_bound_are_inconclusive),
	    cmocka_unit_test(sparse_samples_are_inconclusive_unless_they_prove_the_opposite),
	    cmocka_unit_test(missing_samples_are_inconclusive),
	    cmocka_unit_test(a_window_too_short_for_a_sample_is_inconclusive),
	    cmocka_unit_test(bounds_are_needed_and_must_not_contradict),
	};
	return RUN_GROUP(tests);
}
