/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Repeats judged as a population. What is stated then is not that each repeat
 * met its limit, but that all that the drive will ever do does: every case
 * carries the verdict of the whole.
 *
 * Tolerance interval: passed where mean -+ k s of the values, widened by the
 * half-widths of their own intervals, lies inside the limits. Failed where so
 * many repeats are surely outside that a population of which `coverage`
 * conforms would show as many with a probability below 1 - confidence: that
 * needs no distribution. Else inconclusive. Taking the interval's outside as a
 * failure was rejected: a few repeats with a large k would fail a good drive.
 * Worst case: every repeat must pass.
 *
 * A repeat whose metric is not known, or that did not take place, leaves the
 * whole open: the missing one might be the one that matters.
 */
#include "judge_population.h"

#include <stdio.h>

#include "tolerance.h"

struct gathered {
	size_t count, unknown, failed, passed;
	double sum, squares, mean, sd;
	double below, above; /* largest half-widths of the members' intervals */
	double least, largest;
	const struct limit *limit;
	const struct metric *metric;
};

/* The limit of a member in the place that its check, metric and number name; or NULL. */
static struct limit_result *limit_at(struct test_result *member, size_t check, size_t metric,
                                     size_t number)
{
	if (check >= member->check_count || metric >= member->checks[check].metric_count ||
	    number >= member->checks[check].metrics[metric].limit_count)
		return NULL;
	return &member->checks[check].metrics[metric].limits[number];
}

static void gather(struct test_result *members, size_t count, size_t check, size_t metric,
                   size_t number, struct gathered *ret)
{
	*ret = (struct gathered){.least = HUGE_VAL, .largest = -HUGE_VAL};
	for (size_t i = 0; i < count; i++) {
		const struct limit_result *limit = limit_at(&members[i], check, metric, number);
		const struct metric *one = limit ? &members[i].checks[check].metrics[metric].metric : NULL;
		if (!one || !isfinite(one->value) || !isfinite(one->low) || !isfinite(one->high)) {
			ret->unknown++;
			/* Surely outside all the same, as one that never settled. */
			ret->failed += limit && limit->verdict == VERDICT_FAIL;
			continue;
		}
		ret->limit = limit->limit;
		ret->metric = one;
		ret->count++;
		ret->sum += one->value;
		ret->failed += limit->verdict == VERDICT_FAIL;
		ret->passed += limit->verdict == VERDICT_PASS;
		ret->below = fmax(ret->below, one->value - one->low);
		ret->above = fmax(ret->above, one->high - one->value);
		ret->least = fmin(ret->least, one->value);
		ret->largest = fmax(ret->largest, one->value);
	}
	ret->mean = ret->count ? ret->sum / (double)ret->count : (double)NAN;
	for (size_t i = 0; i < count; i++) {
		const struct limit_result *limit = limit_at(&members[i], check, metric, number);
		double value = limit ? members[i].checks[check].metrics[metric].metric.value : (double)NAN;
		if (isfinite(value))
			ret->squares += (value - ret->mean) * (value - ret->mean);
	}
	ret->sd = ret->count > 1 ? sqrt(ret->squares / (double)(ret->count - 1)) : (double)NAN;
}

static enum verdict worst_case(const struct gathered *all, size_t times, char *reason, size_t size)
{
	enum verdict verdict = all->failed            ? VERDICT_FAIL
	                       : all->passed == times ? VERDICT_PASS
	                                              : VERDICT_INCONCLUSIVE;
	(void)snprintf(reason, size,
	               "worst case of %zu repeats: %zu pass, %zu fail, %zu are open; values from %.4g "
	               "to %.4g %s",
	               times, all->passed, all->failed, times - all->passed - all->failed, all->least,
	               all->largest, all->metric ? all->metric->unit->name : "");
	return verdict;
}

