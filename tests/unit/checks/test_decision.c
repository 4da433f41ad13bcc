/* SPDX-License-Identifier: Apache-2.0 */
/* The decision rule: guarded (w = U) and simple, as in ILAC-G8:09/2019 4.2.3 and 4.2.1. */
#include "decision.h"
#include "recording.h"
#include "statistics.h"

static const struct metric_kind rise = {"rise_time", METRIC_TIME, "", NULL};
static const struct metric_kind right = {"code_right", METRIC_YES_NO, "", NULL};

static struct metric metric_of(double value, double low, double high)
{
	return (struct metric){
	    .kind = &rise, .value = value, .low = low, .high = high, .unit = unit_find("s", 1)};
}

static enum verdict verdict_of(double value, double low, double high, double min, double max,
                               enum decision_rule rule)
{
	char reason[512];
	struct metric metric = metric_of(value, low, high);
	struct limit limit = {.min = min, .max = max, .rule = rule};
	enum verdict verdict = decide(&metric, &limit, reason, sizeof reason);
	assert_true(strlen(reason) > 10);
	return verdict;
}

static void guarded_passes_inside_fails_outside_and_else_leaves_open(void **state)
{
	(void)state;
	static const struct {
		double low, high, min, max;
		enum verdict verdict;
	} rows[] = {
	    {.016, .031, -(double)INFINITY, .040, VERDICT_PASS},
	    {.016, .031, -(double)INFINITY, .031, VERDICT_PASS},
	    {.016, .031, -(double)INFINITY, .025, VERDICT_INCONCLUSIVE},
	    {.016, .031, -(double)INFINITY, .016, VERDICT_INCONCLUSIVE},
	    {.016, .031, -(double)INFINITY, .015, VERDICT_FAIL},
	    {.016, .031, .016, (double)INFINITY, VERDICT_PASS},
	    {.016, .031, .020, (double)INFINITY, VERDICT_INCONCLUSIVE},
	    {.016, .031, .032, (double)INFINITY, VERDICT_FAIL},
	    {.016, .031, .01, .04, VERDICT_PASS},
	    {.016, .031, .02, .03, VERDICT_INCONCLUSIVE},
	    {.016, (double)INFINITY, -(double)INFINITY, .01, VERDICT_FAIL},
	    {.016, (double)INFINITY, -(double)INFINITY, .02, VERDICT_INCONCLUSIVE},
	    {-(double)INFINITY, (double)INFINITY, -(double)INFINITY, (double)INFINITY,
	     VERDICT_INCONCLUSIVE},
	    {(double)NAN, .031, -(double)INFINITY, .04, VERDICT_INCONCLUSIVE},
	    {.016, (double)NAN, -(double)INFINITY, .04, VERDICT_INCONCLUSIVE},
	    {.031, .016, -(double)INFINITY, .04, VERDICT_INCONCLUSIVE},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
		assert_int_equal(verdict_of(.0235, rows[i].low, rows[i].high, rows[i].min, rows[i].max,
		                            DECISION_GUARDED),
		                 rows[i].verdict);
}

static void simple_goes_by_the_value_and_unknown_stays_open(void **state)
{
	(void)state;
	const double inf = (double)INFINITY;
	assert_int_equal(verdict_of(.0235, .016, .031, -inf, .024, DECISION_SIMPLE), VERDICT_PASS);
	assert_int_equal(verdict_of(.0235, .016, .031, -inf, .0235, DECISION_SIMPLE), VERDICT_PASS);
	assert_int_equal(verdict_of(.0235, .016, .031, -inf, .023, DECISION_SIMPLE), VERDICT_FAIL);
	assert_int_equal(verdict_of(inf, .9, inf, -inf, .3, DECISION_SIMPLE), VERDICT_FAIL);
	assert_int_equal(verdict_of((double)NAN, .1, inf, -inf, .3, DECISION_SIMPLE),
	                 VERDICT_INCONCLUSIVE);
	assert_int_equal(verdict_of((double)NAN, -inf, inf, -inf, inf, DECISION_SIMPLE),
	                 VERDICT_INCONCLUSIVE);
}

static void the_reason_has_numbers_units_and_the_note(void **state)
{
	(void)state;
	char reason[512];
	struct metric metric = metric_of(.0235, .016, .031);
	struct limit limit = {.min = -(double)INFINITY, .max = .015, .shown_unit = unit_find("ms", 2)};
	(void)snprintf(metric.note, sizeof metric.note, "polled every 10 ms");
	decide(&metric, &limit, reason, sizeof reason);
	assert_string_equal(reason, "rise_time 23.5 ms: its interval 16 ms to 31 ms lies outside the "
	                            "limit (at most 15 ms); polled every 10 ms");
	metric_unknown(&metric, &rise, unit_find("s", 1), EVIDENCE_INDEPENDENT,
	               "speed was not sampled");
	decide(&metric, &limit, reason, sizeof reason);
	assert_string_equal(reason, "rise_time is not known: speed was not sampled");
}

static void yes_and_no_are_decided_without_uncertainty(void **state)
{
	(void)state;
	char reason[512];
	struct metric metric = {
	    .kind = &right, .value = 0, .low = 0, .high = 0, .unit = unit_one(), .note = "it showed 1"};
	struct limit limit = {.min = 1, .max = 1};
	assert_int_equal(decide(&metric, &limit, reason, sizeof reason), VERDICT_FAIL);
	assert_string_equal(reason, "code_right is no, required is yes: it showed 1");
	metric.value = metric.low = metric.high = 1;
	assert_int_equal(decide(&metric, &limit, reason, sizeof reason), VERDICT_PASS);
	metric_unknown(&metric, &right, NULL, EVIDENCE_INDEPENDENT, "no samples");
	assert_int_equal(decide(&metric, &limit, reason, sizeof reason), VERDICT_INCONCLUSIVE);
	assert_string_equal(reason, "code_right is not known: no samples");
	limit.rule = DECISION_SIMPLE;
	assert_int_equal(decide(&metric, &limit, reason, sizeof reason), VERDICT_INCONCLUSIVE);
}

static void a_verdict_is_as_bad_as_its_worst_part(void **state)
{
	(void)state;
	static const enum verdict rising[] = {VERDICT_SKIPPED, VERDICT_PASS, VERDICT_INCONCLUSIVE,
	                                      VERDICT_ERROR, VERDICT_FAIL};
	for (size_t a = 0; a < 5; a++)
		for (size_t b = 0; b < 5; b++)
			assert_int_equal(verdict_worse(rising[a], rising[b]), rising[a > b ? a : b]);
	assert_string_equal(verdict_name(VERDICT_INCONCLUSIVE), "inconclusive");
}

/*
 * Conformance probabilities of JCGM 106:2012 that apply to a guarded decision
 * (inputs and results from memory; computed independently with SciPy):
 * a Zener diode of -5.47 V, u 0.05 V, limit -5.40 V; oil of 13.6, u 1.8, in
 * 12.5 .. 16.3; a speed limit of 100 km/h enforced with u = 2 % at 99.9 %.
 */
static void conformance_probabilities_are_those_of_jcgm_106(void **state)
{
	(void)state;
	assert_near(normal_cdf((-5.40 + 5.47) / 0.05), 0.91924, 5e-6, "");
	assert_near(normal_cdf((16.3 - 13.6) / 1.8) - normal_cdf((12.5 - 13.6) / 1.8), 0.66263, 5e-6,
	            "");
	assert_near(100 / (1 - normal_quantile(0.999) * 0.02), 106.588, 5e-4, "km/h");
}

/*
 * With a normal error of known u and the limit at any distance, a guarded
 * decision (w = 2 u) accepts a violating truth in at most 2.5 % of the cases.
 */
static void wrong_verdicts_are_rare_at_every_distance(void **state)
{
	(void)state;
	struct random random = {5};
	const int draws = 20000;
	for (double distance = 0; distance <= 3; distance += 0.5) {
		int passed = 0, failed = 0;
		for (int i = 0; i < draws; i++) {
			double e = random_normal(&random);
			passed += verdict_of(distance + e, distance + e - 2, distance + e + 2,
			                     -(double)INFINITY, 0, DECISION_GUARDED) == VERDICT_PASS;
			failed += verdict_of(-distance + e, -distance + e - 2, -distance + e + 2,
			                     -(double)INFINITY, 0, DECISION_GUARDED) == VERDICT_FAIL;
		}
		assert_true(passed <= 0.025 * draws + 2.33 * sqrt(0.025 * draws));
		assert_true(failed <= 0.025 * draws + 2.33 * sqrt(0.025 * draws));
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(guarded_passes_inside_fails_outside_and_else_leaves_open),
	    cmocka_unit_test(simple_goes_by_the_value_and_unknown_stays_open),
	    cmocka_unit_test(the_reason_has_numbers_units_and_the_note),
	    cmocka_unit_test(yes_and_no_are_decided_without_uncertainty),
	    cmocka_unit_test(a_verdict_is_as_bad_as_its_worst_part),
	    cmocka_unit_test(conformance_probabilities_are_those_of_jcgm_106),
	    cmocka_unit_test(wrong_verdicts_are_rare_at_every_distance),
	};
	return RUN_GROUP(tests);
}
