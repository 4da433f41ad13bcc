/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Requirement -> tests -> worst verdict, and the lines for signatures. A
 * requirement of a limit gets the verdict of that limit, one of a test that of
 * the whole test: a test that broke for another reason has not shown that its
 * requirement is met. Rejected: counting a requirement as met where some of
 * its tests were not run; the table says so instead.
 */
#include <stdlib.h>
#include <string.h>

#include "report_html.h"

struct trace {
	const char *requirement;
	size_t suite, test;
	enum verdict verdict;
};

struct traces {
	struct trace *items;
	size_t count, room;
	bool failed;
};

static void add(struct traces *traces, const char *requirement, size_t suite, size_t test,
                enum verdict verdict)
{
	for (size_t i = traces->count; i > 0; i--) {
		struct trace *one = &traces->items[i - 1];
		if (one->suite != suite || one->test != test)
			break;
		if (strcmp(one->requirement, requirement) == 0) {
			one->verdict = verdict_worse(one->verdict, verdict);
			return;
		}
	}
	if (traces->count == traces->room) {
		size_t room = traces->room ? traces->room * 2 : 256;
		struct trace *items = realloc(traces->items, room * sizeof *items);
		traces->failed |= !items;
		if (!items)
			return;
		traces->items = items;
		traces->room = room;
	}
	traces->items[traces->count++] = (struct trace){requirement, suite, test, verdict};
}

static enum verdict of_limit(const struct test_result *test, const struct limit *limit)
{
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t m = 0; m < test->checks[c].metric_count; m++)
			for (size_t l = 0; l < test->checks[c].metrics[m].limit_count; l++)
				if (test->checks[c].metrics[m].limits[l].limit == limit)
					return test->checks[c].metrics[m].limits[l].verdict;
	return test->verdict;
}

static void collect(const struct run_result *run, struct traces *traces)
{
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct test_result *result = &run->suites[s].tests[t];
			const struct test *test = result->test;
			for (size_t i = 0; i < test->requirement_count; i++)
				add(traces, test->requirements[i], s, t, result->verdict);
			for (size_t c = 0; c < test->check_count; c++)
				for (size_t l = 0; l < test->checks[c].limit_count; l++)
					if (test->checks[c].limits[l].requirement)
						add(traces, test->checks[c].limits[l].requirement, s, t,
						    of_limit(result, &test->checks[c].limits[l]));
		}
}

static int compare(const void *a, const void *b)
{
	const struct trace *x = a, *y = b;
	int order = strcmp(x->requirement, y->requirement);
	if (order)
		return order;
	if (x->suite != y->suite)
		return x->suite < y->suite ? -1 : 1;
	return x->test < y->test ? -1 : x->test > y->test;
}

static void row(struct xml_out *out, const struct run_result *run, const struct trace *first,
                size_t count)
{
	enum verdict worst = VERDICT_SKIPPED;
	size_t skipped = 0;
	for (size_t i = 0; i < count; i++) {
		skipped += first[i].verdict == VERDICT_SKIPPED;
		worst = verdict_worse(worst, first[i].verdict);
	}
	xml_open(out, "tr");
	xml_open(out, "th");
	xml_attr(out, "scope", "row");
	xml_text(out, first->requirement);
	xml_close(out);
	xml_open(out, "td");
	for (size_t i = 0; i < count; i++) {
		xml_text(out, i ? ", " : "");
		html_test_link(out, first[i].suite, first[i].test,
		               run->suites[first[i].suite].tests[first[i].test].test->name);
		if (first[i].verdict != VERDICT_PASS)
			xml_textf(out, " (%s)", verdict_name(first[i].verdict));
	}
	xml_close(out);
	xml_open(out, "td");
	html_verdict(out, "span", worst);
	if (skipped && skipped < count)
		xml_textf(out, ", but %zu of %zu tests not run", skipped, count);
	xml_close(out);
	xml_close(out);
}

void html_requirements(struct xml_out *out, const struct run_result *run)
{
	static const char *const heads[] = {"Requirement", "Tests", "Worst verdict"};
	struct traces traces = {0};
	collect(run, &traces);
	out->failed |= traces.failed;
	if (traces.count > 0) {
		qsort(traces.items, traces.count, sizeof *traces.items, compare);
		xml_open(out, "section");
		xml_element(out, "h2", NULL, "Requirements");
		xml_open(out, "table");
		xml_element(out, "caption", NULL,
		            "Each requirement that a test or limit names. A requirement is met where every "
		            "test of it passed.");
		xml_open(out, "thead");
		xml_open(out, "tr");
		for (size_t i = 0; i < sizeof heads / sizeof *heads; i++) {
			xml_open(out, "th");
			xml_attr(out, "scope", "col");
			xml_text(out, heads[i]);
			xml_close(out);
		}
		xml_close(out);
		xml_close(out);
		xml_open(out, "tbody");
		for (size_t i = 0; i < traces.count;) {
			size_t count = 1;
			while (i + count < traces.count &&
			       strcmp(traces.items[i + count].requirement, traces.items[i].requirement) == 0)
				count++;
			row(out, run, &traces.items[i], count);
			i += count;
		}
		xml_close(out);
		xml_close(out);
		xml_close(out);
	}
	free(traces.items);
}

void html_sign_off(struct xml_out *out, const struct run_result *run)
{
	static const char *const lines[] = {"Run by", "Reviewed by", "Released by",
	                                    "Ambient temperature and remarks"};
	xml_open(out, "section");
	xml_attr(out, "class", "signoff");
	xml_element(out, "h2", NULL, "Sign-off");
	xml_elementf(out, "p", NULL, "Rig %.100s, begun %s UTC, verdict %s. Name, date, signature:",
	             run->facts.rig ? run->facts.rig->name : "", run->facts.started_utc,
	             verdict_name(run_verdict(run)));
	xml_open(out, "dl");
	for (size_t i = 0; i < sizeof lines / sizeof *lines; i++) {
		xml_element(out, "dt", NULL, lines[i]);
		xml_element(out, "dd", NULL, "\xC2\xA0");
	}
	xml_close(out);
	xml_close(out);
}
