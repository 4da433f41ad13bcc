/* SPDX-License-Identifier: Apache-2.0 */
/* silence_reaction: seen by another device, counted from the last request. */
#include "decision.h"
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int torque, code;
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->torque = recording_channel(&bench->rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	bench->code = recording_channel(&bench->rec, "fault_code", "1", EVIDENCE_SELF_REPORTED);
	check_use(&bench->use, "silence_reaction");
	check_int(&bench->use, "channel", bench->torque);
	check_double(&bench->use, "below", 0.25);
	check_int(&bench->use, "indication", bench->code);
	check_double(&bench->use, "code", 9);
}

/* Last request in [-1, 0] ms; torque until `off`, again from `on`; silence until 400 ms. */
static void play(struct bench *bench, double off, double on, double code)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = MS(-100);
	rec->end_ns = MS(600);
	check_int(&bench->use, "from", recording_mark(rec, "silent", MS(-1), MS(0)));
	check_int(&bench->use, "back", recording_mark(rec, "back", MS(400), MS(400)));
	for (double t = -99; t < 600; t += 2) {
		recording_add(rec, bench->torque, MS(t), MS(t + 0.5),
		              t + 0.25 < off || t + 0.25 >= on ? 1 : 0);
		if (t < 0 || t > 400)
			recording_add(rec, bench->code, MS(t), MS(t + 0.5), t < 0 ? 0 : code);
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
	return decide(metric, &limit, reason, sizeof reason);
}

static void the_reaction_is_bounded_by_the_rows_around_it(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 200, 1e9, 9);
	const struct metric *time = run(&bench, "reaction_time");
	assert_known(time);
	/* Rows at 199 (torque) and 201 ms (none), the request in [-1, 0]: [199, 202.5] ms. */
	assert_near(time->low, .199, 1e-12, "s");
	assert_near(time->high, .2025, 1e-12, "s");
	assert_int_equal(at_most(time, .203), VERDICT_PASS);
	assert_int_equal(at_most(time, .201), VERDICT_INCONCLUSIVE);
	assert_int_equal(at_most(time, .198), VERDICT_FAIL);
	assert_yes_no(check_metric(&bench.use, "code_right"), true);
	assert_yes_no(check_metric(&bench.use, "stays_off"), true);
	recording_release(&bench.rec);
}

static void a_missing_watchdog_fails(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 1e9, 1e9, 0);
	assert_int_equal(at_most(run(&bench, "reaction_time"), .3), VERDICT_FAIL);
	assert_yes_no(check_metric(&bench.use, "code_right"), false);
	assert_unknown(check_metric(&bench.use, "stays_off"), "not below");
	recording_release(&bench.rec);
}

static void torque_that_comes_back_with_the_communication_is_seen(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 200, 450, 9);
	assert_known(run(&bench, "reaction_time"));
	assert_yes_no(check_metric(&bench.use, "stays_off"), false);
	recording_release(&bench.rec);
}

static void missing_data_are_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 200, 1e9, 9);
	for (size_t i = 0; i < bench.rec.series[bench.torque].rows; i++)
		if (bench.rec.rows[bench.torque][i].sent > MS(300) &&
		    bench.rec.rows[bench.torque][i].sent < MS(380))
			bench.rec.rows[bench.torque][i].value = (double)NAN;
	assert_known(run(&bench, "reaction_time"));
	assert_unknown(check_metric(&bench.use, "stays_off"), "no sample");
	for (size_t i = 0; i < bench.rec.series[bench.torque].rows; i++)
		bench.rec.rows[bench.torque][i].value = (double)NAN;
	assert_unknown(run(&bench, "reaction_time"), "measurement");
	play(&bench, -50, 1e9, 9); /* nothing there that could go off */
	assert_unknown(run(&bench, "reaction_time"), "not surely above");
	play(&bench, 200, 1e9, 9);
	bench.rec.series[bench.code].rows = 49; /* the end came before the return */
	assert_unknown(run(&bench, "code_right"), "not sampled");
	bench.rec.marks[1].reached = false;
	assert_unknown(run(&bench, "code_right"), "ended before the mark back");
	bench.rec.marks[0].reached = false;
	assert_unknown(run(&bench, "reaction_time"), "ended before the mark silent");
	check_int(&bench.use, "indication", -1);
	bench.rec.marks[0].reached = true;
	assert_unknown(run(&bench, "code_right"), "no indication");
	recording_release(&bench.rec);
}

static void the_silenced_device_is_no_witness(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), 0);
	check_int(&bench.use, "channel", bench.code);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_int(&bench.use, "channel", bench.torque);
	check_double(&bench.use, "below", 0);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	check_double(&bench.use, "below", 1);
	check_double(&bench.use, "code", (double)NAN);
	assert_int_equal(check_verify(&bench.use, &bench.rec, NULL), -1);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_reaction_is_bounded_by_the_rows_around_it),
	    cmocka_unit_test(a_missing_watchdog_fails),
	    cmocka_unit_test(torque_that_comes_back_with_the_communication_is_seen),
	    cmocka_unit_test(missing_data_are_inconclusive),
	    cmocka_unit_test(the_silenced_device_is_no_witness),
	};
	return RUN_GROUP(tests);
}
