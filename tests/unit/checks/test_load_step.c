/* SPDX-License-Identifier: Apache-2.0 */
/*
 * load_step. The reference is the speed loop by the symmetric optimum (a = 2)
 * after a step of load torque: n(t) = n0 - (dM T / J) g(t/T),
 * g(x) = 2 e^(-x/2) + e^(-x/4) (-2 cos(sqrt3 x/4) + 2 sqrt3 sin(sqrt3 x/4)).
 * Dip 1.770297 at 3.08934, back at 8.59901, inside 5 % of the dip from 13.8552,
 * area of the first lobe 8.778704: computed independently with SciPy (expm and
 * closed form). J = 0.01, dM = 2, T = 2 ms: 0.708119 rad/s at 6.17868 ms.
 */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int speed;
};

#define LAG_MS 2.0
#define SCALE  (2 * 2e-3 / 0.01) /* rad/s of g */

static double answer(double x)
{
	double w = sqrt(3) / 4 * x;
	return x <= 0 ? 0 : 2 * exp(-x / 2) + exp(-x / 4) * (-2 * cos(w) + 2 * sqrt(3) * sin(w));
}

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "bench_speed", "rad/s", EVIDENCE_INDEPENDENT);
	check_use(&bench->use, "load_step");
	check_int(&bench->use, "channel", bench->speed);
	check_int(&bench->use, "from", 0);
	/* 5 % of the dip, of the rated 314 rad/s */
	check_double(&bench->use, "band", 0.05 * 1.770297 * SCALE / 314.159265358979);
}

static void play(struct bench *bench, double sign, double droop, double noise, double width)
{
	struct random random = {7};
	recording_clear(&bench->rec);
	bench->rec.sample_ns = MS(0.2);
	bench->rec.begin_ns = MS(-120);
	bench->rec.end_ns = MS(120);
	recording_mark(&bench->rec, "loaded", MS(0), MS(0));
	for (double t = -119; t < 120; t += 0.2) {
		double left = t > 0 ? droop * (1 - exp(-t / 4)) : 0;
		double value = 100 - sign * SCALE * answer(t / LAG_MS) - left;
		recording_add(&bench->rec, bench->speed, MS(t - width / 2), MS(t + width / 2),
		              value + noise * random_normal(&random));
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void the_symmetric_optimum_gives_its_published_dip(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	for (int sign = -1; sign <= 1; sign += 2) {
		play(&bench, sign, 0, 0, 0);
		assert_near(run(&bench, "deviation")->value, 0.708119, 2e-4, "rad/s");
		assert_near(run(&bench, "deviation_time")->value, 6.17868e-3, 0.2e-3, "s");
		assert_near(run(&bench, "recovery_time")->value, 13.8552 * 2e-3, 0.05e-3, "s");
		assert_near(run(&bench, "deviation_area")->value, 8.778704 * SCALE * 2e-3, 1e-5, "rad");
		assert_near(run(&bench, "lasting_deviation")->value, 0, 1e-6, "rad/s");
		for (size_t i = 0; i < bench.use.count; i++)
			assert_known(&bench.use.metrics[i]);
	}
	recording_release(&bench.rec);
}

static void noise_and_jitter_leave_the_truth_inside(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0, 0.005, 0.1);
	static const struct {
		const char *metric;
		double truth;
	} truths[] = {
	    {"deviation", 0.708119},       {"deviation_time", 6.17868e-3},
	    {"recovery_time", 27.7104e-3}, {"deviation_area", 8.778704 * SCALE * 2e-3},
	    {"lasting_deviation", 0},
	};
	for (size_t i = 0; i < 5; i++) {
		const struct metric *metric = run(&bench, truths[i].metric);
		assert_known(metric);
		assert_true(metric->low <= truths[i].truth && truths[i].truth <= metric->high);
		assert_edges(metric);
	}
	recording_release(&bench.rec);
}

static void what_never_comes_back_fails_any_recovery_time(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0.5, 0.002, 0);
	const struct metric *recovery = run(&bench, "recovery_time");
	assert_int_equal(decided(recovery, 0, 0.1), VERDICT_FAIL);
	assert_near(run(&bench, "lasting_deviation")->value, -0.5, 0.01, "rad/s");
	assert_non_null(strstr(run(&bench, "deviation_area")->note, "did not return"));
	recording_release(&bench.rec);
}

static void without_a_deviation_there_is_no_time_of_it(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 0, 0.005, 0);
	assert_unknown(run(&bench, "deviation_time"), "stands out of the noise");
	assert_unknown(run(&bench, "deviation_area"), "stands out of the noise");
	assert_near(run(&bench, "deviation")->low, 0, 1e-12, "rad/s");
	recording_release(&bench.rec);
}

static void holes_short_records_and_missing_marks_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1, 0, 0, 0);
	recording_hole(&bench.rec, bench.speed, 3, 9);
	assert_unknown(run(&bench, "deviation"), "no sample");
	play(&bench, 1, 0, 0, 0);
	recording_hole(&bench.rec, bench.speed, -200, 200);
	assert_unknown(run(&bench, "recovery_time"), "measurement");
	play(&bench, 1, 0, 0, 0);
	bench.rec.series[bench.speed].rows = 620; /* they end 5 ms after the mark */
	assert_unknown(run(&bench, "recovery_time"), "");
	assert_unknown(run(&bench, "deviation_area"), "");
	play(&bench, 1, 0, 0, 0);
	check_ns(&bench.use, "for", MS(0.5));
	assert_unknown(run(&bench, "deviation"), "samples");
	check_ns(&bench.use, "for", MS(500));
	assert_unknown(run(&bench, "deviation"), "hold longer");
	check_ns(&bench.use, "for", 0);
	bench.rec.marks[0].reached = false;
	assert_unknown(run(&bench, "deviation"), "before the mark");
	play(&bench, 1, 0, 0, 0);
	for (size_t i = 0; i < 590; i++) /* not steady before the mark */
		bench.rec.rows[bench.speed][i].value += 0.02 * (double)i;
	assert_unknown(run(&bench, "deviation"), "not proven steady");
	recording_release(&bench.rec);
}

static void fields_that_cannot_be_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.machine.rated_speed.value = (double)NAN;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.machine.rated_speed.value = 300;
	check_ns(&bench.use, "for", MS(10));
	check_ns(&bench.use, "final_for", MS(20));
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_ns(&bench.use, "for", 0);
	bench.rec.channels[bench.speed].wraps = 100;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_symmetric_optimum_gives_its_published_dip),
	    cmocka_unit_test(noise_and_jitter_leave_the_truth_inside),
	    cmocka_unit_test(what_never_comes_back_fails_any_recovery_time),
	    cmocka_unit_test(without_a_deviation_there_is_no_time_of_it),
	    cmocka_unit_test(holes_short_records_and_missing_marks_are_inconclusive),
	    cmocka_unit_test(fields_that_cannot_be_are_refused),
	};
	return RUN_GROUP(tests);
}
