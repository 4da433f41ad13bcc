/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Whether the intervals of step_response hold the truth: simulated
 * measurements of second-order answers whose metrics are known in closed form,
 * with noise, jitter, refresh and quantisation drawn at random. The same draw
 * shows that the intervals are not lazily wide.
 */
#include "recording.h"

enum { DRAWS = 2000 };

static const char *const judged[] = {"rise_time",          "overshoot", "settling_time",
                                     "steady_state_error", "peak_time", "dead_time"};
enum { JUDGED = sizeof judged / sizeof judged[0] };

struct truth {
	double zeta, omega, step;
	double value[JUDGED];
};

/* Unit step of 1/(s^2 + 2 zeta s + 1) at time x (in 1/omega). */
static double answer(double zeta, double x)
{
	if (x <= 0)
		return 0;
	double damped = sqrt(1 - zeta * zeta);
	return 1 - exp(-zeta * x) * (cos(damped * x) + zeta / damped * sin(damped * x));
}

static double first_passage(double zeta, double level)
{
	double low = 0, high = 3.14159265358979 / sqrt(1 - zeta * zeta);
	for (int i = 0; i < 100; i++) {
		double middle = (low + high) / 2;
		*(answer(zeta, middle) < level ? &low : &high) = middle;
	}
	return low;
}

/* From the envelope back to the last entry, by steps much finer than any feature. */
static double last_entry(double zeta, double band)
{
	double x = -log(band * sqrt(1 - zeta * zeta)) / zeta;
	while (x > 0 && fabs(answer(zeta, x) - 1) < band)
		x -= 1e-3;
	double low = x, high = x + 1e-3;
	for (int i = 0; i < 60; i++) {
		double middle = (low + high) / 2;
		*(fabs(answer(zeta, middle) - 1) > band ? &low : &high) = middle;
	}
	return low;
}

static void know(struct truth *truth, double band)
{
	double zeta = truth->zeta, omega = truth->omega, damped = sqrt(1 - zeta * zeta);
	truth->value[0] = (first_passage(zeta, 0.9) - first_passage(zeta, 0.1)) / omega;
	truth->value[1] = 100 * exp(-3.14159265358979 * zeta / damped);
	truth->value[2] = last_entry(zeta, band) / omega;
	truth->value[3] = 0;
	truth->value[4] = 3.14159265358979 / damped / omega;
	truth->value[5] = first_passage(zeta, 0.05) / omega;
}

struct disturbance {
	double noise; /* of the step */
	double resolution;
	double interval_ms, jitter_ms, width_ms, refresh_ms, mark_ms;
};

static void measure(struct recording *rec, int channel, const struct truth *truth,
                    const struct disturbance *disturbance, struct random *random)
{
	rec->channels[channel].resolution = disturbance->resolution;
	rec->channels[channel].refresh_ns = MS(disturbance->refresh_ms);
	rec->sample_ns = MS(disturbance->interval_ms);
	double command = random_between(random, 0, disturbance->mark_ms);
	recording_mark(rec, "commanded", MS(0), MS(disturbance->mark_ms));
	recording_command(rec, channel, 100 + truth->step, MS(0), MS(disturbance->mark_ms));
	rec->begin_ns = S(-1);
	rec->end_ns = S(14 / truth->zeta / truth->omega + 1);
	for (double t = -999 + random_uniform(random); t * 1e6 < (double)rec->end_ns;
	     t += disturbance->interval_ms) {
		double sent = t + random_between(random, 0, disturbance->jitter_ms);
		double received = sent + random_between(random, 0.2, 1) * disturbance->width_ms;
		double taken = random_between(random, sent, received) -
		               random_uniform(random) * disturbance->refresh_ms;
		double value =
		    100 + truth->step * answer(truth->zeta, (taken - command) * 1e-3 * truth->omega);
		value += disturbance->noise * fabs(truth->step) * random_normal(random);
		if (disturbance->resolution > 0)
			value = disturbance->resolution * round(value / disturbance->resolution);
		recording_add(rec, channel, MS(sent), MS(received), value);
	}
}

