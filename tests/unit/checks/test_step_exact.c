/* SPDX-License-Identifier: Apache-2.0 */
/*
 * step_response on answers that are known in closed form, without noise. The
 * table of exactly sampled vectors was computed independently with SciPy
 * (sampling the closed form at t = 0, h, 2h ..., linear interpolation between
 * samples); the times of one unit here are one second.
 */
#include "recording.h"

typedef double answer_function(double t, double zeta);

/* 1/(s^2 + 2 zeta s + 1), unit step. */
static double second_order(double t, double zeta)
{
	double damped = sqrt(1 - zeta * zeta);
	return 1 - exp(-zeta * t) * (cos(damped * t) + zeta / damped * sin(damped * t));
}

static double critically_damped(double t, double unused)
{
	(void)unused;
	return 1 - exp(-t) * (1 + t);
}

static double first_order(double t, double unused)
{
	(void)unused;
	return 1 - exp(-t);
}

/* Optimum tuning, t in units of the sum of small time constants (Kessler; Schroeder). */
static double magnitude_optimum(double t, double unused)
{
	(void)unused;
	return 1 - exp(-t / 2) * (cos(t / 2) + sin(t / 2));
}

static double symmetrical_optimum(double t, double unused)
{
	(void)unused;
	return 1 + exp(-t / 2) - 2 * exp(-t / 4) * cos(sqrt(3) * t / 4);
}

static double symmetrical_filtered(double t, double unused)
{
	(void)unused;
	return 1 - exp(-t / 2) - 2 / sqrt(3) * exp(-t / 4) * sin(sqrt(3) * t / 4);
}

struct run {
	struct recording rec;
	struct used_check use;
};

