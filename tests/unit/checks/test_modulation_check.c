/* SPDX-License-Identifier: Apache-2.0 */
/*
 * modulation. Reference: times of the two active vectors by van der Broeck et
 * al., IEEE Trans. IA 24(1), 1988 (from memory), T1 = sqrt3 Ts V/Vdc sin(60 deg
 * - theta), T2 = sqrt3 Ts V/Vdc sin theta, Vdc = 300 V, Ts = 100 us; values
 * computed independently with SciPy by reconstruction of the vector.
 */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int duty[3], alpha, beta, dc;
};

static void bench_init(struct bench *bench)
{
	static const char *const duties[] = {"duty_a", "duty_b", "duty_c"};
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	check_use(&bench->use, "modulation");
	for (int i = 0; i < 3; i++) {
		bench->duty[i] = recording_channel(&bench->rec, duties[i], "1", EVIDENCE_SELF_REPORTED);
		check_int(&bench->use, duties[i], bench->duty[i]);
	}
	bench->alpha = recording_channel(&bench->rec, "u_alpha", "V", EVIDENCE_SELF_REPORTED);
	bench->beta = recording_channel(&bench->rec, "u_beta", "V", EVIDENCE_SELF_REPORTED);
	bench->dc = recording_channel(&bench->rec, "dc_voltage", "V", EVIDENCE_INDEPENDENT);
	check_int(&bench->use, "alpha", bench->alpha);
	check_int(&bench->use, "beta", bench->beta);
	check_int(&bench->use, "dc_voltage", bench->dc);
}

/* Upper-switch duties from the active times (us of 100), halves of the zero time at both ends. */
static void duties_of(int sector, double t1, double t2, double duty[3])
{
	static const int vectors[6][3] = {{1, 0, 0}, {1, 1, 0}, {0, 1, 0},
	                                  {0, 1, 1}, {0, 0, 1}, {1, 0, 1}};
	for (int i = 0; i < 3; i++)
		duty[i] =
		    (vectors[sector][i] * t1 + vectors[(sector + 1) % 6][i] * t2 + (100 - t1 - t2) / 2) /
		    100;
}

static void play(struct bench *bench, const double duty[3], double volts, double degrees)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = 0;
	rec->end_ns = MS(100);
	double radians = degrees * 3.14159265358979323846 / 180;
	for (double t = 1; t < 99; t += 2) {
		for (int i = 0; i < 3; i++)
			recording_add(rec, bench->duty[i], MS(t), MS(t + 0.5), duty[i]);
		recording_add(rec, bench->alpha, MS(t), MS(t + 0.5), volts * cos(radians));
		recording_add(rec, bench->beta, MS(t), MS(t + 0.5), volts * sin(radians));
		recording_add(rec, bench->dc, MS(t + 0.6), MS(t + 0.9), 300);
	}
	for (int i = 0; i < 3; i++)
		rec->series[bench->duty[i]].block = 1;
	rec->series[bench->alpha].block = rec->series[bench->beta].block = 1;
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void published_switching_times_make_their_vectors(void **state)
{
	(void)state;
	static const struct {
		int sector;
		double volts, degrees, t1, t2, t0;
	} cases[] = {
	    {0, 100, 20, 37.1114, 19.7465, 43.1421}, {0, 100, 30, 28.8675, 28.8675, 42.2650},
	    {0, 150, 45, 22.4144, 61.2372, 16.3484}, {0, 173.2051, 30, 50, 50, 0},
	    {1, 120, 80, 44.5336, 23.6959, 31.7705},
	};
	struct bench bench;
	bench_init(&bench);
	for (size_t i = 0; i < 5; i++) {
		double duty[3];
		duties_of(cases[i].sector, cases[i].t1, cases[i].t2, duty);
		play(&bench, duty, cases[i].volts, cases[i].degrees);
		assert_near(run(&bench, "vector_angle_error")->value, 0, 1e-3, "deg");
		assert_near(run(&bench, "vector_magnitude_error")->value, 0, 1e-3, "%");
		assert_near(run(&bench, "null_share")->value, cases[i].t0, 1e-3, "%");
		assert_near(run(&bench, "linear_use")->value, 100 * cases[i].volts / 173.205081, 1e-3, "%");
	}
	recording_release(&bench.rec);
}

