/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Targets of the torque angle from the nameplate, ranges, and the two other
 * proofs of alignment. Values: the condition of Morimoto et al., IEEE Trans. IA
 * 26(5), 1990; own cases p 4, psi 0.1 Vs, Ld 1 mH, Lq 3 mH, confirmed
 * independently by numerical maximisation with SciPy: 50 A 120 deg, 100 A
 * 126.375192 deg. The voltage ellipse meets the 50 A circle where
 * 0.0225 sin^2 + (0.05 cos + 0.1)^2 = (U/w)^2, which is quadratic in cos.
 */
#include "operating_point.h"
#include "recording.h"

#define DEGREES (180 / 3.14159265358979323846)

struct bench {
	struct recording rec;
	struct used_check use;
	int angle, current, torque, speed, dc;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	struct recording *rec = &bench->rec;
	recording_init(rec);
	bench->angle = recording_channel(rec, "own_angle", "deg", EVIDENCE_SELF_REPORTED);
	bench->current = recording_channel(rec, "bench_current", "A_peak", EVIDENCE_INDEPENDENT);
	bench->torque = recording_channel(rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	bench->speed = recording_channel(rec, "bench_speed", "rad/s", EVIDENCE_INDEPENDENT);
	bench->dc = recording_channel(rec, "dc_voltage", "V", EVIDENCE_INDEPENDENT);
	rec->machine.flux_linkage = (struct nameplate_value){0.1, 0};
	rec->machine.inductance_d = (struct nameplate_value){1e-3, 0};
	rec->machine.inductance_q = (struct nameplate_value){3e-3, 0};
	rec->machine.rated_current.value = 50;
	check_use(&bench->use, "torque_angle");
	check_int(&bench->use, "channel", bench->angle);
	check_int(&bench->use, "current", bench->current);
}

static void play(struct bench *bench, double angle, double amperes, double torque, double speed)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = 0;
	rec->end_ns = MS(300);
	for (double t = 1; t < 299; t += 2) {
		const double values[] = {angle, amperes, torque, speed, 300};
		for (int i = 0; i < 5; i++)
			recording_add(rec, i, MS(t), MS(t + 0.5), values[i]);
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static double ellipse(double flux)
{
	return acos((0.01 - sqrt(1e-4 + 0.08 * (0.0325 - flux * flux))) / 0.04) * DEGREES;
}

static void angles_follow_the_published_condition(void **state)
{
	(void)state;
	assert_near(angle_of_most_torque(0.1, 1e-3, 3e-3, 50), 120, 1e-9, "deg");
	assert_near(angle_of_most_torque(0.1, 1e-3, 3e-3, 100), 126.375192, 1e-6, "deg");
	assert_near(angle_of_most_torque(1e-9, 1e-3, 3e-3, 100), 135, 1e-3, "deg");
	assert_near(angle_of_most_torque(0.1, 2e-3, 2e-3, 50), 90, 0, "deg");
	assert_true(angle_of_most_torque(0.1, 3e-3, 1e-3, 50) < 90);
	/* 300 V: 173.205081 V; at 1154.700538 rad/s the limit just binds at 50 A and 120 deg. */
	assert_near(angle_at_voltage_limit(0.1, 1e-3, 3e-3, 0, 1154.700538, 173.205081, 50), 120, 1e-4,
	            "deg");
	assert_near(angle_at_voltage_limit(0.1, 1e-3, 3e-3, 0, 500, 173.205081, 50), 120, 1e-9, "deg");
	assert_near(angle_at_voltage_limit(0.1, 1e-3, 3e-3, 0, 173.205081 / 0.12, 173.205081, 50),
	            ellipse(0.12), 1e-6, "deg");
	assert_true(isnan(angle_at_voltage_limit(0.1, 1e-3, 3e-3, 0, 1e5, 100, 50)));
	struct machine machine = {
	    .pole_pairs = 4, .inductance_d = {1e-3, 0}, .inductance_q = {3e-3, 0}};
	assert_near(torque_of(&machine, 0.1, 50, 120), 38.971143, 1e-6, "Nm");
	assert_near(torque_of(&machine, 0.1, 50, 90), 30, 1e-9, "Nm");
}

static void most_torque_is_the_target_with_its_tolerances(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	check_text(&bench.use, "target", "maximum_torque_per_ampere");
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	play(&bench, 121, 50, 30, 0);
	assert_near(run(&bench, "mean_error")->value, 1, 1e-9, "deg");
	assert_near(run(&bench, "mean_error")->high, 1, 1e-6, "deg");
	play(&bench, -121, 50, -30, 0); /* negative torque mirrors it */
	assert_near(run(&bench, "mean_error")->value, -1, 1e-9, "deg");
	bench.rec.machine.flux_linkage.tolerance = 0.05;
	bench.rec.machine.inductance_q.tolerance = 0.1;
	play(&bench, 121, 50, 30, 0);
	double low = angle_of_most_torque(0.105, 1e-3, 2.7e-3, 50);
	double high = angle_of_most_torque(0.095, 1e-3, 3.3e-3, 50);
	const struct metric *error = run(&bench, "mean_error");
	assert_near(error->low, 121 - high, 1e-6, "deg");
	assert_near(error->high, 121 - low, 1e-6, "deg");
	assert_edges(error);
	assert_edges(run(&bench, "worst_error"));
	assert_known(run(&bench, "torque_lost"));
	assert_near(run(&bench, "torque_lost")->low, 0, 0, "%"); /* the target may be met */
	assert_non_null(strstr(error->note, "tolerances"));
	recording_hole(&bench.rec, bench.current, 100, 150);
	assert_unknown(run(&bench, "mean_error"), "no sample");
	recording_release(&bench.rec);
}

static void the_voltage_limit_is_the_target_in_field_weakening(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	check_text(&bench.use, "target", "voltage_limit");
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1); /* speed is missing */
	check_int(&bench.use, "speed", bench.speed);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1); /* the voltage too */
	check_int(&bench.use, "dc_voltage", bench.dc);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	double speed = 173.205081 / 0.12 / 4, target = ellipse(0.12);
	play(&bench, target + 2, 50, 20, speed);
	assert_near(run(&bench, "mean_error")->value, 2, 1e-5, "deg");
	play(&bench, -target, 50, -20, -speed);
	assert_near(run(&bench, "mean_error")->value, 0, 1e-5, "deg");
	bench.rec.channels[bench.dc].accuracy = (struct accuracy){.given = true, .of_reading = 0.01};
	const struct metric *error = run(&bench, "mean_error");
	assert_true(error->low < -0.5 && error->high > 0.5);
	play(&bench, 150, 50, 20, 40 * speed);
	assert_unknown(run(&bench, "mean_error"), "at any angle");
	play(&bench, 150, 50, 20, speed);
	recording_hole(&bench.rec, bench.speed, 0, 1000);
	assert_unknown(run(&bench, "mean_error"), "measurement");
	check_int(&bench.use, "dc_voltage", -1);
	bench.rec.machine.dc_voltage = (struct nameplate_value){300, 0};
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	play(&bench, target, 50, 20, speed);
	assert_near(run(&bench, "mean_error")->value, 0, 1e-5, "deg");
	recording_release(&bench.rec);
}

