/* SPDX-License-Identifier: Apache-2.0 */
/* same_sign: the proof of direction. */
#include "recording.h"

struct bench {
	struct recording rec;
	struct used_check use;
	int command, own, bench, watched[2];
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	struct recording *rec = &bench->rec;
	recording_init(rec);
	bench->command = recording_channel(rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
	bench->own = recording_channel(rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	bench->bench = recording_channel(rec, "bench_speed", "rpm", EVIDENCE_INDEPENDENT);
	check_use(&bench->use, "same_sign");
	check_int(&bench->use, "command", bench->command);
	bench->watched[0] = bench->own;
	bench->watched[1] = bench->bench;
	check_list(&bench->use, "channels", bench->watched, 2);
}

static void play(struct bench *bench, double command, double own, double bench_speed, double noise)
{
	struct recording *rec = &bench->rec;
	struct random random = {43};
	recording_clear(rec);
	rec->begin_ns = 0;
	rec->end_ns = MS(400);
	check_window(&bench->use, recording_mark(rec, "commanded", MS(9), MS(10)), MS(90), MS(200));
	recording_command(rec, bench->command, -1, MS(1), MS(2));
	recording_command(rec, bench->command, command, MS(9), MS(10));
	recording_command(rec, bench->command, 0, MS(350), MS(351));
	for (double t = 1; t < 400; t += 2) {
		recording_add(rec, bench->own, MS(t), MS(t + 0.5), own + noise * random_normal(&random));
		recording_add(rec, bench->bench, MS(t), MS(t + 0.5),
		              bench_speed + noise * random_normal(&random));
	}
}

static const struct metric *run(struct bench *bench)
{
	check_run(&bench->use, &bench->rec);
	return check_metric(&bench->use, "agree");
}

static void agreement_passes_and_a_turned_sign_fails(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 100, 99, 101, 2);
	assert_yes_no(run(&bench), true);
	play(&bench, -100, -99, -101, 2);
	assert_yes_no(run(&bench), true);
	play(&bench, 100, 99, -101, 2);
	assert_yes_no(run(&bench), false);
	assert_non_null(strstr(run(&bench)->note, "bench_speed"));
	play(&bench, -100, 99, -101, 2);
	assert_yes_no(run(&bench), false);
	recording_release(&bench.rec);
}

static void a_sign_within_its_doubt_is_inconclusive(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 100, 99, 0.1, 5); /* U about 1 */
	assert_unknown(run(&bench), "bench_speed was");
	play(&bench, 100, 99, 3, 2);
	assert_yes_no(run(&bench), true);
	bench.rec.channels[bench.bench].accuracy = (struct accuracy){.given = true, .absolute = 4};
	assert_unknown(run(&bench), "bench_speed was");
	recording_release(&bench.rec);
}

static void without_a_command_or_rows_nothing_is_proven(void **state)
{
	(void)state;
	struct bench bench;
	bench_init(&bench);
	play(&bench, 0, 99, 101, 2);
	assert_unknown(run(&bench), "commanded");
	play(&bench, 100, 99, 101, 2);
	bench.rec.command_count = 0;
	assert_unknown(run(&bench), "commanded");
	play(&bench, 100, 99, 101, 2);
	bench.rec.commands[2].earliest_ns = bench.rec.commands[2].latest_ns = MS(250);
	assert_unknown(run(&bench), "anew");
	play(&bench, 100, 99, 101, 2);
	for (size_t i = 80; i < 120; i++)
		bench.rec.rows[bench.bench][i].value = (double)NAN;
	assert_unknown(run(&bench), "no sample");
	for (size_t i = 0; i < bench.rec.series[bench.bench].rows; i++)
		bench.rec.rows[bench.bench][i].value = (double)NAN;
	assert_unknown(run(&bench), "measurement");
	for (size_t i = 0; i < bench.rec.series[bench.own].rows; i++)
		bench.rec.rows[bench.own][i].value = -99;
	assert_yes_no(run(&bench), false); /* one channel proves it */
	play(&bench, 100, 99, 101, 2);
	check_window(&bench.use, 0, MS(90), MS(4));
	assert_unknown(run(&bench), "are needed");
	bench.rec.marks[0].reached = false;
	assert_unknown(run(&bench), "ended before");
	bench.rec.marks[0].reached = true;
	check_window(&bench.use, 0, MS(90), MS(100));
	check_list(&bench.use, "channels", NULL, 0);
	assert_true(isnan(run(&bench)->value));
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(agreement_passes_and_a_turned_sign_fails),
	    cmocka_unit_test(a_sign_within_its_doubt_is_inconclusive),
	    cmocka_unit_test(without_a_command_or_rows_nothing_is_proven),
	};
	return RUN_GROUP(tests);
}
