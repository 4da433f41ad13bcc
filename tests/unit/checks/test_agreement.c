/* SPDX-License-Identifier: Apache-2.0 */
/* agreement: from one transaction exact, else the skew times the rate is in doubt. */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int a, b;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->a = recording_channel(&bench->rec, "torque_estimate", "Nm", EVIDENCE_SELF_REPORTED);
	bench->b = recording_channel(&bench->rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	check_use(&bench->use, "agreement");
	check_int(&bench->use, "a", bench->a);
	check_int(&bench->use, "b", bench->b);
}

/* b rises by `rate` per s from 2; a is b + offset; a is read `skew` ms later, intervals of `width`.
 */
static void play(struct bench *bench, double offset, double rate, double skew, double width)
{
	recording_clear(&bench->rec);
	bench->rec.begin_ns = 0;
	bench->rec.end_ns = MS(400);
	for (double t = 1; t < 399; t += 2) {
		double ta = t + skew;
		recording_add(&bench->rec, bench->a, MS(ta - width / 2), MS(ta + width / 2),
		              2 + rate * ta * 1e-3 + offset);
		recording_add(&bench->rec, bench->b, MS(t - width / 2), MS(t + width / 2),
		              2 + rate * t * 1e-3);
	}
	if (skew == 0)
		bench->rec.series[bench->a].block = bench->rec.series[bench->b].block = 3;
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void one_transaction_compares_exactly(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, -0.05, 10, 0, 1);
	assert_near(run(&bench, "mean_difference")->value, -0.05, 1e-9, "Nm");
	assert_near(run(&bench, "largest_difference")->value, 0.05, 1e-9, "Nm");
	assert_near(run(&bench, "largest_difference")->high, 0.05, 1e-9, "Nm");
	assert_near(run(&bench, "relative_difference")->value, -100 * 0.05 / 3.99, 0.02, "%");
	assert_int_equal(run(&bench, "mean_difference")->evidence, EVIDENCE_SELF_REPORTED);
	recording_release(&bench.rec);
}

static void skew_times_rate_is_in_doubt_otherwise(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	/* Both instants are known to half a ms each: 1 ms of 10 Nm/s. */
	play(&bench, -0.05, 10, 0.7, 1);
	const struct metric *largest = run(&bench, "largest_difference");
	assert_near(largest->value, 0.05, 1e-6, "Nm");
	assert_near(largest->high - largest->value, 0.01, 1e-6, "Nm");
	assert_non_null(strstr(largest->note, "skew"));
	assert_edges(largest);
	const struct metric *mean = run(&bench, "mean_difference");
	assert_true(mean->low <= -0.05 && -0.05 <= mean->high);
	assert_edges(mean);
	play(&bench, -0.05, 0, 0.7, 1); /* steady: nothing is lost by skew */
	assert_near(run(&bench, "largest_difference")->high, 0.05, 1e-9, "Nm");
	recording_release(&bench.rec);
}

static void accuracy_and_resolution_of_both_count(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0, 1);
	bench.rec.channels[bench.b].accuracy = (struct accuracy){.given = true, .absolute = 0.03};
	bench.rec.channels[bench.a].resolution = 0.02;
	assert_near(run(&bench, "largest_difference")->high, 0.04, 1e-9, "Nm");
	assert_int_equal(decided(run(&bench, "largest_difference"), 0, 0.041), VERDICT_PASS);
	assert_int_equal(decided(run(&bench, "largest_difference"), 0, 0.039), VERDICT_INCONCLUSIVE);
	assert_true(run(&bench, "mean_difference")->high > 0.03);
	recording_release(&bench.rec);
}

static void units_and_angles_are_seen_to(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	bench.rec.channels[bench.a].unit = unit_find("rad/s", 5);
	bench.rec.channels[bench.b].unit = unit_find("rpm", 3);
	play(&bench, 0, 0, 0, 1);
	assert_near(run(&bench, "mean_difference")->value, 2 - 2 * 0.10471975511966, 1e-9, "rad/s");
	bench.rec.channels[bench.a].unit = bench.rec.channels[bench.b].unit = unit_find("deg", 3);
	play(&bench, 0, 0, 0, 1);
	for (size_t i = 0; i < bench.rec.series[bench.a].rows; i++) {
		bench.rec.rows[bench.a][i].value = 179;
		bench.rec.rows[bench.b][i].value = -179;
	}
	assert_near(run(&bench, "largest_difference")->value, 2, 1e-9, "deg");
	assert_near(run(&bench, "mean_difference")->value, -2, 1e-9, "deg");
	assert_unknown(run(&bench, "relative_difference"), "too near 0");
	recording_release(&bench.rec);
}

static void what_was_not_measured_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 1, 0.7, 1);
	recording_hole(&bench.rec, bench.b, 100, 130);
	assert_unknown(run(&bench, "largest_difference"), "no sample");
	play(&bench, 0, 1, 0, 1);
	recording_hole(&bench.rec, bench.a, 100, 130);
	assert_unknown(run(&bench, "mean_difference"), "no sample");
	play(&bench, 0, 1, 0, 1);
	recording_hole(&bench.rec, bench.b, 0, 60);
	assert_unknown(run(&bench, "mean_difference"), "not both sampled");
	play(&bench, 0, 1, 0, 1);
	recording_hole(&bench.rec, bench.b, 0, 1000);
	assert_unknown(run(&bench, "mean_difference"), "measurement");
	play(&bench, 0, 1, 0, 1);
	check_window(&bench.use, -1, MS(100), MS(5));
	assert_unknown(run(&bench, "largest_difference"), "3 are needed");
	check_window(&bench.use, -1, MS(500), 0);
	assert_unknown(run(&bench, "largest_difference"), "ended");
	recording_release(&bench.rec);
}

static void channels_that_cannot_agree_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.channels[bench.b].unit = unit_find("rpm", 3);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "b", bench.a);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(one_transaction_compares_exactly),
	    cmocka_unit_test(skew_times_rate_is_in_doubt_otherwise),
	    cmocka_unit_test(accuracy_and_resolution_of_both_count),
	    cmocka_unit_test(units_and_angles_are_seen_to),
	    cmocka_unit_test(what_was_not_measured_is_inconclusive),
	    cmocka_unit_test(channels_that_cannot_agree_are_refused),
	};
	return RUN_GROUP(tests);
}
