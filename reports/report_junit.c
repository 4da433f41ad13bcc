/* SPDX-License-Identifier: Apache-2.0 */
/*
 * junit.xml for CI servers, in the one dialect that satisfies both schemas in
 * use (Apache Ant's, as windyroad/JUnit-Schema has it, and Jenkins'
 * junit-10.xsd): no attributes on testsuites, no file or line, at most one of
 * failure, error and skipped, times as %.3f, a timestamp without a zone.
 *
 * A limit that is violated is a failure. What could not be judged is an error
 * with a type that says why (inconclusive, aborted, precondition ...): the
 * format has no word for it, and calling it skipped would turn the build green.
 * Names hold no measured number, so that a server can follow a test over time;
 * the numbers stand in the failure's text and in system-out.
 */
#include <string.h>

#include "report_text.h"
#include "xml_out.h"

static void property(struct xml_out *out, const char *name, const char *value)
{
	xml_open(out, "property");
	xml_attr(out, "name", name);
	xml_attr(out, "value", value);
	xml_close_void(out);
}

static const char *yes_no(bool value)
{
	return value ? "yes" : "no";
}

static void properties(struct xml_out *out, const struct run_result *run,
                       const struct suite_result *suite)
{
	const struct run_facts *facts = &run->facts;
	char buffer[160];
	size_t all, selected = run_selected(run, &all);
	xml_open(out, "properties");
	property(out, "rig", facts->rig ? facts->rig->name : "");
	property(out, "tool_version", facts->tool_version);
	property(out, "rehearsal", yes_no(facts->rehearsal));
	if (facts->defect)
		property(out, "defect", facts->defect);
	(void)snprintf(buffer, sizeof buffer, "%zu of %zu", selected, all);
	property(out, "tests_selected", buffer);
	property(out, "decision_rule", suite->suite->rule == DECISION_GUARDED ? "guarded" : "simple");
	property(out, "aborted", yes_no(facts->aborted));
	property(out, "rest_confirmed",
	         facts->rest_was_needed ? yes_no(facts->rest_confirmed) : "not needed");
	for (size_t i = 0; i < facts->identity_count; i++) {
		(void)snprintf(buffer, sizeof buffer, "%.70s.%.70s", facts->identities[i].device,
		               facts->identities[i].key);
		property(out, buffer, facts->identities[i].text);
	}
	for (size_t i = 0; i < suite->suite->value_count; i++)
		if (suite->suite->values[i].overridden) {
			(void)snprintf(buffer, sizeof buffer, "overridden.%.100s",
			               suite->suite->values[i].name);
			property(out, buffer, suite->suite->values[i].shown);
		}
	xml_close(out);
}

/* Lines of the metrics that have a limit; worse than pass only, or all. */
static void metric_lines(struct text *text, const struct test_result *test, bool all)
{
	char line[512];
	for (size_t c = 0; c < test->check_count; c++)
		for (size_t m = 0; m < test->checks[c].metric_count; m++) {
			const struct metric_result *metric = &test->checks[c].metrics[m];
			for (size_t l = 0; l < metric->limit_count; l++) {
				const struct limit_result *limit = &metric->limits[l];
				if (!all && limit->verdict == VERDICT_PASS)
					continue;
				text_printf(text, "%s: %s: %s, %s\n", verdict_name(limit->verdict),
				            test->checks[c].use->name,
				            metric_text(&metric->metric, limit->limit, line, sizeof line),
				            evidence_name(metric->metric.evidence));
				if (!all && limit->reason[0])
					text_printf(text, "  %s\n", limit->reason);
			}
		}
}

static void outcome(struct xml_out *out, const struct test_result *test)
{
	if (test->verdict == VERDICT_PASS)
		return;
	if (test->verdict == VERDICT_SKIPPED) {
		xml_open(out, "skipped");
		xml_close_void(out);
		return;
	}
	struct text text;
	text_init(&text, 0);
	text_printf(&text, "%s\n", test->reason);
	if (test->test->title && test->test->title[0])
		text_printf(&text, "%s\n", test->test->title);
	for (size_t i = 0; i < test->test->requirement_count; i++)
		text_printf(&text, "requirement %s\n", test->test->requirements[i]);
	metric_lines(&text, test, false);
	bool fail = test->verdict == VERDICT_FAIL;
	xml_open(out, fail ? "failure" : "error");
	xml_attr_name(out, "message", test->reason);
	xml_attr(out, "type",
	         fail                                    ? "limit"
	         : test->verdict == VERDICT_INCONCLUSIVE ? "inconclusive"
	                                                 : error_sort(test));
	xml_text(out, text_string(&text));
	xml_close(out);
	text_release(&text);
}