static void a_range_holds_every_sample_of_block_commutation(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	check_text(&bench.use, "target", "60 deg to 120 deg");
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	play(&bench, 0, 50, 20, 0);
	for (size_t i = 0; i < bench.rec.series[bench.angle].rows; i++)
		bench.rec.rows[bench.angle][i].value = 120 - 60 * fmod((double)i * 0.37, 1);
	assert_near(run(&bench, "worst_error")->high, 0, 1e-9, "deg");
	assert_near(run(&bench, "mean")->value, 90, 1, "deg");
	assert_near(run(&bench, "mean_error")->value, 0, 0, "deg");
	bench.rec.rows[bench.angle][30].value = 123;
	assert_near(run(&bench, "worst_error")->value, 3, 1e-9, "deg");
	bench.rec.channels[bench.angle].resolution = 2;
	assert_near(run(&bench, "worst_error")->low, 2, 1e-9, "deg");
	assert_near(run(&bench, "worst_error")->high, 4, 1e-9, "deg");
	static const char *const wrong[] = {"120 deg to 60 deg", "60 deg to", "60 to 120 deg",
	                                    "-200 deg to 200 deg"};
	for (size_t i = 0; i < 4; i++) {
		check_text(&bench.use, "target", wrong[i]);
		assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	}
	recording_release(&bench.rec);
}