static enum verdict tolerance_interval(const struct gathered *all,
                                       const struct population *population, char *reason,
                                       size_t size)
{
	size_t times = population->times;
	double share = 100 * population->coverage, sure = 100 * population->confidence;
	if (all->failed > 0 && binomial_at_least(times, all->failed, 1 - population->coverage) <
	                           1 - population->confidence) {
		(void)snprintf(reason, size,
		               "%zu of %zu repeats are surely outside: less than %.4g %% of the population "
		               "conform, with %.4g %% confidence",
		               all->failed, times, share, sure);
		return VERDICT_FAIL;
	}
	if (all->count < times || all->count < POPULATION_LEAST) {
		(void)snprintf(reason, size, "%zu of %zu repeats were measured: all are needed", all->count,
		               times);
		return VERDICT_INCONCLUSIVE;
	}
	const struct limit *limit = all->limit;
	bool lower = isfinite(limit->min), upper = isfinite(limit->max);
	double k =
	    lower && upper
	        ? tolerance_factor_two_sided(all->count, population->coverage, population->confidence)
	        : tolerance_factor_one_sided(all->count, population->coverage, population->confidence);
	bool simple = limit->rule == DECISION_SIMPLE;
	double low = all->mean - k * all->sd - (simple ? 0 : all->below);
	double high = all->mean + k * all->sd + (simple ? 0 : all->above);
	bool inside = low >= limit->min && high <= limit->max;
	const struct unit *unit = limit->shown_unit ? limit->shown_unit : all->metric->unit;
	double scale = all->metric->unit->scale / unit->scale;
	char bounds[120];
	if (lower && upper)
		(void)snprintf(bounds, sizeof bounds, "between %.4g and %.4g %s", low * scale, high * scale,
		               unit->name);
	else
		(void)snprintf(bounds, sizeof bounds, "%s %.4g %s", upper ? "below" : "above",
		               (upper ? high : low) * scale, unit->name);
	(void)snprintf(reason, size,
	               "%s of %zu repeats: %.4g %% of the population lie %s with %.4g %% confidence "
	               "(mean %.4g, s %.3g, k %.4g), %s the limit",
	               all->metric->kind->name, all->count, share, bounds, sure, all->mean * scale,
	               all->sd * scale, k, inside ? "inside" : "not surely inside");
	return inside ? VERDICT_PASS : VERDICT_INCONCLUSIVE;
}

/* A yes or no has no spread: the worst case. */
static enum verdict decide_population(const struct gathered *all,
                                      const struct population *population, char *reason,
                                      size_t size)
{
	bool question = all->metric && all->metric->kind->shape == METRIC_YES_NO;
	if (population->judge == REPEATS_WORST_CASE || question)
		return worst_case(all, population->times, reason, size);
	return tolerance_interval(all, population, reason, size);
}

static void judge_one_limit(struct test_result *members, size_t count, size_t check, size_t metric,
                            size_t number)
{
	const struct population *population = members[0].test->population;
	struct gathered all;
	char reason[sizeof members[0].checks[0].metrics[0].limits[0].reason];
	gather(members, count, check, metric, number, &all);
	enum verdict verdict = decide_population(&all, population, reason, sizeof reason);
	for (size_t i = 0; i < count; i++) {
		struct limit_result *limit = limit_at(&members[i], check, metric, number);
		if (!limit)
			continue;
		limit->verdict = verdict;
		(void)snprintf(limit->reason, sizeof limit->reason, "%s", reason);
	}
}

/* The member that has most to say of what was measured: one that was evaluated. */
static const struct test_result *evaluated(const struct test_result *members, size_t count)
{
	for (size_t i = 0; i < count; i++)
		if (members[i].check_count > 0 && members[i].checks[0].metric_count > 0)
			return &members[i];
	return NULL;
}

static void judge_group(struct test_result *members, size_t count)
{
	const struct test_result *model = evaluated(members, count);
	if (!model)
		return;
	for (size_t c = 0; c < model->check_count; c++)
		for (size_t m = 0; m < model->checks[c].metric_count; m++)
			for (size_t n = 0; n < model->checks[c].metrics[m].limit_count; n++)
				judge_one_limit(members, count, c, m, n);
	for (size_t i = 0; i < count; i++) {
		struct test_result *member = &members[i];
		if (member->verdict == VERDICT_SKIPPED || member->check_count == 0 ||
		    member->checks[0].metric_count == 0)
			continue; /* an error or a skipped one stays what it is */
		for (size_t c = 0; c < member->check_count; c++) {
			struct check_result *check = &member->checks[c];
			check->verdict = VERDICT_PASS;
			for (size_t m = 0; m < check->metric_count; m++)
				for (size_t n = 0; n < check->metrics[m].limit_count; n++)
					check->verdict =
					    verdict_worse(check->verdict, check->metrics[m].limits[n].verdict);
		}
		if (member->verdict != VERDICT_ERROR)
			judge_conclude(member);
	}
}

void judge_populations(struct suite_result *suite)
{
	for (size_t first = 0; first < suite->test_count;) {
		const struct population *population =
		    suite->tests[first].test ? suite->tests[first].test->population : NULL;
		size_t end = first + 1;
		while (population && end < suite->test_count && suite->tests[end].test &&
		       suite->tests[end].test->population == population)
			end++;
		if (population)
			judge_group(&suite->tests[first], end - first);
		first = end;
	}
}
