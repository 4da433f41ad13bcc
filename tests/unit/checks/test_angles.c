/* SPDX-License-Identifier: Apache-2.0 */
/* torque_angle and alignment. */
#include "decision.h"
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int own, current, torque, bench, bench_current;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	struct recording *rec = &bench->rec;
	recording_init(rec);
	bench->own = recording_channel(rec, "own_angle", "deg", EVIDENCE_SELF_REPORTED);
	bench->current = recording_channel(rec, "own_current", "A_peak", EVIDENCE_SELF_REPORTED);
	bench->torque = recording_channel(rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	bench->bench = recording_channel(rec, "bench_angle", "deg_el", EVIDENCE_INDEPENDENT);
	bench->bench_current = recording_channel(rec, "bench_current", "A_rms", EVIDENCE_INDEPENDENT);
	rec->begin_ns = 0;
	rec->end_ns = MS(500);
	recording_mark(rec, "loaded", MS(99), MS(100));
}

static void use_torque_angle(struct bench *bench)
{
	check_use(&bench->use, "torque_angle");
	check_int(&bench->use, "channel", bench->own);
	check_int(&bench->use, "current", bench->current);
	check_window(&bench->use, 0, 0, 0);
}

static void use_alignment(struct bench *bench)
{
	check_use(&bench->use, "alignment");
	check_int(&bench->use, "own", bench->own);
	check_int(&bench->use, "bench", bench->bench);
	check_int(&bench->use, "current", bench->bench_current);
	check_window(&bench->use, 0, 0, 0);
}

