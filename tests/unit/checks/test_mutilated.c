/* SPDX-License-Identifier: Apache-2.0 */
/*
 * No pass on spoiled samples: a recording that passes is emptied, frozen
 * (bad rows), filled with NaN, cut short, or its times are shuffled, in many
 * random ways and places; then no limit that hangs on the spoiled part may
 * pass. Limits are such that the healthy recording passes them closely.
 */
#include "decision.h"
#include "recording.h"

enum { DRAWS = 600 }; /* four kinds of random mutilation: 2400 and those of everything */

struct bench {
	struct recording rec;
	struct used_check step, fault;
	int speed, code, torque;
};

static void play(struct bench *bench, struct random *random)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = MS(-200);
	rec->end_ns = MS(1000);
	recording_mark(rec, "mark", MS(0), MS(1));
	for (double t = -199; t < 1000; t += 2) {
		double x = t > 0.5 ? (t - 0.5) * 0.06 : 0;
		double y = 1 - exp(-0.5 * x) * (cos(0.8660254 * x) + 0.5773503 * sin(0.8660254 * x));
		recording_add(rec, bench->speed, MS(t), MS(t + 0.4),
		              1000 * y + 0.5 * random_normal(random));
		recording_add(rec, bench->code, MS(t), MS(t + 0.4), t < 15 ? 0 : 3);
		recording_add(rec, bench->torque, MS(t), MS(t + 0.4), t < 25 ? 1 : 0);
	}
}

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	bench->code = recording_channel(&bench->rec, "fault_code", "1", EVIDENCE_SELF_REPORTED);
	bench->torque = recording_channel(&bench->rec, "shaft_torque", "Nm", EVIDENCE_INDEPENDENT);
	check_use(&bench->step, "step_response");
	check_int(&bench->step, "channel", bench->speed);
	check_int(&bench->step, "from", 0);
	check_use(&bench->fault, "fault_reaction");
	check_int(&bench->fault, "from", 0);
	check_int(&bench->fault, "indication", bench->code);
	check_double(&bench->fault, "code", 3);
	check_int(&bench->fault, "torque", bench->torque);
	check_double(&bench->fault, "torque_below", 0.2);
}

struct judged {
	bool fault;
	const char *metric;
	double max;
};

static const struct judged judged[] = {
    {false, "rise_time", 0.0285}, {false, "overshoot", 16.7},      {false, "settling_time", 0.138},
    {false, "peak_time", 0.0625}, {true, "detection_time", 0.020}, {true, "torque_off_time", 0.030},
    {true, "code_right", 1},      {true, "stays_latched", 1},
};
enum { JUDGED = sizeof judged / sizeof judged[0] };

static unsigned passes(struct bench *bench)
{
	unsigned passed = 0;
	char reason[512];
	check_run(&bench->step, &bench->rec);
	check_run(&bench->fault, &bench->rec);
	for (size_t i = 0; i < JUDGED; i++) {
		const struct metric *metric =
		    check_metric(judged[i].fault ? &bench->fault : &bench->step, judged[i].metric);
		bool yes_no = metric->kind->shape == METRIC_YES_NO;
		struct limit limit = {.min = yes_no ? 1 : (double)-INFINITY, .max = judged[i].max};
		if (decide(metric, &limit, reason, sizeof reason) == VERDICT_PASS)
			passed |= 1u << i;
	}
	return passed;
}

static const unsigned all_pass = (1u << JUDGED) - 1;

static void the_healthy_recording_passes(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {51};
	bench_init(&bench);
	int passed = 0;
	for (int draw = 0; draw < 50; draw++) {
		play(&bench, &random);
		passed += passes(&bench) == all_pass;
	}
	assert_true(passed >= 45); /* limits are close; else the rest would prove nothing */
	recording_release(&bench.rec);
}

static void for_all_rows(struct bench *bench, void (*spoil)(struct recorded_row *, size_t))
{
	for (size_t channel = 0; channel < bench->rec.channel_count; channel++)
		spoil(bench->rec.rows[channel], bench->rec.series[channel].rows);
}

static void fill_with_nan(struct recorded_row *rows, size_t count)
{
	for (size_t i = 0; i < count; i++)
		rows[i].value = (double)NAN;
}

static void nothing_passes_on_nothing(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {52};
	bench_init(&bench);
	play(&bench, &random);
	for_all_rows(&bench, fill_with_nan);
	assert_int_equal(passes(&bench), 0);
	play(&bench, &random);
	for (size_t channel = 0; channel < bench.rec.channel_count; channel++)
		bench.rec.series[channel].rows = 0;
	assert_int_equal(passes(&bench), 0);
	play(&bench, &random);
	const struct bad_rows bad = {0, 100000, "the life counter of controller stands"};
	for (size_t channel = 0; channel < bench.rec.channel_count; channel++) {
		bench.rec.series[channel].bad = &bad;
		bench.rec.series[channel].bad_count = 1;
	}
	assert_int_equal(passes(&bench), 0);
	recording_release(&bench.rec);
}

