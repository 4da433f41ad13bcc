/* SPDX-License-Identifier: Apache-2.0 */
/* The part of report.html that is about tests: those that did not pass, all, and each. */
#include <math.h>
#include <string.h>

#include "chart.h"
#include "report_html.h"

/* Above the first a passed test gets its numbers without a plot, above the second a line. */
enum { BYTES_PLOTS = 7000000, BYTES_SECTIONS = 8500000, STEP_DEPTH = 8, ROWS_MOST = 500 };

void html_verdict(struct xml_out *out, const char *element, enum verdict verdict)
{
	xml_open(out, element);
	xml_attrf(out, "class", "verdict %s", verdict_name(verdict));
	xml_text(out, verdict_name(verdict));
	xml_close(out);
}

void html_name(struct xml_out *out, const char *name)
{
	enum { NAME_MOST = 400 };
	if (strlen(name) > NAME_MOST) {
		xml_text(out, name);
		return;
	}
	while (*name) {
		size_t length = strcspn(name, "[,");
		bool more = name[length] != '\0';
		xml_textf(out, "%.*s", (int)(length + more), name);
		if (more && name[length + 1]) {
			xml_open(out, "wbr");
			xml_close_void(out);
		}
		name += length + more;
	}
}

void html_test_link(struct xml_out *out, size_t suite, size_t test, const char *name)
{
	xml_open(out, "a");
	xml_attrf(out, "href", "#t%zu-%zu", suite, test);
	html_name(out, name);
	xml_close(out);
}

static bool is_failure(const struct test_result *test)
{
	return test->verdict != VERDICT_PASS && test->verdict != VERDICT_SKIPPED;
}

static void limits_not_met(struct xml_out *out, const struct test_result *test)
{
	bool begun = false;
	char text[512];
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t m = 0; m < test->checks[c].metric_count; m++) {
			const struct metric_result *metric = &test->checks[c].metrics[m];
			for (size_t l = 0; l < metric->limit_count; l++) {
				if (metric->limits[l].verdict == VERDICT_PASS)
					continue;
				if (!begun)
					xml_open(out, "ul");
				begun = true;
				xml_open(out, "li");
				html_verdict(out, "span", metric->limits[l].verdict);
				xml_textf(out, " %s (%s)",
				          metric_text(&metric->metric, metric->limits[l].limit, text, sizeof text),
				          evidence_name(metric->metric.evidence));
				xml_close(out);
			}
		}
	if (begun)
		xml_close(out);
}

/* Whether the picture of a check stands with the failures; `failure` counts them from 0. */
static bool plot_with_failure(const struct run_result *run, const struct test_result *test,
                              size_t check, size_t failure)
{
	return failure < FAILURE_PLOTS_MOST && test->checks[check].verdict != VERDICT_PASS &&
	       chart_possible(run->facts.rig, test, &test->checks[check]);
}

static void failure(struct xml_out *out, const struct run_result *run, size_t s, size_t t,
                    size_t number, int columns)
{
	const struct test_result *test = &run->suites[s].tests[t];
	char id[96];
	xml_open(out, "article");
	xml_attr(out, "class", verdict_name(test->verdict));
	xml_attrf(out, "id", "f%zu-%zu", s, t);
	xml_open(out, "h3");
	html_test_link(out, s, t, test->test->name);
	xml_textf(out, " %s ", test->test->title ? test->test->title : "");
	html_verdict(out, "span", test->verdict);
	xml_close(out);
	xml_element(out, "p", NULL, test->reason);
	limits_not_met(out, test);
	for (size_t c = 0; c < test->check_count; c++)
		if (plot_with_failure(run, test, c, number)) {
			(void)snprintf(id, sizeof id, "t%zu-%zu-c%zu", s, t, c);
			chart_write(out, run->facts.rig, test, &test->checks[c], id, columns);
		}
	xml_close(out);
}

void html_failures(struct xml_out *out, const struct run_result *run, int chart_columns)
{
	size_t count = 0;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			if (!is_failure(&run->suites[s].tests[t]))
				continue;
			if (count == 0) {
				xml_open(out, "section");
				xml_element(out, "h2", NULL, "What did not pass");
			}
			failure(out, run, s, t, count++, chart_columns);
		}
	if (count)
		xml_close(out);
}

static void requirements(struct xml_out *out, const struct test *test)
{
	for (size_t i = 0; i < test->requirement_count; i++)
		xml_textf(out, "%s%s", i ? ", " : "", test->requirements[i]);
}