/* A constant angle with noise, on all channels. */
static void play(struct bench *bench, double own, double truth, double noise, double amperes,
                 double torque, uint64_t seed)
{
	struct random random = {seed};
	recording_clear(&bench->rec);
	recording_mark(&bench->rec, "loaded", MS(99), MS(100));
	for (double t = 1; t < 499; t += 2) {
		double a = own + noise * random_normal(&random), b = truth + noise * random_normal(&random);
		recording_add(&bench->rec, bench->own, MS(t), MS(t + 0.5), remainder(a, 360));
		recording_add(&bench->rec, bench->current, MS(t), MS(t + 0.5), amperes);
		recording_add(&bench->rec, bench->torque, MS(t), MS(t + 0.5), torque);
		recording_add(&bench->rec, bench->bench, MS(t + 0.7), MS(t + 1), remainder(b, 360));
		recording_add(&bench->rec, bench->bench_current, MS(t + 0.7), MS(t + 1), amperes / sqrt(2));
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static enum verdict within(const struct metric *metric, double min, double max)
{
	char reason[512];
	struct limit limit = {.min = min, .max = max};
	return decide(metric, &limit, reason, sizeof reason);
}

static void a_mean_at_the_target_passes_and_beside_it_fails(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	play(&bench, 94, 94, 1, 4, 1, 1); /* U about 0.14 deg of 200 rows */
	const struct metric *error = run(&bench, "mean_error");
	assert_known(error);
	assert_near(error->value, 4, 0.2, "deg");
	assert_true(error->high - error->low < 0.5);
	assert_int_equal(within(error, -4.4, 4.4), VERDICT_PASS);
	assert_int_equal(within(error, -3.6, 3.6), VERDICT_FAIL);
	assert_int_equal(within(error, -4.01, 4.01), VERDICT_INCONCLUSIVE);
	assert_near(check_metric(&bench.use, "mean")->value, 94, 0.2, "deg");
	assert_near(check_metric(&bench.use, "spread")->value, 1, 0.15, "deg");
	assert_true(check_metric(&bench.use, "worst_error")->value > 6);
	/* 1 - cos 4 deg = 0.2436 %. */
	assert_near(check_metric(&bench.use, "torque_lost")->value, 0.2436, 0.03, "%");
	recording_release(&bench.rec);
}

static void angles_across_half_a_turn_are_near_each_other(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	check_text(&bench.use, "target", "180 deg");
	play(&bench, 180.5, 180, 1, 4, 1, 2);
	const struct metric *error = run(&bench, "mean_error");
	assert_near(error->value, 0.5, 0.2, "deg");
	assert_near(check_metric(&bench.use, "spread")->value, 1, 0.15, "deg");
	recording_release(&bench.rec);
}

static void the_sign_of_torque_chooses_the_target(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	play(&bench, -91, -91, 0.5, 4, -1, 3);
	assert_near(run(&bench, "mean_error")->value, -1, 0.1, "deg"); /* by the angle itself */
	check_int(&bench.use, "torque", bench.torque);
	assert_near(run(&bench, "mean_error")->value, -1, 0.1, "deg");
	/* Torque the other way than the angle: half a turn wrong, and all torque lost twice. */
	play(&bench, -91, -91, 0.5, 4, 1, 3);
	assert_near(fabs(run(&bench, "mean_error")->value), 179, 0.1, "deg");
	assert_near(check_metric(&bench.use, "torque_lost")->value, 200, 0.1, "%");
	play(&bench, -91, -91, 0.5, 4, 0, 3);
	assert_unknown(run(&bench, "mean_error"), "sign of shaft_torque");
	check_int(&bench.use, "torque", -1);
	play(&bench, 0.02, 0, 0.5, 4, 0, 3);
	assert_unknown(run(&bench, "mean_error"), "sign of the torque");
	recording_release(&bench.rec);
}

static void too_little_current_makes_an_angle_meaningless(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	play(&bench, 90, 90, 1, 0.23, 1, 4); /* 5 % of 4.8 A are 0.24 A */
	assert_unknown(run(&bench, "mean"), "too little current");
	play(&bench, 90, 90, 1, 0.25, 1, 4);
	assert_known(run(&bench, "mean"));
	bench.rec.channels[bench.current].resolution = 0.03;
	assert_unknown(run(&bench, "mean"), "too little current");
	recording_release(&bench.rec);
}

static void a_window_that_drifts_is_not_judged(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	play(&bench, 90, 90, 0.2, 4, 1, 5);
	struct recorded_row *rows = bench.rec.rows[bench.own];
	for (size_t i = 0; i < bench.rec.series[bench.own].rows; i++)
		rows[i].value += 2.0 * (double)i / 250; /* 1.6 deg over the window; 1.25 would do */
	assert_unknown(run(&bench, "mean_error"), "not proven steady");
	check_double(&bench.use, "tolerance", 10 * 3.14159265 / 180);
	assert_known(run(&bench, "mean_error"));
	recording_release(&bench.rec);
}

static void missing_short_and_scattered_data_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	play(&bench, 90, 90, 1, 4, 1, 6);
	struct recorded_row *rows = bench.rec.rows[bench.own];
	for (size_t i = 100; i < 120; i++)
		rows[i].value = (double)NAN;
	assert_unknown(run(&bench, "mean"), "no sample of own_angle");
	for (size_t i = 0; i < bench.rec.series[bench.own].rows; i++)
		rows[i].value = (double)NAN;
	assert_unknown(run(&bench, "mean"), "measurement");
	play(&bench, 90, 90, 1, 4, 1, 6);
	check_window(&bench.use, 0, 0, MS(8));
	assert_unknown(run(&bench, "mean"), "are needed");
	check_window(&bench.use, 0, 0, MS(800));
	assert_unknown(run(&bench, "mean"), "hold longer");
	check_window(&bench.use, 0, 0, 0);
	for (size_t i = 0; i < bench.rec.series[bench.own].rows; i++)
		bench.rec.rows[bench.own][i].value = (double)(i % 4) * 90;
	assert_unknown(run(&bench, "mean"), "points everywhere");
	bench.rec.series[bench.current].rows = 0;
	assert_unknown(run(&bench, "mean"), "not sampled");
	recording_release(&bench.rec);
}

static void the_mean_holds_the_truth(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_torque_angle(&bench);
	bench.rec.channels[bench.own].resolution = 0.5;
	struct random random = {23};
	int held = 0, known = 0;
	static double errors[2000];
	double width = 0;
	for (int draw = 0; draw < 2000; draw++) {
		double truth = random_between(&random, -180, 180);
		double noise = random_between(&random, 0.2, 1.5);
		play(&bench, truth, truth, noise, 4, 1, (uint64_t)draw + 1000);
		struct recorded_row *rows = bench.rec.rows[bench.own];
		for (size_t i = 0; i < bench.rec.series[bench.own].rows; i++)
			rows[i].value = 0.5 * round(rows[i].value / 0.5);
		check_text(&bench.use, "target", "0 deg");
		const struct metric *metric = run(&bench, "mean_error");
		if (isnan(metric->value))
			continue;
		double error = remainder(metric->value - truth, 360);
		errors[known++] = fabs(error);
		held += fabs(error) <= (metric->high - metric->low) / 2;
		width += (metric->high - metric->low) / 2;
	}
	assert_true(known > 1900);
	assert_true(held >= 0.95 * known);
	int inside = 0;
	for (int i = 0; i < known; i++)
		inside += errors[i] <= width / known / 2.5;
	assert_true(inside <= 0.95 * known); /* not lazily wide */
	recording_release(&bench.rec);
}

static void a_turned_frame_shows_only_against_the_bench(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 90, 78, 0.5, 4, 1, 7); /* the controller believes 90 deg */
	use_torque_angle(&bench);
	assert_int_equal(within(run(&bench, "mean_error"), -5, 5), VERDICT_PASS);
	use_alignment(&bench);
	const struct metric *offset = run(&bench, "frame_offset");
	assert_known(offset);
	assert_near(offset->value, 12, 0.2, "deg");
	assert_int_equal(offset->evidence, EVIDENCE_INDEPENDENT);
	assert_int_equal(within(offset, -5, 5), VERDICT_FAIL);
	assert_int_equal(within(offset, -12.5, 12.5), VERDICT_PASS);
	assert_int_equal(within(offset, -12, 12), VERDICT_INCONCLUSIVE);
	play(&bench, 179, -179, 0.5, 4, 1, 8);
	assert_near(run(&bench, "frame_offset")->value, -2, 0.2, "deg");
	recording_release(&bench.rec);
}