/* Samples at h, 2h ... with the command at 0 and the value still before it. */
static void sample(struct run *run, answer_function *answer, double zeta, double h, double end,
                   double from, double to, double band)
{
	recording_init(&run->rec);
	int speed = recording_channel(&run->rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	recording_mark(&run->rec, "commanded", 0, 0);
	recording_command(&run->rec, speed, to, 0, 0);
	run->rec.sample_ns = S(h);
	run->rec.begin_ns = S(-10 * h);
	run->rec.end_ns = S(end);
	for (int i = -10; i * h <= end; i++)
		recording_at(&run->rec, speed, S(i * h),
		             i <= 0 ? from : from + (to - from) * answer(i * h, zeta));
	check_use(&run->use, "step_response");
	check_int(&run->use, "channel", speed);
	check_int(&run->use, "from", 0);
	check_ns(&run->use, "initial_for", S(10 * h));
	check_ns(&run->use, "final_for", S(end / 5));
	check_double(&run->use, "band", band);
	check_run(&run->use, &run->rec);
}

static double value(const struct run *run, const char *metric)
{
	const struct metric *found = check_metric(&run->use, metric);
	assert_known(found);
	return found->value;
}

static void assert_holds(const struct run *run, const char *name, double truth)
{
	const struct metric *metric = check_metric(&run->use, name);
	if (!(metric->low <= truth && truth <= metric->high))
		fail_msg("%s: [%.9g, %.9g] does not hold %.9g", name, metric->low, metric->high, truth);
}

struct vector {
	double zeta, h, overshoot, peak, t10, t90, settling2, settling5;
};

static const struct vector vectors[] = {
    {0.2, .05, 52.660989060, 3.20, 0.464747073, 1.668719907, 19.601799549, 13.744362275},
    {0.5, .05, 16.299293377, 3.65, 0.487897512, 2.126033023, 8.076190975, 5.289173641},
    {0.5, .10, 16.297087315, 3.60, 0.487410228, 2.126527256, 8.075861537, 5.289269728},
    {0.707, .05, 4.325362431, 4.45, 0.505299239, 2.653212517, 5.962936990, 2.929713092},
};

static void exactly_sampled_vectors_are_reproduced(void **state)
{
	(void)state;
	for (size_t i = 0; i < sizeof vectors / sizeof vectors[0]; i++) {
		const struct vector *v = &vectors[i];
		struct run run;
		sample(&run, second_order, v->zeta, v->h, 200, 0, 1000, 0.02);
		assert_near(value(&run, "overshoot"), v->overshoot, 1e-8, "%");
		assert_near(value(&run, "peak_time"), v->peak, 1e-8, "s");
		assert_near(value(&run, "rise_time"), v->t90 - v->t10, 2e-9, "s");
		assert_near(value(&run, "settling_time"), v->settling2, 1e-8, "s");
		recording_release(&run.rec);
		sample(&run, second_order, v->zeta, v->h, 200, 0, 1000, 0.05);
		assert_near(value(&run, "settling_time"), v->settling5, 1e-8, "s");
		recording_release(&run.rec);
	}
}

static void intervals_hold_what_lies_between_the_samples(void **state)
{
	(void)state;
	/* Closed form; computed with SciPy, the first three confirmed with GNU Octave. */
	static const struct {
		double zeta, overshoot, peak, rise, t10, settling2;
	} rows[] = {
	    {0.2, 52.662060, 3.206375, 1.203430, 0.465212, 19.601904},
	    {0.5, 16.303353, 3.627599, 1.637573, 0.488229, 8.076349},
	    {0.707, 4.325493, 4.442212, 2.147707, 0.505436, 5.962858},
	    {0.70710678118654752, 4.321392, 4.442883, 2.148038, 0.505445, 5.962585},
	};
	static const double steps[] = {.01, .02, .05, .1, .2};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
		for (size_t k = 0; k < sizeof steps / sizeof steps[0]; k++) {
			struct run run;
			sample(&run, second_order, rows[i].zeta, steps[k], 150, 100, -900, 0.02);
			assert_holds(&run, "overshoot", rows[i].overshoot);
			assert_holds(&run, "peak_time", rows[i].peak);
			assert_holds(&run, "rise_time", rows[i].rise);
			assert_holds(&run, "settling_time", rows[i].settling2);
			assert_holds(&run, "steady_state_error", 0);
			/* The swing back of a second-order answer is the square of its overshoot. */
			assert_holds(&run, "undershoot", rows[i].overshoot * rows[i].overshoot / 100);
			recording_release(&run.rec);
		}
}

static void answers_without_overshoot_have_none(void **state)
{
	(void)state;
	struct run run;
	/* First order: rise ln 9, settling ln 50; critically damped: computed with SciPy. */
	sample(&run, first_order, 0, 0.002, 40, 0, 600, 0.02);
	assert_near(value(&run, "overshoot"), 0, 1e-9, "%");
	assert_near(value(&run, "undershoot"), 0, 1e-9, "%");
	assert_unknown(check_metric(&run.use, "peak_time"), "no peak");
	assert_near(value(&run, "rise_time"), log(9), 2e-6, "s");
	assert_near(value(&run, "settling_time"), log(50), 2e-6, "s");
	assert_near(value(&run, "dead_time"), -log(0.95), 2e-6, "s");
	recording_release(&run.rec);
	sample(&run, critically_damped, 0, 0.002, 50, 0, 600, 0.02);
	assert_near(value(&run, "rise_time"), 3.357909, 2e-6, "s");
	assert_near(value(&run, "settling_time"), 5.833922, 2e-6, "s");
	assert_near(value(&run, "overshoot"), 0, 1e-9, "%");
	recording_release(&run.rec);
}

/* Closed forms; the numbers computed with SciPy from them. */
static void optimum_tunings_are_reproduced(void **state)
{
	(void)state;
	static const struct {
		answer_function *answer;
		double overshoot, peak, rise, settling2, settling5;
	} rows[] = {
	    {magnitude_optimum, 4.321392, 6.283185, 3.03778, 8.43237, 4.14342},
	    {symmetrical_optimum, 43.410408, 5.77264, 2.11352, 16.55053, 14.69187},
	    {symmetrical_filtered, 8.146544, 9.84443, 4.58032, 13.27490, 11.93107},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct run run;
		sample(&run, rows[i].answer, 0, 0.002, 160, 0, 100, 0.02);
		assert_near(value(&run, "overshoot"), rows[i].overshoot, 2e-5, "%");
		assert_near(value(&run, "peak_time"), rows[i].peak, 0.0011, "s");
		assert_near(value(&run, "rise_time"), rows[i].rise, 1e-5, "s");
		assert_near(value(&run, "settling_time"), rows[i].settling2, 1e-5, "s");
		recording_release(&run.rec);
		sample(&run, rows[i].answer, 0, 0.002, 160, 0, 100, 0.05);
		assert_near(value(&run, "settling_time"), rows[i].settling5, 1e-5, "s");
		recording_release(&run.rec);
	}
}

static void times_between_other_levels_can_be_asked(void **state)
{
	(void)state;
	struct run run;
	sample(&run, second_order, 0.5, 0.002, 80, 0, 100, 0.02);
	check_double(&run.use, "to", 0.5); /* of rise_time; `from` of the check is the mark */
	check_run(&run.use, &run.rec);
	assert_near(value(&run, "rise_time"), 1.294039 - 0.488229, 2e-6, "s");
	recording_release(&run.rec);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(exactly_sampled_vectors_are_reproduced),
	    cmocka_unit_test(intervals_hold_what_lies_between_the_samples),
	    cmocka_unit_test(answers_without_overshoot_have_none),
	    cmocka_unit_test(optimum_tunings_are_reproduced),
	    cmocka_unit_test(times_between_other_levels_can_be_asked),
	};
	return RUN_GROUP(tests);
}