void html_tests(struct xml_out *out, const struct run_result *run)
{
	static const char *const heads[] = {"Test", "Title", "Requirements", "Verdict", "Time, s"};
	char label[160];
	xml_open(out, "section");
	xml_element(out, "h2", NULL, "All tests");
	for (size_t s = 0; s < run->suite_count; s++) {
		xml_open(out, "table");
		xml_elementf(out, "caption", NULL, "Suite %s", suite_label(run, s, label, sizeof label));
		xml_open(out, "thead");
		xml_open(out, "tr");
		for (size_t i = 0; i < 5; i++) {
			xml_open(out, "th");
			xml_attr(out, "scope", "col");
			if (i == 4)
				xml_attr(out, "class", "number");
			xml_text(out, heads[i]);
			xml_close(out);
		}
		xml_close(out);
		xml_close(out);
		xml_open(out, "tbody");
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct test_result *test = &run->suites[s].tests[t];
			xml_open(out, "tr");
			xml_open(out, "th");
			xml_attr(out, "scope", "row");
			html_test_link(out, s, t, test->test->name);
			xml_close(out);
			xml_element(out, "td", NULL, test->test->title ? test->test->title : "");
			xml_open(out, "td");
			requirements(out, test->test);
			xml_close(out);
			html_verdict(out, "td", test->verdict);
			xml_elementf(out, "td", "number", "%.2f", test_seconds(test));
			xml_close(out);
		}
		xml_close(out);
		xml_close(out);
	}
	xml_close(out);
}

/* ---- one test -------------------------------------------------------------- */

static void step_list(struct xml_out *out, const struct rig *rig, const struct test *test,
                      const struct step *steps, size_t count, int depth)
{
	char text[512];
	if (count == 0 || depth == 0 || !rig)
		return;
	xml_open(out, "ol");
	for (size_t i = 0; i < count && i < ROWS_MOST; i++) {
		xml_open(out, "li");
		xml_text(out, step_text(&steps[i], rig, text, sizeof text));
		if (steps[i].mark >= 0 && (size_t)steps[i].mark < test->marks.count)
			xml_textf(out, " (mark %s)", test->marks.names[steps[i].mark]);
		if (steps[i].kind == STEP_CYCLE)
			step_list(out, rig, test, steps[i].steps, steps[i].step_count, depth - 1);
		xml_close(out);
	}
	if (count > ROWS_MOST)
		xml_elementf(out, "li", NULL, "and %zu more, as in the suite file", count - ROWS_MOST);
	xml_close(out);
}

static void mark_list(struct xml_out *out, const struct recorded_test *recorded)
{
	bool begun = false;
	for (size_t i = 0; i < recorded->mark_count; i++) {
		const struct mark *mark = &recorded->marks[i];
		double from = (double)(mark->earliest_ns - recorded->begin_ns) * 1e-6;
		double to = (double)(mark->latest_ns - recorded->begin_ns) * 1e-6;
		if (!begun) {
			xml_open(out, "p");
			xml_attr(out, "class", "marks");
			xml_text(out, "Marks, in ms since the stimulus began: ");
		}
		if (mark->reached)
			xml_textf(out, "%s%s %.1f to %.1f", begun ? "; " : "", mark->name, from, to);
		else
			xml_textf(out, "%s%s was not reached", begun ? "; " : "", mark->name);
		begun = true;
	}
	if (begun) {
		xml_text(out, ".");
		xml_close(out);
	}
}

static void attempt_list(struct xml_out *out, const struct recorded_test *recorded)
{
	if (recorded->outcome_count == 0)
		return;
	xml_open(out, "ul");
	for (size_t i = 0; i < recorded->outcome_count && i < ROWS_MOST; i++) {
		const struct outcome *outcome = &recorded->outcomes[i];
		xml_open(out, "li");
		xml_textf(out, "attempt %s: ", outcome->name);
		switch (outcome->status) {
		case OUTCOME_ACCEPTED:
			xml_text(out, "accepted");
			break;
		case OUTCOME_EXCEPTION:
			xml_textf(out, "refused with exception %d (%s)", outcome->exception,
			          modbus_exception_name(outcome->exception));
			break;
		case OUTCOME_NO_REPLY:
			xml_text(out, "no reply");
			break;
		case OUTCOME_NOT_MADE:
			xml_text(out, "not made");
			break;
		}
		xml_close(out);
	}
	xml_close(out);
}

static void metric_row(struct xml_out *out, const struct metric *metric,
                       const struct limit_result *limit)
{
	struct shown_unit shown = metric_shown(metric, limit ? limit->limit : NULL);
	char text[120];
	xml_open(out, "tr");
	xml_open(out, "th");
	xml_attr(out, "scope", "row");
	xml_text(out, metric->kind->name);
	xml_close(out);
	xml_element(out, "td", "number", value_text(metric, shown, text, sizeof text));
	xml_element(out, "td", "number", interval_text(metric, shown, text, sizeof text));
	xml_element(out, "td", NULL, shown.name);
	xml_element(out, "td", NULL,
	            limit ? limit_text(metric, limit->limit, shown, text, sizeof text) : "");
	xml_element(out, "td", NULL, evidence_name(metric->evidence));
	if (limit)
		html_verdict(out, "td", limit->verdict);
	else
		xml_element(out, "td", NULL, "not judged");
	xml_close(out);
	bool reason = limit && limit->verdict != VERDICT_PASS && limit->reason[0];
	if (!reason && !metric->note[0])
		return;
	xml_open(out, "tr");
	xml_attr(out, "class", "why");
	xml_open(out, "td");
	xml_attr(out, "colspan", "7");
	xml_textf(out, "%s%s%s", reason ? limit->reason : "", reason && metric->note[0] ? "; " : "",
	          metric->note);
	xml_close(out);
	xml_close(out);
}