static void alignment_without_its_data_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_alignment(&bench);
	play(&bench, 90, 90, 0.5, 0.2, 1, 9);
	assert_unknown(run(&bench, "frame_offset"), "too little current");
	play(&bench, 90, 90, 0.5, 4, 1, 9);
	bench.rec.channels[bench.bench].accuracy = (struct accuracy){.given = true, .absolute = 3};
	assert_int_equal(within(run(&bench, "frame_offset"), -2, 2), VERDICT_INCONCLUSIVE);
	assert_int_equal(within(run(&bench, "frame_offset"), -5, 5), VERDICT_PASS);
	for (size_t i = 60; i < 120; i++)
		bench.rec.rows[bench.bench][i].value = (double)NAN;
	assert_unknown(run(&bench, "frame_offset"), "no sample of bench_angle");
	bench.rec.series[bench.bench].rows = 60;
	assert_unknown(run(&bench, "frame_offset"), "bench_angle");
	bench.rec.marks[0].reached = false;
	assert_unknown(run(&bench, "frame_offset"), "ended before");
	recording_release(&bench.rec);
}

static void what_cannot_prove_it_is_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	struct err err = {0};
	use_alignment(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, &err), 0);
	check_int(&bench.use, "bench", bench.own);
	assert_int_equal(check_verify(&bench.use, &bench.rec, &err), -1);
	assert_non_null(strstr(err.message, "instrument"));
	use_alignment(&bench);
	check_int(&bench.use, "current", bench.current);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	use_alignment(&bench);
	check_int(&bench.use, "own", bench.bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	use_torque_angle(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	static const char *const wrong[] = {"90", "90 deg_mech", "up", "90 Nm"};
	for (size_t i = 0; i < 4; i++) {
		err = (struct err){0};
		check_text(&bench.use, "target", wrong[i]);
		assert_int_equal(check_verify(&bench.use, &bench.rec, &err), -1);
		assert_non_null(strstr(err.message, "target"));
	}
	check_text(&bench.use, "target", "90 deg");
	check_int(&bench.use, "torque", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	use_torque_angle(&bench);
	check_int(&bench.use, "channel", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	use_torque_angle(&bench);
	check_int(&bench.use, "current", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	use_torque_angle(&bench);
	bench.rec.machine.rated_current.value = (double)NAN;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_mean_at_the_target_passes_and_beside_it_fails),
	    cmocka_unit_test(angles_across_half_a_turn_are_near_each_other),
	    cmocka_unit_test(the_sign_of_torque_chooses_the_target),
	    cmocka_unit_test(too_little_current_makes_an_angle_meaningless),
	    cmocka_unit_test(a_window_that_drifts_is_not_judged),
	    cmocka_unit_test(missing_short_and_scattered_data_are_inconclusive),
	    cmocka_unit_test(the_mean_holds_the_truth),
	    cmocka_unit_test(a_turned_frame_shows_only_against_the_bench),
	    cmocka_unit_test(alignment_without_its_data_is_inconclusive),
	    cmocka_unit_test(what_cannot_prove_it_is_refused),
	};
	return RUN_GROUP(tests);
}