/* NaN or a standing life counter over at least 30 ms that hold the event; what follows it too. */
static void a_hole_over_the_answer_never_passes(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {53};
	bench_init(&bench);
	for (int draw = 0; draw < DRAWS; draw++) {
		play(&bench, &random);
		double from = random_between(&random, -60, 3), to = random_between(&random, 70, 180);
		struct bad_rows bad[3];
		for (size_t channel = 0; channel < 3; channel++) {
			struct recorded_row *rows = bench.rec.rows[channel];
			bad[channel] = (struct bad_rows){SIZE_MAX, 0, "the life counter stands"};
			for (size_t i = 0; i < bench.rec.series[channel].rows; i++) {
				if (rows[i].sent < MS(from) || rows[i].sent > MS(to))
					continue;
				bad[channel].first = i < bad[channel].first ? i : bad[channel].first;
				bad[channel].last = i;
				if (draw % 2)
					rows[i].value = (double)NAN;
			}
			bench.rec.series[channel].bad = &bad[channel];
			bench.rec.series[channel].bad_count = draw % 2 ? 0 : 1;
		}
		/* That it stays latched, and was right, is seen after the hole too. */
		unsigned timing = 0x3f;
		assert_int_equal(passes(&bench) & timing, 0);
	}
	recording_release(&bench.rec);
}

static void a_recording_cut_short_never_passes_what_lies_beyond(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {54};
	bench_init(&bench);
	for (int draw = 0; draw < DRAWS; draw++) {
		play(&bench, &random);
		size_t keep = (size_t)random_between(&random, 0, 590);
		for (size_t channel = 0; channel < 3; channel++)
			bench.rec.series[channel].rows = keep;
		unsigned passed = passes(&bench);
		double last = -199 + 2 * ((double)keep - 1);
		assert_int_equal(passed & 0x0f, 0); /* the end of the step is not there */
		assert_int_equal(passed & 0x80, 0); /* nor that it stayed latched */
		if (last < 14)
			assert_int_equal(passed & 0x50, 0);
		if (last < 44)
			assert_int_equal(passed & 0x20, 0);
	}
	recording_release(&bench.rec);
}

static void shuffled_times_never_pass(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {55};
	bench_init(&bench);
	for (int draw = 0; draw < DRAWS; draw++) {
		play(&bench, &random);
		for (size_t channel = 0; channel < 3; channel++) {
			struct recorded_row *rows = bench.rec.rows[channel];
			size_t a = (size_t)random_between(&random, 80, 590), b = a;
			while (a == b)
				b = (size_t)random_between(&random, 80, 590);
			const struct recorded_row row = rows[a];
			rows[a] = draw % 2 ? rows[b] : rows[a];
			if (draw % 2 == 0) {
				rows[a].sent = rows[b].sent;
				rows[a].received = rows[b].received;
				rows[b].sent = row.sent;
				rows[b].received = row.received;
			}
		}
		assert_int_equal(passes(&bench), 0);
	}
	recording_release(&bench.rec);
}

/* All times of the samples later by a constant: latencies grow, so close limits fail. */
static void shifted_times_do_not_pass_times_from_the_command(void **state)
{
	(void)state;
	struct bench bench;
	struct random random = {56};
	bench_init(&bench);
	for (int draw = 0; draw < DRAWS; draw++) {
		play(&bench, &random);
		int64_t shift = MS(random_between(&random, 8, 100));
		for (size_t channel = 0; channel < 3; channel++)
			for (size_t i = 0; i < bench.rec.series[channel].rows; i++) {
				bench.rec.rows[channel][i].sent += shift;
				bench.rec.rows[channel][i].received += shift;
			}
		bench.rec.end_ns += shift;
		/* settling_time, peak_time, detection_time, torque_off_time */
		assert_int_equal(passes(&bench) & 0x3c, 0);
	}
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_healthy_recording_passes),
	    cmocka_unit_test(nothing_passes_on_nothing),
	    cmocka_unit_test(a_hole_over_the_answer_never_passes),
	    cmocka_unit_test(a_recording_cut_short_never_passes_what_lies_beyond),
	    cmocka_unit_test(shuffled_times_never_pass),
	    cmocka_unit_test(shifted_times_do_not_pass_times_from_the_command),
	};
	return RUN_GROUP(tests);
}
