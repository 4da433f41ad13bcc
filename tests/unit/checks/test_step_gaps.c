/* SPDX-License-Identifier: Apache-2.0 */
/*
 * step_response on a wire that loses replies: samples are few and irregular,
 * and some are missing where the answer lies. Whatever is said must hold the
 * truth, or nothing is said.
 *
 * The truth is the closed form of a second-order answer, found here by a fine
 * search, so that no formula of the check is used to test it.
 */
#include "decision.h"
#include "recording.h"

enum { METRICS = 3, DRAWS = 400 };
static const char *const NAMES[METRICS] = {"overshoot", "rise_time", "settling_time"};

struct bench {
	struct recording rec;
	struct used_check use;
	int speed, command;
};

struct story {
	double zeta, omega, noise;
	double period_ms, jitter_ms, lost; /* of polls; lost: share of them */
	double outage_ms;                  /* one outage of up to this, in the first 60 ms */
};

static void bench_init(struct bench *bench)
{
	*bench = (struct bench){0};
	recording_init(&bench->rec);
	bench->speed = recording_channel(&bench->rec, "speed", "rpm", EVIDENCE_INDEPENDENT);
	bench->command = recording_channel(&bench->rec, "speed_command", "rpm", EVIDENCE_SELF_REPORTED);
	check_use(&bench->use, "step_response");
	check_int(&bench->use, "channel", bench->speed);
}

static double answer(const struct story *story, double t)
{
	double x = t * story->omega, damped = sqrt(1 - story->zeta * story->zeta);
	return t <= 0 ? 0
	              : 600 * (1 - exp(-story->zeta * x) *
	                               (cos(damped * x) + story->zeta / damped * sin(damped * x)));
}

/* Overshoot in %, rise time 10-90 % and settling into 2 % (the check's own default), s. */
static void find_truth(const struct story *story, double truth[METRICS])
{
	double t10 = -1, t90 = -1, settled = 0, peak = 0;
	for (double t = 0; t < 0.5; t += 1e-5) {
		double y = answer(story, t) / 600;
		t10 = t10 < 0 && y >= 0.1 ? t : t10;
		t90 = t90 < 0 && y >= 0.9 ? t : t90;
		settled = fabs(y - 1) > 0.02 ? t : settled;
		peak = fmax(peak, y);
	}
	truth[0] = 100 * (peak - 1);
	truth[1] = t90 - t10;
	truth[2] = settled;
}

static void play(struct bench *bench, const struct story *story, struct random *random)
{
	struct recording *rec = &bench->rec;
	recording_clear(rec);
	rec->begin_ns = MS(-150);
	rec->end_ns = MS(700);
	check_int(&bench->use, "from", recording_mark(rec, "commanded", MS(0), MS(0.2)));
	recording_command(rec, bench->command, 600, MS(0), MS(0.2));
	double effect = random_between(random, 0, 0.2);
	double out = random_between(random, 0, 60);
	double back = out + random_between(random, 0, story->outage_ms);
	for (double t = -150; t < 700;
	     t += story->period_ms + random_between(random, 0, story->jitter_ms)) {
		double taken = t + random_between(random, 0, 0.3);
		double y = answer(story, (taken - effect) / 1e3) + story->noise * random_normal(random);
		if (random_between(random, 0, 1) >= story->lost && !(t > out && t < back))
			recording_add(rec, bench->speed, MS(t), MS(t + 0.3), y);
	}
}

static void what_is_said_holds_the_truth(void **state)
{
	(void)state;
	static const struct story rows[] = {
	    /* zeta, omega, noise, period, jitter, lost, outage */
	    {0.76, 190, 0.3, 2, 0.5, 0, 0},   {0.76, 190, 0.3, 4, 3, 0.1, 0},
	    {0.76, 190, 0.3, 4, 1, 0, 40},    {0.76, 190, 0.02, 4, 3, 0.1, 20},
	    {0.5, 100, 0.3, 4, 3, 0.1, 40},   {0.5, 100, 1, 2, 2, 0.05, 20},
	    {0.3, 150, 0.3, 2, 4, 0.2, 30},   {0.76, 190, 0.3, 2, 1, 0, 9},
	    {0.76, 190, 0.3, 2, 6, 0.05, 15},
	};
	struct bench bench;
	bench_init(&bench);
	check_double(&bench.use, "band", 0.02);
	struct random random = {7};
	size_t bad = 0;
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		double truth[METRICS];
		size_t said[METRICS] = {0}, wrong[METRICS] = {0};
		find_truth(&rows[i], truth);
		for (int draw = 0; draw < DRAWS; draw++) {
			play(&bench, &rows[i], &random);
			check_run(&bench.use, &bench.rec);
			for (int m = 0; m < METRICS; m++) {
				const struct metric *metric = check_metric(&bench.use, NAMES[m]);
				if (isnan(metric->value))
					continue;
				said[m]++;
				wrong[m] += truth[m] < metric->low - 1e-5 || truth[m] > metric->high + 1e-5;
			}
		}
		for (int m = 0; m < METRICS; m++) {
			assert_true(said[m] > DRAWS / 4);
			if (wrong[m] > said[m] / 20 + 3) { /* intervals of 95 % */
				print_message("row %zu, %s: %zu of %zu intervals miss it\n", i, NAMES[m], wrong[m],
				              said[m]);
				bad++;
			}
		}
	}
	assert_int_equal(bad, 0);
	recording_release(&bench.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(what_is_said_holds_the_truth),
	};
	return RUN_GROUP(tests);
}
