/* SPDX-License-Identifier: Apache-2.0 */
/*
 * encoder. 1024 pulses are 4096 counts a turn and 0.087890625 deg a count;
 * count 1000 is 87.890625 deg (arithmetic). An eccentric disc gives a sine of
 * one period a turn, a missed index a drift: the fit must tell them apart.
 */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int angle, reference, index, command;
};

struct defect {
	double sine_deg, drift_deg_s, offset_deg, width_ms, speed_rps;
	int lost, reference_electrical;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->angle =
	    recording_channel(&bench->rec, "rotor_angle", "deg_mech", EVIDENCE_SELF_REPORTED);
	bench->reference =
	    recording_channel(&bench->rec, "bench_angle", "deg_mech", EVIDENCE_INDEPENDENT);
	bench->index = recording_channel(&bench->rec, "index_counts", "1", EVIDENCE_SELF_REPORTED);
	bench->command = recording_channel(&bench->rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
	bench->rec.channels[bench->index].wraps = 65536;
	check_use(&bench->use, "encoder");
	check_int(&bench->use, "angle", bench->angle);
	check_int(&bench->use, "reference", bench->reference);
	check_int(&bench->use, "index", bench->index);
	check_int(&bench->use, "command", bench->command);
}

static double wrapped(double x)
{
	return x - 360 * floor(x / 360);
}

static void play(struct bench *bench, struct defect defect)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = 0;
	rec->end_ns = MS(1000);
	double speed = defect.speed_rps != 0 ? defect.speed_rps : 10;
	recording_command(rec, bench->command, 60 * speed, MS(-100), MS(-99));
	double electrical = defect.reference_electrical ? 4 : 1;
	rec->channels[bench->reference].unit =
	    defect.reference_electrical ? unit_find("deg_el", 6) : unit_find("deg_mech", 8);
	double latched = 65000;
	int turns = 0;
	for (double t = 1; t < 999; t += 2) {
		double true_deg = 360 * speed * t * 1e-3, s = t * 1e-3;
		double sine = defect.sine_deg * sin(true_deg * 3.14159265358979 / 180 + 0.7);
		double shown = true_deg + sine + defect.drift_deg_s * s + defect.offset_deg;
		int now = (int)floor(fabs(true_deg) / 360);
		while (turns < now) {
			turns++;
			latched += (speed > 0 ? 1 : -1) * (4096 - (turns == 5 ? defect.lost : 0));
		}
		double half = defect.width_ms / 2;
		recording_add(rec, bench->angle, MS(t - half), MS(t + half), wrapped(shown));
		recording_add(rec, bench->reference, MS(t - half), MS(t + half),
		              wrapped(electrical * true_deg));
		recording_add(rec, bench->index, MS(t - half), MS(t + half),
		              latched - 65536 * floor(latched / 65536));
	}
	rec->series[bench->angle].block = rec->series[bench->reference].block = 1;
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void a_good_encoder_passes_exactly(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){0});
	const struct metric *counts = run(&bench, "counts_per_turn");
	assert_int_equal(decided(counts, 4096, 4096), VERDICT_PASS);
	assert_yes_no(run(&bench, "direction_right"), true);
	assert_near(run(&bench, "angle_error")->high, 0, 1e-9, "deg");
	assert_near(run(&bench, "once_per_turn")->high, 0, 1e-9, "deg");
	play(&bench, (struct defect){.speed_rps = -10});
	assert_yes_no(run(&bench, "direction_right"), true);
	assert_int_equal(decided(run(&bench, "counts_per_turn"), 4096, 4096), VERDICT_PASS);
	recording_release(&bench.rec);
}

static void a_lost_count_and_a_turned_round_encoder_fail(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){.lost = 1});
	const struct metric *counts = run(&bench, "counts_per_turn");
	assert_near(counts->low, 4095, 0, "");
	assert_near(counts->high, 4096, 0, "");
	assert_int_not_equal(decided(counts, 4096, 4096), VERDICT_PASS);
	play(&bench, (struct defect){0});
	bench.rec.commands[0].value = -600;
	assert_yes_no(run(&bench, "direction_right"), false);
	bench.rec.commands[0].value = 0;
	assert_unknown(run(&bench, "direction_right"), "no direction");
	bench.rec.command_count = 0;
	assert_unknown(run(&bench, "direction_right"), "not commanded");
	recording_release(&bench.rec);
}

static void a_sine_once_per_turn_and_a_drifting_index_are_told_apart(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){.sine_deg = 0.8});
	assert_near(run(&bench, "once_per_turn")->value, 0.8, 5e-3, "deg");
	assert_near(run(&bench, "drift")->value, 0, 5e-3, "deg");
	assert_near(run(&bench, "angle_error")->value, 0.8, 5e-3, "deg");
	play(&bench, (struct defect){.drift_deg_s = 0.8});
	assert_near(run(&bench, "once_per_turn")->value, 0, 5e-3, "deg");
	assert_near(run(&bench, "drift")->value, 0.8, 5e-3, "deg");
	assert_near(run(&bench, "angle_error")->value, 0.8, 5e-3, "deg");
	play(&bench, (struct defect){.drift_deg_s = -0.5, .sine_deg = 0.3, .offset_deg = 2});
	assert_near(run(&bench, "once_per_turn")->value, 0.3, 5e-3, "deg");
	assert_near(run(&bench, "drift")->value, -0.5, 5e-3, "deg");
	assert_near(run(&bench, "mean_error")->value, 1.75, 5e-3, "deg");
	recording_release(&bench.rec);
}

