/* SPDX-License-Identifier: Apache-2.0 */
/* refusal: exceptions, and that nothing changed. */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int command, speed, counts, watched[3];
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	struct recording *rec = &bench->rec;
	recording_init(rec);
	bench->command = recording_channel(rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
	bench->speed = recording_channel(rec, "bench_speed", "rpm", EVIDENCE_INDEPENDENT);
	bench->counts = recording_channel(rec, "rotor_counts", "counts", EVIDENCE_SELF_REPORTED);
	rec->channels[bench->command].resolution = 0.2;
	rec->channels[bench->counts].wraps = 4096;
	check_use(&bench->use, "refusal");
	check_text(&bench->use, "attempt", "too_fast");
	bench->watched[0] = bench->command;
	bench->watched[1] = bench->speed;
	bench->watched[2] = bench->counts;
	check_list(&bench->use, "unchanged", bench->watched, 2);
}

static void play(struct bench *bench, enum outcome_status status, int exception, int expected,
                 double after)
{
	struct recording *rec = &bench->rec;
	struct random random = {41};
	recording_clear(rec);
	rec->begin_ns = 0;
	rec->end_ns = MS(400);
	rec->outcomes[0] = (struct outcome){"other", OUTCOME_ACCEPTED, 0, 0, MS(10), MS(11)};
	rec->outcomes[1] = (struct outcome){"too_fast", status, exception, expected, MS(200), MS(201)};
	rec->outcome_count = 2;
	for (double t = 1; t < 400; t += 2) {
		recording_add(rec, bench->command, MS(t), MS(t + 0.5), t < 200 ? 600 : 600 + after);
		recording_add(rec, bench->speed, MS(t), MS(t + 0.5), 600 + random_normal(&random));
		recording_add(rec, bench->counts, MS(t), MS(t + 0.5), t < 200 ? 4095 : 0);
	}
}

static const struct metric *run(struct bench *bench, const char *metric)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, metric);
}

static void an_exception_is_a_refusal(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0);
	assert_yes_no(run(&bench, "refused"), true);
	assert_non_null(strstr(check_metric(&bench.use, "refused")->note, "illegal data value"));
	assert_yes_no(check_metric(&bench.use, "exception_right"), true);
	assert_yes_no(check_metric(&bench.use, "unchanged"), true);
	play(&bench, OUTCOME_EXCEPTION, 2, 3, 0);
	assert_yes_no(run(&bench, "refused"), true);
	assert_yes_no(check_metric(&bench.use, "exception_right"), false);
	play(&bench, OUTCOME_EXCEPTION, 2, 0, 0);
	assert_yes_no(run(&bench, "exception_right"), true);
	recording_release(&bench.rec);
}

static void acceptance_fails_and_silence_decides_nothing(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, OUTCOME_ACCEPTED, 0, 3, 0);
	assert_yes_no(run(&bench, "refused"), false);
	assert_yes_no(check_metric(&bench.use, "exception_right"), false);
	play(&bench, OUTCOME_NO_REPLY, 0, 3, 0);
	assert_unknown(run(&bench, "refused"), "no reply");
	assert_unknown(check_metric(&bench.use, "exception_right"), "no reply");
	assert_yes_no(check_metric(&bench.use, "unchanged"), true);
	play(&bench, OUTCOME_NOT_MADE, 0, 3, 0);
	assert_unknown(run(&bench, "refused"), "ended before");
	assert_unknown(check_metric(&bench.use, "unchanged"), "ended before");
	bench.rec.outcome_count = 1;
	assert_unknown(run(&bench, "refused"), "nothing is recorded");
	recording_release(&bench.rec);
}

static void a_change_beyond_noise_and_resolution_is_seen(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0.2); /* one step of the coding */
	assert_yes_no(run(&bench, "unchanged"), true);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0.4);
	assert_yes_no(run(&bench, "unchanged"), false);
	assert_non_null(strstr(check_metric(&bench.use, "unchanged")->note, "speed_command went"));
	assert_int_equal(check_metric(&bench.use, "unchanged")->evidence, EVIDENCE_SELF_REPORTED);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0);
	bench.rec.channels[bench.counts].resolution = 1;
	check_list(&bench.use, "unchanged", bench.watched, 3); /* 4095 to 0 is one count */
	assert_yes_no(run(&bench, "unchanged"), true);
	recording_release(&bench.rec);
}

static void missing_data_are_inconclusive_unless_another_channel_changed(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0);
	for (size_t i = 100; i < bench.rec.series[bench.speed].rows; i++)
		bench.rec.rows[bench.speed][i].value = (double)NAN;
	assert_unknown(run(&bench, "unchanged"), "measurement");
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 5);
	for (size_t i = 100; i < bench.rec.series[bench.speed].rows; i++)
		bench.rec.rows[bench.speed][i].value = (double)NAN;
	assert_yes_no(run(&bench, "unchanged"), false);
	play(&bench, OUTCOME_EXCEPTION, 3, 3, 0);
	bench.rec.series[bench.speed].rows = 102; /* ends too early */
	assert_unknown(run(&bench, "unchanged"), "hold longer");
	bench.rec.series[bench.speed].rows = 0;
	assert_unknown(run(&bench, "unchanged"), "not sampled");
	check_list(&bench.use, "unchanged", NULL, 0);
	assert_unknown(run(&bench, "unchanged"), "names no channels");
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(an_exception_is_a_refusal),
	    cmocka_unit_test(acceptance_fails_and_silence_decides_nothing),
	    cmocka_unit_test(a_change_beyond_noise_and_resolution_is_seen),
	    cmocka_unit_test(missing_data_are_inconclusive_unless_another_channel_changed),
	};
	return RUN_GROUP(tests);
}