static void a_turned_and_a_short_vector_are_seen(void **state)
{
	(void)state;
	struct bench bench;
	double duty[3];
	bench_init(&bench);
	duties_of(0, 37.1114, 19.7465, duty);
	play(&bench, duty, 100, 23);
	assert_near(run(&bench, "vector_angle_error")->value, 3, 1e-3, "deg");
	play(&bench, duty, 110, 20);
	assert_near(run(&bench, "vector_magnitude_error")->value, 1000 / 173.205081, 1e-3, "%");
	assert_int_equal(run(&bench, "null_share")->evidence, EVIDENCE_SELF_REPORTED);
	recording_release(&bench.rec);
}

static void coding_and_instrument_leave_doubt(void **state)
{
	(void)state;
	struct bench bench;
	double duty[3];
	bench_init(&bench);
	duties_of(0, 37.1114, 19.7465, duty);
	play(&bench, duty, 100, 20);
	for (int i = 0; i < 3; i++)
		bench.rec.channels[bench.duty[i]].resolution = 0.001;
	/* 4/3 of half a step of 0.001 times 300 V is 0.2 V of 100 V. */
	const struct metric *angle = run(&bench, "vector_angle_error");
	assert_near(angle->high, asin(0.2 / 100) * 180 / 3.14159265358979, 1e-3, "deg");
	assert_edges(angle);
	assert_int_equal(decided(angle, -1, 0.05), VERDICT_INCONCLUSIVE);
	bench.rec.channels[bench.dc].accuracy = (struct accuracy){.given = true, .of_reading = 0.01};
	assert_near(run(&bench, "vector_magnitude_error")->high, 100 * (0.2 + 100 * 0.01 / 0.99) / 173.205081, 1e-3, "%");
	assert_edges(run(&bench, "linear_use"));
	assert_edges(run(&bench, "null_share"));
	recording_release(&bench.rec);
}

static void vectors_too_short_for_an_angle_have_none(void **state)
{
	(void)state;
	struct bench bench;
	double duty[3] = {0.5, 0.5, 0.5};
	bench_init(&bench);
	play(&bench, duty, 2, 20);
	assert_unknown(run(&bench, "vector_angle_error"), "long enough");
	assert_near(run(&bench, "null_share")->value, 100, 1e-9, "%");
	for (size_t i = 0; i < bench.rec.series[bench.dc].rows; i++)
		bench.rec.rows[bench.dc][i].value = 0;
	assert_unknown(run(&bench, "null_share"), "no voltage");
	recording_release(&bench.rec);
}

static void what_was_not_read_together_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	double duty[3];
	bench_init(&bench);
	duties_of(0, 37.1114, 19.7465, duty);
	play(&bench, duty, 100, 20);
	bench.rec.series[bench.beta].block = 2;
	assert_unknown(run(&bench, "vector_angle_error"), "one transaction");
	play(&bench, duty, 100, 20);
	recording_hole(&bench.rec, bench.duty[1], 40, 41.5);
	assert_unknown(run(&bench, "vector_angle_error"), "one transaction");
	play(&bench, duty, 100, 20);
	for (int i = 0; i < bench.dc; i++)
		recording_hole(&bench.rec, i, 40, 60);
	assert_unknown(run(&bench, "null_share"), "no sample");
	play(&bench, duty, 100, 20);
	recording_hole(&bench.rec, bench.dc, 40, 60);
	assert_unknown(run(&bench, "null_share"), "no sample");
	play(&bench, duty, 100, 20);
	recording_hole(&bench.rec, bench.alpha, 0, 600);
	assert_unknown(run(&bench, "linear_use"), "measurement");
	play(&bench, duty, 100, 20);
	check_window(&bench.use, -1, MS(10), MS(4));
	assert_unknown(run(&bench, "linear_use"), "3 are needed");
	check_window(&bench.use, -1, MS(10), MS(400));
	assert_unknown(run(&bench, "linear_use"), "hold longer");
	recording_release(&bench.rec);
}

static void channels_of_other_kinds_are_refused(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	bench.rec.channels[bench.beta].unit = unit_find("rpm", 3);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "beta", bench.alpha);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(published_switching_times_make_their_vectors),
	    cmocka_unit_test(a_turned_and_a_short_vector_are_seen),
	    cmocka_unit_test(coding_and_instrument_leave_doubt),
	    cmocka_unit_test(vectors_too_short_for_an_angle_have_none),
	    cmocka_unit_test(what_was_not_read_together_is_inconclusive),
	    cmocka_unit_test(channels_of_other_kinds_are_refused),
	};
	return RUN_GROUP(tests);
}