static void metric_table(struct xml_out *out, const struct check_result *check)
{
	static const char *const heads[] = {"Metric", "Value",    "Interval", "Unit",
	                                    "Limit",  "Evidence", "Verdict"};
	if (check->metric_count == 0)
		return;
	xml_open(out, "table");
	xml_elementf(out, "caption", NULL, "%s: %s", check->use->name,
	             check->use->kind->text ? check->use->kind->text : "");
	xml_open(out, "thead");
	xml_open(out, "tr");
	for (size_t i = 0; i < 7; i++) {
		xml_open(out, "th");
		xml_attr(out, "scope", "col");
		if (i == 1 || i == 2)
			xml_attr(out, "class", "number");
		xml_text(out, heads[i]);
		xml_close(out);
	}
	xml_close(out);
	xml_close(out);
	xml_open(out, "tbody");
	for (size_t i = 0; i < check->metric_count; i++) {
		const struct metric_result *metric = &check->metrics[i];
		/* What nobody asked for and nobody knows is in results.json only. */
		if (metric->limit_count == 0 && !isnan(metric->metric.value))
			metric_row(out, &metric->metric, NULL);
		for (size_t l = 0; l < metric->limit_count; l++)
			metric_row(out, &metric->metric, &metric->limits[l]);
	}
	xml_close(out);
	xml_close(out);
}

/* failure_number: how many did not pass before this test. */
static void test_section(struct xml_out *out, const struct run_result *run, size_t s, size_t t,
                         size_t failure_number, int columns)
{
	const struct test_result *test = &run->suites[s].tests[t];
	char id[96];
	xml_open(out, "section");
	xml_attrf(out, "id", "t%zu-%zu", s, t);
	xml_attr(out, "class", "test");
	xml_open(out, "h3");
	html_name(out, test->test->name);
	xml_textf(out, " %s ", test->test->title ? test->test->title : "");
	html_verdict(out, "span", test->verdict);
	xml_close(out);
	xml_element(out, "p", NULL, test->reason);
	size_t length = xml_out_length(out);
	if (length > BYTES_SECTIONS || (length > BYTES_PLOTS && !is_failure(test))) {
		xml_element(out, "p", "note",
		            "Its details are left out here, since the page would grow too large; they are "
		            "in results.json.");
		xml_close(out);
		return;
	}
	if (test->test->requirement_count) {
		xml_open(out, "p");
		xml_text(out, "Requirements: ");
		requirements(out, test->test);
		xml_close(out);
	}
	if (test->recorded || is_failure(test)) {
		xml_element(out, "h4", NULL, "What was commanded");
		step_list(out, run->facts.rig, test->test, test->test->stimulus, test->test->stimulus_count,
		          STEP_DEPTH);
	}
	if (test->recorded) {
		mark_list(out, test->recorded);
		attempt_list(out, test->recorded);
	}
	for (size_t c = 0; c < test->check_count; c++) {
		const struct check_result *check = &test->checks[c];
		if (c == 0)
			xml_element(out, "h4", NULL, "What was measured");
		if (check->verdict == VERDICT_SKIPPED)
			xml_elementf(out, "p", "note", "%s was not evaluated.", check->use->name);
		metric_table(out, check);
		(void)snprintf(id, sizeof id, "t%zu-%zu-c%zu", s, t, c);
		if (is_failure(test) && plot_with_failure(run, test, c, failure_number)) {
			xml_open(out, "p");
			xml_attr(out, "class", "note");
			xml_open(out, "a");
			xml_attrf(out, "href", "#f%zu-%zu", s, t);
			xml_text(out, "Its plot stands above, with what did not pass.");
			xml_close(out);
			xml_close(out);
		} else if (xml_out_length(out) < BYTES_PLOTS && chart_possible(run->facts.rig, test, check))
			chart_write(out, run->facts.rig, test, check, id, columns);
	}
	xml_close(out);
}

void html_each_test(struct xml_out *out, const struct run_result *run, int chart_columns)
{
	char label[160];
	size_t failures = 0;
	xml_open(out, "section");
	xml_attr(out, "class", "each");
	xml_element(out, "h2", NULL, "Each test");
	xml_element(out, "p", "note",
	            "Intervals cover 95 % unless a check can guarantee its bounds. A value without an "
	            "interval is exact.");
	for (size_t s = 0; s < run->suite_count; s++) {
		if (run->suite_count > 1)
			xml_elementf(out, "h3", NULL, "Suite %s", suite_label(run, s, label, sizeof label));
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			test_section(out, run, s, t, failures, chart_columns);
			failures += is_failure(&run->suites[s].tests[t]);
		}
	}
	xml_close(out);
}
