/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The decision rule, in one function, so that reports, checks and plan cannot
 * differ in it. Comparisons are inclusive: a value on the limit conforms, as
 * limits are written "at most" and "at least".
 */
#include "decision.h"

#include <stdio.h>

enum { NUMBER_SIZE = 64 };

/* A number in the unit that the user wrote. */
static const char *shown(double value, const struct metric *metric, const struct limit *limit,
                         char *buffer)
{
	const struct unit *unit = limit->shown_unit ? limit->shown_unit : metric->unit;
	double scaled = value * metric->unit->scale / unit->scale;
	const char *name = unit == unit_one() ? "" : unit->name;
	const char *space = *name ? " " : "";
	if (isnan(value))
		(void)snprintf(buffer, NUMBER_SIZE, "unknown");
	else if (isinf(value))
		(void)snprintf(buffer, NUMBER_SIZE, value > 0 ? "no end seen" : "no begin seen");
	else
		(void)snprintf(buffer, NUMBER_SIZE, "%.4g%s%s", scaled, space, name);
	return buffer;
}

static const char *yes_no(double value)
{
	return value > 0.5 ? "yes" : "no";
}

static enum verdict by_interval(double low, double high, const struct limit *limit)
{
	if (isnan(low) || isnan(high) || low > high)
		return VERDICT_INCONCLUSIVE;
	if (low >= limit->min && high <= limit->max)
		return VERDICT_PASS;
	if (low > limit->max || high < limit->min)
		return VERDICT_FAIL;
	return VERDICT_INCONCLUSIVE;
}

static bool unknown(const struct metric *metric)
{
	if (metric->kind->shape == METRIC_YES_NO)
		return !(metric->low == metric->high);
	return isnan(metric->low) || isnan(metric->high) || (isinf(metric->low) && isinf(metric->high));
}

/* "between A and B", "at most B", "at least A". */
static void limit_text(const struct metric *metric, const struct limit *limit, char *buffer,
                       size_t size)
{
	char a[NUMBER_SIZE], b[NUMBER_SIZE];
	shown(limit->min, metric, limit, a);
	shown(limit->max, metric, limit, b);
	if (isinf(limit->min) && isinf(limit->max))
		(void)snprintf(buffer, size, "no limit");
	else if (isinf(limit->min))
		(void)snprintf(buffer, size, "at most %s", b);
	else if (isinf(limit->max))
		(void)snprintf(buffer, size, "at least %s", a);
	else
		(void)snprintf(buffer, size, "between %s and %s", a, b);
}

static void reason_yes_no(const struct metric *metric, const struct limit *limit,
                          enum verdict verdict, char *reason, size_t size)
{
	const char *name = metric->kind->name, *note = metric->note;
	const char *colon = note[0] ? ": " : "";
	if (verdict == VERDICT_INCONCLUSIVE)
		(void)snprintf(reason, size, "%s is not known%s%s", name, colon, note);
	else if (verdict == VERDICT_FAIL)
		(void)snprintf(reason, size, "%s is %s, required is %s%s%s", name, yes_no(metric->value),
		               yes_no(limit->max), colon, note);
	else
		(void)snprintf(reason, size, "%s is %s, as required%s%s", name, yes_no(metric->value),
		               colon, note);
}

static void reason_number(const struct metric *metric, const struct limit *limit,
                          enum verdict verdict, char *reason, size_t size)
{
	static const char *const joint[] = {
	    [VERDICT_PASS] = "inside",
	    [VERDICT_FAIL] = "outside",
	    [VERDICT_INCONCLUSIVE] = "across",
	};
	char value[NUMBER_SIZE], low[NUMBER_SIZE], high[NUMBER_SIZE], bounds[160];
	shown(metric->value, metric, limit, value);
	shown(metric->low, metric, limit, low);
	shown(metric->high, metric, limit, high);
	limit_text(metric, limit, bounds, sizeof bounds);
	const char *colon = metric->note[0] ? "; " : "";
	if (limit->rule == DECISION_SIMPLE)
		(void)snprintf(reason, size, "%s %s (%s to %s), by the value alone %s the limit (%s)%s%s",
		               metric->kind->name, value, low, high, joint[verdict], bounds, colon,
		               metric->note);
	else
		(void)snprintf(reason, size, "%s %s: its interval %s to %s lies %s the limit (%s)%s%s",
		               metric->kind->name, value, low, high, joint[verdict], bounds, colon,
		               metric->note);
}

enum verdict decide(const struct metric *metric, const struct limit *limit, char *reason,
                    size_t size)
{
	enum verdict verdict;
	if (unknown(metric))
		verdict = VERDICT_INCONCLUSIVE;
	else if (limit->rule == DECISION_SIMPLE)
		verdict = by_interval(metric->value, metric->value, limit);
	else
		verdict = by_interval(metric->low, metric->high, limit);

	if (metric->kind->shape == METRIC_YES_NO)
		reason_yes_no(metric, limit, verdict, reason, size);
	else if (unknown(metric))
		(void)snprintf(reason, size, "%s is not known: %s", metric->kind->name,
		               metric->note[0] ? metric->note : "no reason was given");
	else
		reason_number(metric, limit, verdict, reason, size);
	return verdict;
}

const char *verdict_name(enum verdict verdict)
{
	static const char *const names[] = {
	    [VERDICT_PASS] = "pass",
	    [VERDICT_FAIL] = "fail",
	    [VERDICT_INCONCLUSIVE] = "inconclusive",
	    [VERDICT_ERROR] = "error",
	    [VERDICT_SKIPPED] = "skipped",
	};
	return names[verdict];
}

enum verdict verdict_worse(enum verdict a, enum verdict b)
{
	static const int rank[] = {
	    [VERDICT_SKIPPED] = 0, [VERDICT_PASS] = 1, [VERDICT_INCONCLUSIVE] = 2,
	    [VERDICT_ERROR] = 3,   [VERDICT_FAIL] = 4,
	};
	return rank[a] >= rank[b] ? a : b;
}