static void an_electrical_reference_is_divided_by_the_pole_pairs(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){.offset_deg = 3, .reference_electrical = 1});
	assert_near(run(&bench, "mean_error")->value, 3, 1e-6, "deg");
	assert_near(run(&bench, "angle_error")->value, 3, 1e-6, "deg");
	recording_release(&bench.rec);
}

static void skew_is_in_doubt_and_instruments_limit(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){.width_ms = 0.4, .offset_deg = 3});
	bench.rec.series[bench.reference].block = 9; /* another transaction */
	const struct metric *error = run(&bench, "angle_error");
	/* 3600 deg/s for 0.4 ms */
	assert_near(error->high - error->value, 1.44, 0.01, "deg");
	assert_edges(error);
	assert_int_equal(decided(error, 0, 3.5), VERDICT_INCONCLUSIVE);
	bench.rec.channels[bench.reference].accuracy =
	    (struct accuracy){.given = true, .absolute = 0.5};
	assert_true(run(&bench, "once_per_turn")->high > 0.5);
	recording_release(&bench.rec);
}

static void too_few_samples_a_turn_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){0});
	bench.rec.machine.rated_speed.value = 2 * 3.14159265358979 * 300;
	assert_unknown(run(&bench, "direction_right"), "sample faster");
	assert_known(run(&bench, "angle_error")); /* one transaction needs no unwrapping */
	bench.rec.series[bench.reference].block = 9;
	assert_unknown(run(&bench, "angle_error"), "sample faster");
	recording_release(&bench.rec);
}

static void what_was_not_measured_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, (struct defect){0});
	recording_hole(&bench.rec, bench.angle, 100, 130);
	assert_unknown(run(&bench, "angle_error"), "no sample");
	assert_unknown(run(&bench, "direction_right"), "no sample");
	play(&bench, (struct defect){0});
	recording_hole(&bench.rec, bench.index, 100, 130);
	assert_unknown(run(&bench, "counts_per_turn"), "no sample");
	play(&bench, (struct defect){0});
	recording_hole(&bench.rec, bench.index, 0, 2000);
	recording_hole(&bench.rec, bench.angle, 0, 2000);
	assert_unknown(run(&bench, "counts_per_turn"), "measurement");
	assert_unknown(run(&bench, "drift"), "measurement");
	assert_unknown(run(&bench, "direction_right"), "measurement");
	play(&bench, (struct defect){0});
	check_window(&bench.use, -1, 0, MS(20));
	assert_unknown(run(&bench, "counts_per_turn"), "turns from index");
	assert_unknown(run(&bench, "drift"), "hold longer");
	check_window(&bench.use, -1, 0, MS(50));
	play(&bench, (struct defect){.speed_rps = 0.5});
	assert_unknown(run(&bench, "drift"), "hardly turned");
	check_window(&bench.use, -1, 0, S(5));
	assert_unknown(run(&bench, "drift"), "hold longer");
	check_window(&bench.use, -1, 0, 0);
	check_int(&bench.use, "reference", -1);
	check_int(&bench.use, "index", -1);
	check_int(&bench.use, "command", -1);
	assert_unknown(run(&bench, "drift"), "no reference");
	assert_unknown(run(&bench, "counts_per_turn"), "no index");
	assert_unknown(run(&bench, "direction_right"), "no command");
	recording_release(&bench.rec);
}

static void fields_that_cannot_be_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.machine.encoder_lines = 0;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.machine.encoder_lines = 1024;
	bench.rec.channels[bench.reference].unit = unit_find("deg_el", 6);
	bench.rec.machine.pole_pairs = 0;
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.channels[bench.reference].unit = unit_find("Nm", 2);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.channels[bench.angle].unit = unit_find("deg_el", 6);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	bench.rec.channels[bench.angle].unit = unit_find("deg", 3);
	check_int(&bench.use, "reference", -1);
	check_int(&bench.use, "index", -1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	check_int(&bench.use, "command", -1);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_good_encoder_passes_exactly),
	    cmocka_unit_test(a_lost_count_and_a_turned_round_encoder_fail),
	    cmocka_unit_test(a_sine_once_per_turn_and_a_drifting_index_are_told_apart),
	    cmocka_unit_test(an_electrical_reference_is_divided_by_the_pole_pairs),
	    cmocka_unit_test(skew_is_in_doubt_and_instruments_limit),
	    cmocka_unit_test(too_few_samples_a_turn_are_inconclusive),
	    cmocka_unit_test(what_was_not_measured_is_inconclusive),
	    cmocka_unit_test(fields_that_cannot_be_are_refused),
	};
	return RUN_GROUP(tests);
}
