/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Numbers in words. A value gets two digits of its uncertainty (JCGM 100:2008,
 * 7.2.6, asks for at most two): more would claim what was not measured.
 * A limit is shown as somebody wrote it, in the unit in which he wrote it, and
 * the value beside it in the same unit, so that nobody has to convert.
 */
#include "report_text.h"

#include <math.h>
#include <string.h>

#include "journal.h"

/* Printing "-0.0" would make people look for a sign that is not there. */
static const char *without_minus_zero(char *buffer)
{
	if (buffer[0] == '-' && strspn(buffer + 1, "0.") == strlen(buffer + 1))
		memmove(buffer, buffer + 1, strlen(buffer));
	return buffer;
}

const char *plain_text(double value, char *buffer, size_t size)
{
	(void)snprintf(buffer, size, "%.10g", value);
	return without_minus_zero(buffer);
}

const char *number_text(double value, double uncertainty, char *buffer, size_t size)
{
	if (isnan(value)) {
		(void)snprintf(buffer, size, "unknown");
		return buffer;
	}
	if (!isfinite(value)) {
		(void)snprintf(buffer, size, value > 0 ? "unbounded" : "-unbounded");
		return buffer;
	}
	if (!isfinite(uncertainty) || uncertainty <= 0 || fabs(value) >= 1e15) {
		(void)snprintf(buffer, size, "%.6g", value);
		return without_minus_zero(buffer);
	}
	double decimals = 1 - floor(log10(uncertainty));
	decimals = fmin(fmax(decimals, 0), 12);
	(void)snprintf(buffer, size, "%.*f", (int)decimals, value);
	return without_minus_zero(buffer);
}

struct shown_unit metric_shown(const struct metric *metric, const struct limit *limit)
{
	const struct unit *unit = metric->unit;
	if (!unit || unit == unit_one() || metric->kind->shape == METRIC_YES_NO)
		return (struct shown_unit){"", 1};
	if (limit && limit->shown_unit &&
	    dimension_agrees(limit->shown_unit->dimension, unit->dimension))
		return (struct shown_unit){limit->shown_unit->name, unit->scale / limit->shown_unit->scale};
	if (metric->kind->shape == METRIC_TIME && unit->scale == 1) {
		double size = fabs(metric->value);
		if (isfinite(metric->high))
			size = fmax(isnan(size) ? 0 : size, fabs(metric->high));
		if (size < 1e-3)
			return (struct shown_unit){"us", 1e6};
		if (size < 1)
			return (struct shown_unit){"ms", 1e3};
	}
	return (struct shown_unit){unit->name, 1};
}

double metric_uncertainty(const struct metric *metric)
{
	return fmax(metric->high - metric->value, metric->value - metric->low);
}

const char *value_text(const struct metric *metric, struct shown_unit shown, char *buffer,
                       size_t size)
{
	if (metric->kind->shape == METRIC_YES_NO)
		(void)snprintf(buffer, size, "%s",
		               isnan(metric->value) ? "unknown"
		               : metric->value != 0 ? "yes"
		                                    : "no");
	else
		(void)number_text(metric->value * shown.factor, metric_uncertainty(metric) * shown.factor,
		                  buffer, size);
	return buffer;
}

const char *interval_text(const struct metric *metric, struct shown_unit shown, char *buffer,
                          size_t size)
{
	char low[40], high[40];
	double width = (metric->high - metric->low) / 2 * shown.factor;
	if (!isfinite(width))
		width = fabs(metric->value) * 1e-4 * shown.factor;
	(void)number_text(metric->low * shown.factor, width, low, sizeof low);
	(void)number_text(metric->high * shown.factor, width, high, sizeof high);
	buffer[0] = '\0';
	if (metric->kind->shape == METRIC_YES_NO || metric->low == metric->high)
		return buffer;
	if (isfinite(metric->low) && isfinite(metric->high))
		(void)snprintf(buffer, size, "%s to %s", low, high);
	else if (isfinite(metric->low))
		(void)snprintf(buffer, size, "at least %s", low);
	else if (isfinite(metric->high))
		(void)snprintf(buffer, size, "at most %s", high);
	else
		(void)snprintf(buffer, size, "nothing is known");
	return buffer;
}

const char *limit_text(const struct metric *metric, const struct limit *limit,
                       struct shown_unit shown, char *buffer, size_t size)
{
	char least[40], most[40];
	bool has_min = isfinite(limit->min), has_max = isfinite(limit->max);
	(void)plain_text(limit->min * shown.factor, least, sizeof least);
	(void)plain_text(limit->max * shown.factor, most, sizeof most);
	if (metric->kind->shape == METRIC_YES_NO)
		(void)snprintf(buffer, size, "is %s",
		               has_min && has_max && limit->min == limit->max
		                   ? (limit->min != 0 ? "yes" : "no")
		               : has_min && limit->min > 0 ? "yes"
		                                           : "no");
	else if (has_min && has_max && limit->min == limit->max)
		(void)snprintf(buffer, size, "exactly %s", least);
	else if (has_min && has_max)
		(void)snprintf(buffer, size, "%s to %s", least, most);
	else if (has_max)
		(void)snprintf(buffer, size, "at most %s", most);
	else if (has_min)
		(void)snprintf(buffer, size, "at least %s", least);
	else
		(void)snprintf(buffer, size, "none");
	return buffer;
}

