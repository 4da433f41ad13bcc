/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Repeats judged as one population, and instruments past their calibration:
 * what judge_totals() makes of verdicts that stand already. The check gives
 * the values that the test sets.
 */
#include "judge_calibration.h"
#include "judge_population.h"

#include <stdio.h>
#include <string.h>

#include "near.h"

enum { MOST = 30 };

struct params {
	int channel;
};

static const struct metric_kind METRIC[] = {{"rise_time", METRIC_TIME, "a time", NULL}};
static const struct field FIELDS[] = {
    {.key = "channel", .kind = FIELD_CHANNEL, .offset = offsetof(struct params, channel)}};
static const struct field_table TABLE = {"kind", "", FIELDS, 1};
static const struct check_kind KIND = {
    .name = "kind", .text = "kind", .fields = &TABLE, .metrics = METRIC, .metric_count = 1};

struct fixture {
	struct rig rig;
	struct rig_channel channels[2];
	struct channel_info infos[2];
	struct params params;
	struct limit limit;
	struct check_use use;
	struct population population;
	struct test tests[MOST];
	struct test_result results[MOST];
	struct check_result checks[MOST];
	struct metric_result metrics[MOST];
	struct limit_result limits[MOST];
	struct suite_result suite;
	struct run_result run;
};

/* count results with values `mean` + spread * (-1, +1, ...), each known to +- half. */
static void make(struct fixture *f, size_t count, double mean, double spread, double half)
{
	*f = (struct fixture){.limit = {.min = -HUGE_VAL, .max = 0.120}};
	f->population = (struct population){REPEATS_TOLERANCE_INTERVAL, 0.9, 0.95, count};
	f->params.channel = 0;
	f->use = (struct check_use){
	    .kind = &KIND, .name = "kind", .params = &f->params, .limits = &f->limit, .limit_count = 1};
	for (int i = 0; i < 2; i++) {
		f->infos[i] =
		    (struct channel_info){.name = i ? "other" : "shaft_torque", .unit = unit_one()};
		f->channels[i] = (struct rig_channel){.info = f->infos[i], .place = PLACE_INPUT_REGISTER};
	}
	f->rig = (struct rig){.channels = f->channels, .infos = f->infos, .channel_count = 2};
	for (size_t i = 0; i < count; i++) {
		double value = mean + (i % 2 ? spread : -spread);
		f->tests[i] = (struct test){.name = "T", .population = &f->population, .check_count = 1};
		f->limits[i].limit = &f->limit;
		f->metrics[i].metric = (struct metric){.kind = METRIC,
		                                       .value = value,
		                                       .low = value - half,
		                                       .high = value + half,
		                                       .coverage = 0.95,
		                                       .unit = unit_find("s", 1)};
		f->metrics[i].limits = &f->limits[i];
		f->metrics[i].limit_count = 1;
		f->checks[i] =
		    (struct check_result){.use = &f->use, .metrics = &f->metrics[i], .metric_count = 1};
		f->results[i] =
		    (struct test_result){.test = &f->tests[i], .checks = &f->checks[i], .check_count = 1};
	}
	f->suite = (struct suite_result){.tests = f->results, .test_count = count};
	f->run = (struct run_result){.suites = &f->suite, .suite_count = 1};
	(void)snprintf(f->run.facts.started_utc, sizeof f->run.facts.started_utc,
	               "2026-03-05T10:11:12");
}

static enum verdict judged(struct fixture *f)
{
	for (size_t i = 0; i < f->suite.test_count; i++) {
		struct limit_result *limit = &f->limits[i];
		limit->verdict =
		    decide(&f->metrics[i].metric, limit->limit, limit->reason, sizeof limit->reason);
		f->checks[i].verdict = limit->verdict;
		if (f->results[i].verdict != VERDICT_ERROR && f->results[i].verdict != VERDICT_SKIPPED)
			judge_conclude(&f->results[i]);
	}
	judge_totals(&f->run);
	return f->results[0].verdict;
}

static void assert_reason(const struct fixture *f, const char *part)
{
	if (!strstr(f->results[0].reason, part))
		fail_msg("'%s' is not in the reason: %s", part, f->results[0].reason);
}

/* n 20, 90 % with 95 %: k = 1.9260 one-sided (SciPy nct.ppf), Howe 2.3096 two-sided. */
static void the_limit_decides_where_the_tolerance_interval_ends(void **state)
{
	(void)state;
	struct fixture f;
	double sd = 0.001 * sqrt(20.0 / 19), one = 1.9260 * sd, two = 2.3096 * sd;
	make(&f, 20, 0.120 - one - 0.0005 - 1e-6, 0.001, 0.0005);
	assert_int_equal(judged(&f), VERDICT_PASS);
	assert_reason(&f, "90 % of the population");
	assert_int_equal(f.run.totals.pass, 20);
	make(&f, 20, 0.120 - one - 0.0005 + 1e-6, 0.001, 0.0005);
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	make(&f, 20, 0.120 - two + 1e-6, 0.001, 0);
	assert_int_equal(judged(&f), VERDICT_PASS); /* one side only */
	f.limit.min = 0.05;
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	make(&f, 20, 0.120 - two - 2e-6, 0.001, 0);
	f.limit.min = 0.05;
	assert_int_equal(judged(&f), VERDICT_PASS);
	f.limit.min = 0.120 - 1.9 * two;
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
}

