/* SPDX-License-Identifier: Apache-2.0 */
/*
 * From a recording to verdicts. Only a completed test whose every limit passed
 * is a pass; whatever else happened has its own sentence, which names the
 * cause and not only the consequence. Checks of a test that did not end as
 * written are not evaluated: their numbers would look like measurements of
 * something that was never commanded.
 */
#include "judge.h"

#include <stdio.h>
#include <string.h>

#include "judge_calibration.h"
#include "judge_population.h"
#include "judge_series.h"

struct judging {
	const struct rig *rig;
	const struct suite *suite;
	const struct test *test;
	const struct recorded_test *recorded;
	struct arena *arena;
	struct test_result *result;
	struct err *reterr;
};

static int out_of_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "memory ran out while judging");
}

static void conclude(struct test_result *result, enum verdict verdict, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

static void conclude(struct test_result *result, enum verdict verdict, const char *format, ...)
{
	va_list args;
	result->verdict = verdict;
	va_start(args, format);
	(void)vsnprintf(result->reason, sizeof result->reason, format, args);
	va_end(args);
}

/* A row for every check of the test, none of them evaluated. */
static int prepare_checks(struct judging *j)
{
	struct test_result *result = j->result;
	result->checks = arena_array(j->arena, j->test->check_count + 1, sizeof *result->checks);
	if (!result->checks)
		return out_of_memory(j->reterr);
	result->check_count = j->test->check_count;
	for (size_t i = 0; i < result->check_count; i++) {
		result->checks[i].use = &j->test->checks[i];
		result->checks[i].verdict = VERDICT_SKIPPED;
	}
	return 0;
}

static int judge_limits(struct judging *j, const struct check_use *use, size_t metric,
                        struct check_result *check)
{
	struct metric_result *result = &check->metrics[metric];
	size_t count = 0;
	for (size_t i = 0; i < use->limit_count; i++)
		count += (size_t)use->limits[i].metric == metric;
	result->limits = arena_array(j->arena, count + 1, sizeof *result->limits);
	if (!result->limits)
		return out_of_memory(j->reterr);
	for (size_t i = 0; i < use->limit_count; i++) {
		const struct limit *limit = &use->limits[i];
		if ((size_t)limit->metric != metric)
			continue;
		struct limit_result *judged = &result->limits[result->limit_count++];
		judged->limit = limit;
		judged->verdict = decide(&result->metric, limit, judged->reason, sizeof judged->reason);
		check->verdict = verdict_worse(check->verdict, judged->verdict);
	}
	return 0;
}

/*
 * The shortest interval that was asked for: a check takes the longer of it and
 * of what a channel's rows show, so that a slow group must not excuse gaps in
 * a fast one.
 */
static int64_t shortest_interval(const struct test *test)
{
	int64_t shortest = test->group_count > 0 ? INT64_MAX : 0;
	for (size_t i = 0; i < test->group_count; i++) {
		const struct sample_group *group = &test->groups[i];
		int64_t recorded = group->every_ns * (group->decimate > 1 ? group->decimate : 1);
		if (recorded < shortest)
			shortest = recorded;
	}
	return shortest;
}

/* 0: evaluated; 1: it could not be, which is an error of the test; -1: memory ran out. */
static int evaluate(struct judging *j, const struct check_input *in, const struct check_use *use,
                    struct metric *metrics, size_t *ret_count)
{
	struct err err = {0};
	int rc = use->kind->evaluate(in, use->params, metrics, ret_count, &err);
	if (rc < 0 && err.code == ERR_NOMEM)
		return out_of_memory(j->reterr);
	/* A limit whose metric the check did not give has not been met. */
	for (size_t i = 0; rc == 0 && i < use->limit_count; i++)
		if (use->limits[i].metric < 0 || (size_t)use->limits[i].metric >= *ret_count)
			rc = err_set(&err, ERR_STATE, "it gave no metric number %d", use->limits[i].metric);
	if (rc == 0)
		return 0;
	conclude(j->result, VERDICT_ERROR, "check %s could not be evaluated: %s", use->name,
	         err.message);
	return 1;
}

/* As evaluate(); then every limit is judged. */
static int judge_check(struct judging *j, struct arena *scratch, const struct check_use *use,
                       struct check_result *check)
{
	const struct recorded_test *recorded = j->recorded;
	struct check_input in = {
	    .series = j->result->series,
	    .channels = j->rig->infos,
	    .channel_count = j->rig->channel_count,
	    .marks = recorded->marks,
	    .mark_count = recorded->mark_count,
	    .outcomes = recorded->outcomes,
	    .outcome_count = recorded->outcome_count,
	    .commands = recorded->commands,
	    .command_count = recorded->command_count,
	    .machine = &j->rig->machine,
	    .begin_ns = recorded->begin_ns,
	    .end_ns = recorded->end_ns,
	    .sample_ns = shortest_interval(j->test),
	    .scratch = scratch,
	};
	struct metric metrics[CHECK_METRICS_MOST];
	memset(metrics, 0, sizeof metrics);
	size_t count = 0;
	int rc = evaluate(j, &in, use, metrics, &count);
	if (rc != 0)
		return rc;
	check->metrics = arena_array(j->arena, count + 1, sizeof *check->metrics);
	if (!check->metrics)
		return out_of_memory(j->reterr);
	check->metric_count = count;
	check->verdict = VERDICT_PASS;
	for (size_t i = 0; i < count; i++) {
		check->metrics[i].metric = metrics[i];
		if (judge_limits(j, use, i, check) < 0)
			return -1;
	}
	return 0;
}

/* How near a passed metric lies to its limit: share of the limit that is left. */
static double margin(const struct metric *metric, const struct limit *limit)
{
	if (metric->kind->shape == METRIC_YES_NO)
		return HUGE_VAL;
	double left = fmin(limit->max - metric->high, metric->low - limit->min);
	double size = fmax(isfinite(limit->max) ? fabs(limit->max) : 0,
	                   isfinite(limit->min) ? fabs(limit->min) : 0);
	return size > 0 ? left / size : left;
}

/* One judged limit and where it stands. */
struct judged {
	const struct check_result *check;
	const struct metric_result *metric;
	const struct limit_result *limit;
};

struct tally {
	struct judged worst, nearest;
	size_t total, like_worst;
	double nearest_margin;
};

static void tally_limit(struct tally *tally, struct judged judged)
{
	enum verdict verdict = judged.limit->verdict;
	tally->total++;
	if (!tally->worst.limit || (verdict != tally->worst.limit->verdict &&
	                            verdict_worse(verdict, tally->worst.limit->verdict) == verdict)) {
		tally->worst = judged;
		tally->like_worst = 0;
	}
	tally->like_worst += verdict == tally->worst.limit->verdict;
	double left = margin(&judged.metric->metric, judged.limit->limit);
	if (!tally->nearest.limit || left < tally->nearest_margin) {
		tally->nearest = judged;
		tally->nearest_margin = left;
	}
}

/* The reason of a limit, with its check where there are several, and who says so. */
static void reason_of(const struct test_result *result, const struct judged *judged, char *buffer,
                      size_t size)
{
	bool several = result->check_count > 1;
	(void)snprintf(buffer, size, "%s%s%s (%s)", several ? judged->check->use->name : "",
	               several ? ": " : "", judged->limit->reason,
	               judged->metric->metric.evidence == EVIDENCE_SELF_REPORTED
	                   ? "self-reported by the device under test"
	                   : "independent evidence");
}

/* The verdict over all limits, with the first reason of the worst sort. */
void judge_conclude(struct test_result *result)
{
	struct tally tally = {0};
	char reason[700];
	for (size_t c = 0; c < result->check_count; c++)
		for (size_t m = 0; m < result->checks[c].metric_count; m++) {
			const struct metric_result *metric = &result->checks[c].metrics[m];
			for (size_t l = 0; l < metric->limit_count; l++)
				tally_limit(&tally,
				            (struct judged){&result->checks[c], metric, &metric->limits[l]});
		}
	if (!tally.worst.limit) {
		conclude(result, VERDICT_ERROR, "the test has no limit, so nothing was judged");
		return;
	}
	enum verdict verdict = tally.worst.limit->verdict;
	bool passed = verdict == VERDICT_PASS;
	reason_of(result, passed ? &tally.nearest : &tally.worst, reason, sizeof reason);
	if (passed && tally.total > 1)
		conclude(result, verdict, "all %zu limits are met; the nearest: %s", tally.total, reason);
	else if (tally.like_worst > 1)
		conclude(result, verdict, "%s; and %zu more of %zu limits %s", reason, tally.like_worst - 1,
		         tally.total, verdict == VERDICT_FAIL ? "failed" : "are open");
	else
		conclude(result, verdict, "%s", reason);
}

static int judge_completed(struct judging *j)
{
	struct test_result *result = j->result;
	struct arena scratch;
	arena_init(&scratch, 0);
	int rc = 0;
	for (size_t i = 0; i < result->check_count && rc == 0; i++) {
		rc = judge_check(j, &scratch, &j->test->checks[i], &result->checks[i]);
		arena_clear(&scratch);
	}
	arena_release(&scratch);
	if (rc == 0)
		judge_conclude(result);
	return rc < 0 ? -1 : 0;
}

/* The test that ran before this one, or NULL. */
static const struct test *test_before(const struct suite *suite, const struct test *test)
{
	const struct test *before = NULL;
	for (size_t i = 0; i < suite->test_count; i++) {
		if (&suite->tests[i] == test)
			return before;
		if (suite->tests[i].selected)
			before = &suite->tests[i];
	}
	return NULL;
}

static void place_text(const struct recorded_test *recorded, char *buffer, size_t size)
{
	buffer[0] = '\0';
	if (recorded->step_at.file && recorded->step_at.line > 0)
		(void)snprintf(buffer, size, " (%s:%d)", recorded->step_at.file->path,
		               recorded->step_at.line);
}

static void conclude_await(struct judging *j)
{
	const struct recorded_test *recorded = j->recorded;
	char place[300];
	place_text(recorded, place, sizeof place);
	int channel = recorded->condition.channel;
	if (channel < 0 || (size_t)channel >= j->rig->channel_count) {
		conclude(j->result, VERDICT_ERROR, "an await expired%s: %s", place, recorded->reason);
		return;
	}
	struct await_finding finding;
	judge_await(j->rig, &j->result->series[channel], &recorded->condition,
	            recorded->condition_begin_ns, recorded->condition_end_ns, &finding);
	conclude(j->result, finding.proven ? VERDICT_FAIL : VERDICT_ERROR, "%s%s", finding.reason,
	         place);
}

static void conclude_precondition(struct judging *j)
{
	const struct recorded_test *recorded = j->recorded;
	char what[256] = "a condition of `before`";
	int channel = recorded->condition.channel;
	if (channel >= 0 && (size_t)channel < j->rig->channel_count)
		(void)condition_text(&recorded->condition, j->rig, what, sizeof what);
	const struct test *before = test_before(j->suite, j->test);
	const char *colon = recorded->reason[0] ? ": " : "";
	if (before)
		conclude(j->result, VERDICT_ERROR,
		         "'%s' did not hold before the test%s%s; %s ran before it and may have left the "
		         "bench so",
		         what, colon, recorded->reason, before->name);
	else
		conclude(j->result, VERDICT_ERROR,
		         "'%s' did not hold before the test, the first of the run%s%s", what, colon,
		         recorded->reason);
}

static int judge_end(struct judging *j)
{
	const struct recorded_test *recorded = j->recorded;
	const char *reason = recorded->reason[0] ? recorded->reason : "no reason was recorded";
	char place[300];
	place_text(recorded, place, sizeof place);
	switch (recorded->end) {
	case TEST_COMPLETED:
		return judge_completed(j);
	case TEST_AWAIT_EXPIRED:
		conclude_await(j);
		return 0;
	case TEST_PRECONDITION:
		conclude_precondition(j);
		return 0;
	case TEST_ABORTED:
		conclude(j->result, VERDICT_ERROR, "aborted%s: %s", place, reason);
		return 0;
	case TEST_NOT_STARTED:
		break;
	}
	conclude(j->result, VERDICT_ERROR, "not started: %s", reason);
	return 0;
}

int judge_test(const struct rig *rig, const struct suite *suite, const struct test *test,
               const struct recorded_test *recorded, struct arena *arena,
               struct test_result *ret_result, struct err *reterr)
{
	*ret_result = (struct test_result){.test = test, .recorded = recorded};
	struct judging j = {rig, suite, test, recorded, arena, ret_result, reterr};
	if (prepare_checks(&j) < 0)
		return -1;
	if (!recorded && !test->selected) {
		conclude(ret_result, VERDICT_SKIPPED, "not selected");
		return 0;
	}
	if (!recorded) {
		conclude(ret_result, VERDICT_ERROR, "not reached: the run ended before it");
		return 0;
	}
	if (judge_series(rig, recorded, arena, &ret_result->series, reterr) < 0)
		return -1;
	return judge_end(&j);
}

static void count_verdict(struct run_totals *totals, enum verdict verdict)
{
	totals->tests++;
	switch (verdict) {
	case VERDICT_PASS:
		totals->pass++;
		return;
	case VERDICT_FAIL:
		totals->fail++;
		return;
	case VERDICT_INCONCLUSIVE:
		totals->inconclusive++;
		return;
	case VERDICT_SKIPPED:
		totals->skipped++;
		return;
	case VERDICT_ERROR:
		break;
	}
	totals->error++;
}

void judge_totals(struct run_result *run)
{
	run->totals = (struct run_totals){0};
	for (size_t s = 0; s < run->suite_count; s++) {
		struct suite_result *suite = &run->suites[s];
		suite->totals = (struct run_totals){0};
		judge_populations(suite);
		if (run->facts.rig && day_of(run->facts.started_utc) > 0)
			judge_calibrations(run->facts.rig, day_of(run->facts.started_utc), suite);
		for (size_t t = 0; t < suite->test_count; t++) {
			count_verdict(&suite->totals, suite->tests[t].verdict);
			count_verdict(&run->totals, suite->tests[t].verdict);
		}
	}
	const struct run_totals *totals = &run->totals;
	if (run->facts.rest_was_needed && !run->facts.rest_confirmed)
		run->exit_code = 4;
	else if (run->facts.aborted)
		run->exit_code = 3;
	else if (totals->fail > 0)
		run->exit_code = 1;
	else if (totals->inconclusive > 0 || totals->error > 0 || totals->pass == 0)
		run->exit_code = 2; /* a run that judged nothing has shown nothing */
	else
		run->exit_code = 0;
}