static void computed_targets_need_their_nameplate(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	check_text(&bench.use, "target", "maximum_torque_per_ampere");
	bench.rec.machine.inductance_q.value = (double)NAN;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.machine.inductance_q.value = 3e-3;
	check_int(&bench.use, "speed", bench.speed);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_text(&bench.use, "target", "voltage_limit");
	check_int(&bench.use, "dc_voltage", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "dc_voltage", bench.dc);
	check_int(&bench.use, "speed", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

static void use_alignment(struct bench *bench)
{
	check_use(&bench->use, "alignment");
	check_int(&bench->use, "own", bench->angle);
	check_int(&bench->use, "current", bench->current);
	check_int(&bench->use, "torque", bench->torque);
}

static void a_turned_frame_makes_less_torque_per_ampere(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	use_alignment(&bench);
	bench.rec.machine.inductance_q.value = 1e-3; /* no saliency: the cosine */
	bench.rec.machine.flux_linkage.tolerance = 0.01;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	play(&bench, 90, 50, 30 * cos(20 / DEGREES), 100);
	const struct metric *offset = run(&bench, "offset_by_torque");
	assert_near(offset->value, 20, 0.11, "deg");
	assert_near(offset->low, acos(cos(20 / DEGREES) / 0.99) * DEGREES, 0.3, "deg");
	assert_near(offset->high, acos(cos(20 / DEGREES) / 1.01) * DEGREES, 0.3, "deg");
	assert_edges(offset);
	assert_int_equal(decided(offset, 0, 5), VERDICT_FAIL);
	play(&bench, 90, 50, 30, 100);
	offset = run(&bench, "offset_by_torque");
	assert_near(offset->low, 0, 1e-9, "deg");
	assert_int_equal(decided(offset, 0, 5), VERDICT_INCONCLUSIVE); /* 1 % is 8 deg */
	assert_unknown(run(&bench, "frame_offset"), "no bench angle");
	play(&bench, 90, 50, 60, 100);
	assert_unknown(run(&bench, "offset_by_torque"), "fit no angle");
	play(&bench, 90, 50, 30, 100);
	recording_hole(&bench.rec, bench.torque, 100, 140);
	assert_unknown(run(&bench, "offset_by_torque"), "no sample");
	bench.rec.machine.flux_linkage.value = (double)NAN;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "torque", bench.speed);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

static void the_back_emf_shows_the_frame_without_current(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	check_use(&bench.use, "alignment");
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "emf_angle", bench.angle);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "speed", bench.torque);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "speed", bench.speed);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	play(&bench, 102, 0, 0, 100);
	assert_near(run(&bench, "offset_by_emf")->value, 12, 1e-9, "deg");
	assert_int_equal(decided(run(&bench, "offset_by_emf"), -5, 5), VERDICT_FAIL);
	play(&bench, -78, 0, 0, -100);
	bench.rec.channels[bench.angle].accuracy = (struct accuracy){.given = true, .absolute = 1};
	assert_near(run(&bench, "offset_by_emf")->value, 12, 1e-9, "deg");
	assert_edges(run(&bench, "offset_by_emf"));
	play(&bench, -78, 0, 0, 0);
	assert_unknown(run(&bench, "offset_by_emf"), "hardly turned");
	play(&bench, -78, 0, 0, 100);
	recording_hole(&bench.rec, bench.speed, 100, 200);
	assert_unknown(run(&bench, "offset_by_emf"), "no sample");
	play(&bench, -78, 0, 0, 100);
	recording_hole(&bench.rec, bench.angle, 0, 1000);
	assert_unknown(run(&bench, "offset_by_emf"), "measurement");
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(angles_follow_the_published_condition),
	    cmocka_unit_test(most_torque_is_the_target_with_its_tolerances),
	    cmocka_unit_test(the_voltage_limit_is_the_target_in_field_weakening),
	    cmocka_unit_test(a_range_holds_every_sample_of_block_commutation),
	    cmocka_unit_test(computed_targets_need_their_nameplate),
	    cmocka_unit_test(a_turned_frame_makes_less_torque_per_ampere),
	    cmocka_unit_test(the_back_emf_shows_the_frame_without_current),
	};
	return RUN_GROUP(tests);
}