static void simple_acceptance_leaves_the_own_intervals_out(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 20, 0.115, 0.001, 0.004);
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	f.limit.rule = DECISION_SIMPLE;
	assert_int_equal(judged(&f), VERDICT_PASS);
}

static void too_many_surely_outside_fail_the_population(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 20, 0.100, 0.001, 0.0005);
	/* Of 20 with 10 % outside, 5 or more come with 4.3 %, 4 or more with 13.3 % (binomial). */
	for (int bad = 1; bad <= 5; bad++) {
		struct metric *metric = &f.metrics[bad].metric;
		metric->value = metric->low = metric->high = 0.2;
		assert_int_equal(judged(&f), bad < 5 ? VERDICT_INCONCLUSIVE : VERDICT_FAIL);
	}
	assert_reason(&f, "5 of 20 repeats are surely outside");
	assert_int_equal(f.run.exit_code, 1);
}

static void a_missing_or_unknown_repeat_leaves_it_open(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 20, 0.100, 0.001, 0.0005);
	metric_unknown(&f.metrics[7].metric, METRIC, unit_find("s", 1), EVIDENCE_INDEPENDENT, "a gap");
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	assert_reason(&f, "19 of 20");
	make(&f, 20, 0.100, 0.001, 0.0005);
	f.results[7].verdict = VERDICT_ERROR; /* aborted: no check was evaluated */
	f.checks[7].metric_count = 0;
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	assert_int_equal(f.results[7].verdict, VERDICT_ERROR);
	make(&f, 20, 0.100, 0.001, 0.0005);
	f.results[7].verdict = VERDICT_SKIPPED;
	f.checks[7].metric_count = 0;
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	assert_int_equal(f.run.totals.skipped, 1);
}

static void the_worst_case_needs_every_repeat(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 5, 0.100, 0.001, 0.0005);
	f.population.judge = REPEATS_WORST_CASE;
	assert_int_equal(judged(&f), VERDICT_PASS);
	assert_reason(&f, "worst case of 5");
	f.metrics[3].metric.high = 0.13;
	assert_int_equal(judged(&f), VERDICT_INCONCLUSIVE);
	f.metrics[3].metric.low = f.metrics[3].metric.value = 0.125;
	assert_int_equal(judged(&f), VERDICT_FAIL);
	assert_int_equal(f.run.totals.fail, 5);
}

static void days_are_counted_as_the_calendar_does(void **state)
{
	(void)state;
	assert_int_equal(day_of("1970-01-01"), 0);
	assert_int_equal(day_of("2000-03-01T00:00:00"), 11017); /* date -u -d 2000-03-01 +%s / 86400 */
	assert_int_equal(day_of("2026-03-05T10:11:12"), 20517);
	assert_int_equal(day_of(""), 0);
	assert_int_equal(day_of("2026-13-01"), 0);
}

static void an_instrument_past_its_calibration_is_named(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 5, 0.100, 0.001, 0.0005);
	f.run.facts.rig = &f.rig;
	f.infos[0].accuracy.calibrated_until_day = 20517; /* its last day */
	assert_int_equal(judged(&f), VERDICT_PASS);
	assert_null(strstr(f.results[0].reason, "calibration"));
	f.infos[0].accuracy.calibrated_until_day = 20516;
	assert_int_equal(judged(&f), VERDICT_PASS);
	assert_reason(&f, "the calibration of shaft_torque ended 1 days before the run");
	assert_non_null(strstr(f.limits[0].reason, "calibration of shaft_torque"));
	f.infos[0].accuracy.calibration_required = true;
	assert_int_equal(judged(&f), VERDICT_ERROR);
	assert_reason(&f, "requires a valid calibration");
	assert_int_equal(f.run.exit_code, 2);
	f.params.channel = 1; /* another instrument is used */
	for (int i = 0; i < 5; i++)
		f.results[i].verdict = VERDICT_PASS;
	assert_int_equal(judged(&f), VERDICT_PASS);
}

static void a_failure_stays_one_past_the_calibration(void **state)
{
	(void)state;
	struct fixture f;
	make(&f, 5, 0.200, 0.001, 0.0005);
	f.run.facts.rig = &f.rig;
	f.infos[0].accuracy.calibrated_until_day = 1;
	f.infos[0].accuracy.calibration_required = true;
	assert_int_equal(judged(&f), VERDICT_FAIL);
	assert_reason(&f, "calibration of shaft_torque");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_limit_decides_where_the_tolerance_interval_ends),
	    cmocka_unit_test(simple_acceptance_leaves_the_own_intervals_out),
	    cmocka_unit_test(too_many_surely_outside_fail_the_population),
	    cmocka_unit_test(a_missing_or_unknown_repeat_leaves_it_open),
	    cmocka_unit_test(the_worst_case_needs_every_repeat),
	    cmocka_unit_test(days_are_counted_as_the_calendar_does),
	    cmocka_unit_test(an_instrument_past_its_calibration_is_named),
	    cmocka_unit_test(a_failure_stays_one_past_the_calibration),
	};
	return RUN_GROUP(tests);
}