const char *metric_text(const struct metric *metric, const struct limit *limit, char *buffer,
                        size_t size)
{
	struct shown_unit shown = metric_shown(metric, limit);
	const char *blank = shown.name[0] ? " " : "";
	char value[48], interval[96], bounds[96];
	(void)value_text(metric, shown, value, sizeof value);
	(void)interval_text(metric, shown, interval, sizeof interval);
	bool known = isfinite(metric->value) && metric->kind->shape != METRIC_YES_NO;
	int used = snprintf(buffer, size, "%s %s%s%s", metric->kind->name, value, known ? blank : "",
	                    known ? shown.name : "");
	if (interval[0] && used > 0 && (size_t)used < size)
		used += snprintf(buffer + used, size - (size_t)used, " (%s)", interval);
	if (limit && used > 0 && (size_t)used < size)
		(void)snprintf(buffer + used, size - (size_t)used, ", limit %s%s%s",
		               limit_text(metric, limit, shown, bounds, sizeof bounds), blank, shown.name);
	return buffer;
}

const char *evidence_name(enum evidence evidence)
{
	return evidence == EVIDENCE_INDEPENDENT ? "independent" : "self-reported";
}

const char *test_end_name(enum test_end end)
{
	return journal_status_name(JOURNAL_TEST_END, (int)end);
}

double margin_percent(double value, double min, double max)
{
	bool has_min = isfinite(min), has_max = isfinite(max);
	double least =
	    fmin(has_min ? value - min : (double)INFINITY, has_max ? max - value : (double)INFINITY);
	double size = has_min && has_max ? (max - min) / 2 : fabs(has_max ? max : min);
	if (!isfinite(value) || !isfinite(least))
		return (double)NAN;
	return 100 * least / (size > 0 && isfinite(size) ? size : 1);
}

double test_margin(const struct test_result *test, const struct metric_result **ret_metric)
{
	double least = (double)NAN;
	*ret_metric = NULL;
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t m = 0; m < test->checks[c].metric_count; m++) {
			const struct metric_result *metric = &test->checks[c].metrics[m];
			for (size_t l = 0; l < metric->limit_count; l++) {
				const struct limit *limit = metric->limits[l].limit;
				double margin = margin_percent(metric->metric.value, limit->min, limit->max);
				if (metric->metric.kind->shape == METRIC_YES_NO || isnan(margin) ||
				    (*ret_metric && margin >= least))
					continue;
				least = margin;
				*ret_metric = metric;
			}
		}
	return least;
}

int use_channel(const struct check_use *use)
{
	const struct field_table *table = use->kind->fields;
	int found = -1;
	for (size_t i = 0; use->params && table && i < table->count; i++) {
		const struct field *field = &table->fields[i];
		int channel;
		if (field->kind != FIELD_CHANNEL)
			continue;
		memcpy(&channel, (const char *)use->params + field->offset, sizeof channel);
		if (channel >= 0 && strcmp(field->key, "channel") == 0)
			return channel;
		if (channel >= 0 && found < 0)
			found = channel;
	}
	return found;
}

size_t run_selected(const struct run_result *run, size_t *ret_all)
{
	size_t selected = 0, all = 0;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct test *test = run->suites[s].tests[t].test;
			all += !test->bench;
			selected += !test->bench && test->selected;
		}
	*ret_all = all;
	return selected;
}

bool run_overridden(const struct run_result *run)
{
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t v = 0; v < run->suites[s].suite->value_count; v++)
			if (run->suites[s].suite->values[v].overridden)
				return true;
	return false;
}

enum verdict run_verdict(const struct run_result *run)
{
	const struct run_totals *totals = &run->totals;
	if (totals->fail)
		return VERDICT_FAIL;
	if (totals->error || (run->facts.rest_was_needed && !run->facts.rest_confirmed) ||
	    run->facts.aborted)
		return VERDICT_ERROR;
	if (totals->inconclusive)
		return VERDICT_INCONCLUSIVE;
	return totals->pass ? VERDICT_PASS : VERDICT_SKIPPED;
}

const char *error_sort(const struct test_result *test)
{
	if (!test->recorded)
		return "not-reached";
	switch (test->recorded->end) {
	case TEST_ABORTED:
		return "aborted";
	case TEST_PRECONDITION:
		return "precondition";
	case TEST_AWAIT_EXPIRED:
		return "await-expired";
	case TEST_NOT_STARTED:
		return "not-started";
	case TEST_COMPLETED:
		break;
	}
	return "error";
}

const char *suite_label(const struct run_result *run, size_t suite, char *buffer, size_t size)
{
	const char *name = run->suites[suite].suite->name;
	size_t same = 1;
	for (size_t i = 0; i < suite; i++)
		if (strcmp(run->suites[i].suite->name, name) == 0)
			same++;
	if (same > 1)
		(void)snprintf(buffer, size, "%s#%zu", name, same);
	else
		(void)snprintf(buffer, size, "%s", name);
	return buffer;
}

double test_seconds(const struct test_result *test)
{
	if (!test->recorded || test->recorded->end_ns <= test->recorded->begin_ns)
		return 0;
	return (double)(test->recorded->end_ns - test->recorded->begin_ns) / (double)NS_PER_S;
}