static void testcase(struct xml_out *out, const char *label, const struct test_result *test)
{
	xml_open(out, "testcase");
	xml_attr_name(out, "name", test->test->name);
	xml_attr_name(out, "classname", label);
	xml_attrf(out, "time", "%.3f", test_seconds(test));
	outcome(out, test);
	xml_close(out);
}

/* YYYY-MM-DDTHH:MM:SS, whatever stands behind it; the epoch where there is none. */
static void timestamp(struct xml_out *out, const char *utc)
{
	static const char shape[] = "0000-00-00T00:00:00";
	char stamp[sizeof shape];
	(void)snprintf(stamp, sizeof stamp, "%.19s", utc);
	bool good = strlen(stamp) == sizeof shape - 1;
	for (size_t i = 0; good && shape[i]; i++)
		good = shape[i] == '0' ? stamp[i] >= '0' && stamp[i] <= '9' : stamp[i] == shape[i];
	xml_attr(out, "timestamp", good ? stamp : "1970-01-01T00:00:00");
}

static void system_out(struct xml_out *out, const struct suite_result *suite)
{
	struct text text;
	text_init(&text, XML_TEXT_MOST - 200);
	for (size_t i = 0; i < suite->test_count; i++) {
		const struct test_result *test = &suite->tests[i];
		text_printf(&text, "%s %s\n", test->test->name, verdict_name(test->verdict));
		metric_lines(&text, test, true);
	}
	if (text.cut) {
		text.most += 100;
		text_puts(&text, "\n(the rest is in results.json)\n");
	}
	xml_element(out, "system-out", NULL, text_string(&text));
	text_release(&text);
}

static void system_err(struct xml_out *out, const struct run_facts *facts)
{
	xml_open(out, "system-err");
	if (facts->rest_was_needed && !facts->rest_confirmed)
		xml_textf(out, "REST NOT CONFIRMED: %s\n", facts->rest_reason);
	if (facts->aborted)
		xml_textf(out, "aborted: %s\n", facts->abort_reason);
	xml_close(out);
}

static void testsuite(struct xml_out *out, const struct run_result *run, size_t index)
{
	const struct suite_result *suite = &run->suites[index];
	char label[160];
	double seconds = 0;
	for (size_t i = 0; i < suite->test_count; i++)
		seconds += test_seconds(&suite->tests[i]);
	(void)suite_label(run, index, label, sizeof label);
	xml_open(out, "testsuite");
	xml_attr_name(out, "name", label);
	xml_attr_name(out, "package", run->facts.rig ? run->facts.rig->name : "");
	xml_attrf(out, "id", "%zu", index);
	xml_attrf(out, "tests", "%zu", suite->totals.tests);
	xml_attrf(out, "failures", "%zu", suite->totals.fail);
	xml_attrf(out, "errors", "%zu", suite->totals.error + suite->totals.inconclusive);
	xml_attrf(out, "skipped", "%zu", suite->totals.skipped);
	xml_attrf(out, "time", "%.3f", seconds);
	timestamp(out, run->facts.started_utc);
	xml_attr_name(out, "hostname", run->facts.host[0] ? run->facts.host : "localhost");
	properties(out, run, suite);
	for (size_t i = 0; i < suite->test_count; i++)
		testcase(out, label, &suite->tests[i]);
	system_out(out, suite);
	system_err(out, &run->facts);
	xml_close(out);
}

static int junit_write(const struct run_result *run, const struct run_folder *folder,
                       struct err *reterr)
{
	struct xml_out out;
	if (xml_out_init(&out, reterr) < 0)
		return -1;
	/* A line an element: people look into this file too, and compare two of them. */
	(void)xmlTextWriterSetIndent(out.writer, 1);
	xml_raw(&out, "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n");
	xml_open(&out, "testsuites");
	for (size_t i = 0; i < run->suite_count; i++)
		testsuite(&out, run, i);
	xml_close(&out);
	return xml_out_write(&out, folder, "junit.xml", reterr);
}

const struct report_kind report_junit = {"junit", junit_write};