static int by_size(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

/* Draws; the share that holds the truth, and median half-width over the 95 % quantile of errors. */
static void coverage(const char *title, uint64_t seed, double noise_most, double resolution_most)
{
	static double errors[JUDGED][DRAWS], widths[JUDGED][DRAWS];
	size_t known[JUDGED] = {0}, held[JUDGED] = {0};
	struct random random = {seed};
	struct recording rec;
	recording_init(&rec);
	int channel = recording_channel(&rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	struct used_check use;
	check_use(&use, "step_response");
	check_int(&use, "channel", channel);
	check_int(&use, "from", 0);
	check_ns(&use, "initial_for", MS(900));
	check_ns(&use, "final_for", MS(1000));
	for (int draw = 0; draw < DRAWS; draw++) {
		recording_clear(&rec);
		struct truth truth = {
		    .zeta = random_between(&random, 0.3, 0.75),
		    .omega = random_between(&random, 30, 120),
		    .step = random_uniform(&random) < 0.5 ? -600 : 900,
		};
		know(&truth, 0.02);
		struct disturbance disturbance = {
		    .noise = random_between(&random, 0, noise_most),
		    .resolution =
		        random_uniform(&random) < 0.5 ? 0 : random_between(&random, 0, resolution_most),
		    .interval_ms = 2,
		    .jitter_ms = random_between(&random, 0, 0.3),
		    .width_ms = random_between(&random, 0.1, 0.8),
		    .refresh_ms = random_uniform(&random) < 0.5 ? 0 : 1,
		    .mark_ms = random_between(&random, 0, 1),
		};
		measure(&rec, channel, &truth, &disturbance, &random);
		check_run(&use, &rec);
		for (size_t i = 0; i < JUDGED; i++) {
			const struct metric *metric = check_metric(&use, judged[i]);
			if (isnan(metric->value) || isinf(metric->high))
				continue;
			assert_known(metric);
			size_t at = known[i]++;
			held[i] += metric->low <= truth.value[i] && truth.value[i] <= metric->high;
			errors[i][at] = fabs(metric->value - truth.value[i]);
			widths[i][at] = (metric->high - metric->low) / 2;
		}
	}
	recording_release(&rec);
	bool wrong = false;
	for (size_t i = 0; i < JUDGED; i++) {
		if (known[i] < DRAWS / 2) {
			print_error("%s: %s known in %zu of %d only\n", title, judged[i], known[i], DRAWS);
			wrong = true;
			continue;
		}
		qsort(errors[i], known[i], sizeof(double), by_size);
		qsort(widths[i], known[i], sizeof(double), by_size);
		double share = (double)held[i] / (double)known[i];
		double wide = widths[i][known[i] / 2] / errors[i][(size_t)((double)known[i] * 0.95)];
		print_message("%s: %-18s known %4zu, held %.4f, width/error %.2f\n", title, judged[i],
		              known[i], share, wide);
		wrong |= share < 0.95 || wide > 2.5;
	}
	assert_false(wrong);
}

static void intervals_hold_the_truth_at_small_noise(void **state)
{
	(void)state;
	coverage("noise to 0.1 %", 1, 0.001, 0.5);
}

static void intervals_hold_the_truth_at_noise(void **state)
{
	(void)state;
	coverage("noise to 0.5 %", 2, 0.005, 2);
}

static void intervals_hold_the_truth_at_large_noise(void **state)
{
	(void)state;
	coverage("noise to 1.5 %", 3, 0.015, 5);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(intervals_hold_the_truth_at_small_noise),
	    cmocka_unit_test(intervals_hold_the_truth_at_noise),
	    cmocka_unit_test(intervals_hold_the_truth_at_large_noise),
	};
	return RUN_GROUP(tests);
}
