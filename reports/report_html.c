/* SPDX-License-Identifier: Apache-2.0 */
/*
 * report.html for people who were not in the room. The order is that of their
 * questions: did it pass, did the bench come to rest, what was it, can it be
 * trusted, what failed and by how much; then everything. It is HTML5 written
 * as well-formed XML, without scripts, inline styles and data: addresses, so
 * that a CI server's content policy leaves it as it is, and it reads without
 * its stylesheet. Sections about single tests are in report_html_test.c.
 *
 * Rejected: one file with an inline style (the usual policy blocks it), and
 * plots as images beside the page (they get lost when somebody mails it).
 */
#include "report_html.h"

#include <math.h>
#include <string.h>

#include "chart.h"

/* From here on the sections of passed tests are left out, and before the plots of all. */
enum { BYTES_FOR_CHARTS = 5500000, BYTES_PER_COLUMN = 110 };

static const char *const CAUTIONS[] = {
    "What a device says of itself over Modbus is an indication, never proof that torque is off or "
    "that a safety function works. This report validates no safety function.",
    "Numbers marked self-reported come from the device under test or rest on one that does; "
    "independent numbers come from instruments of the bench.",
    "At rest means that the shaft was measured to stand. It does not mean that the bench was "
    "without voltage: a DC link stays charged after it was switched off.",
};

static void alarm_rest(struct xml_out *out, const struct run_facts *facts)
{
	if (!facts->rest_was_needed || facts->rest_confirmed)
		return;
	xml_open(out, "p");
	xml_attr(out, "class", "alarm");
	xml_element(out, "strong", NULL, "Rest was not confirmed: the shaft may have kept turning.");
	xml_textf(out, " %s", facts->rest_reason);
	xml_close(out);
}

static void header(struct xml_out *out, const struct run_result *run)
{
	const struct run_facts *facts = &run->facts;
	const struct run_totals *totals = &run->totals;
	const char *verdict = verdict_name(run_verdict(run));
	size_t all, selected = run_selected(run, &all);
	xml_open(out, "header");
	alarm_rest(out, facts);
	xml_open(out, "h1");
	xml_attr(out, "class", verdict);
	xml_textf(out, "Verdict: %s", verdict);
	if (facts->partial || selected < all)
		xml_elementf(out, "span", "flag", " partial: %zu of %zu", selected, all);
	if (run_overridden(run))
		xml_element(out, "span", "flag", " values overridden");
	if (facts->rehearsal)
		xml_element(out, "span", "flag", " rehearsed");
	xml_close(out);
	xml_elementf(out, "p", "counts",
	             "%zu tests: %zu pass, %zu fail, %zu inconclusive, %zu error, %zu skipped.",
	             totals->tests, totals->pass, totals->fail, totals->inconclusive, totals->error,
	             totals->skipped);
	if (facts->partial || selected < all)
		xml_elementf(out, "p", "note", "Partial: %zu of %zu tests were selected.", selected, all);
	if (run_overridden(run))
		xml_element(
		    out, "p", "note",
		    "Values of the suite, on which limits may rest, were overridden for this run; they "
		    "are listed below.");
	if (facts->rehearsal)
		xml_element(out, "p", "note",
		            "A rehearsal on the modelled bench: nothing here was measured on hardware.");
	if (facts->aborted)
		xml_elementf(out, "p", "note", "The run was aborted: %s", facts->abort_reason);
	if (facts->rest_was_needed && facts->rest_confirmed)
		xml_elementf(out, "p", NULL, "The bench came to rest: %s",
		             facts->rest_reason[0] ? facts->rest_reason : "confirmed by measurement.");
	else if (!facts->rest_was_needed)
		xml_element(out, "p", NULL,
		            "Nothing was commanded, so the bench did not have to come to rest.");
	xml_close(out);
}

static void cautions(struct xml_out *out)
{
	xml_open(out, "section");
	xml_element(out, "h2", NULL, "Cautions");
	xml_open(out, "ul");
	for (size_t i = 0; i < sizeof CAUTIONS / sizeof *CAUTIONS; i++)
		xml_element(out, "li", NULL, CAUTIONS[i]);
	xml_close(out);
	xml_close(out);
}

/* ---- the whole ------------------------------------------------------------- */

/* How fine the curves may be, so that the page stays small whatever the number of tests. */
static int chart_columns(const struct run_result *run)
{
	size_t charts = 0;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++)
			for (size_t c = 0; c < run->suites[s].tests[t].check_count; c++)
				charts += chart_possible(run->facts.rig, &run->suites[s].tests[t],
				                         &run->suites[s].tests[t].checks[c]);
	size_t columns = BYTES_FOR_CHARTS / BYTES_PER_COLUMN / (charts ? charts : 1);
	return columns > CHART_COLUMNS_MOST ? CHART_COLUMNS_MOST : (int)columns;
}

void html_begin(struct xml_out *out)
{
	xml_raw(out, "<!DOCTYPE html>\n");
	xml_open(out, "html");
	out->lines = true;
	xml_attr(out, "xmlns", "http://www.w3.org/1999/xhtml");
	xml_attr(out, "lang", "en");
}

static void meta(struct xml_out *out, const char *name, const char *content)
{
	xml_open(out, "meta");
	xml_attr(out, "name", name);
	xml_attr(out, "content", content);
	xml_close_void(out);
}

void html_head(struct xml_out *out, const char *title)
{
	xml_open(out, "head");
	xml_open(out, "meta");
	xml_attr(out, "charset", "utf-8");
	xml_close_void(out);
	meta(out, "viewport", "width=device-width, initial-scale=1");
	meta(out, "color-scheme", "light dark");
	xml_element(out, "title", NULL, title);
	xml_open(out, "link");
	xml_attr(out, "rel", "stylesheet");
	xml_attr(out, "href", "report.css");
	xml_close_void(out);
	xml_close(out);
}

static int html_write(const struct run_result *run, const struct run_folder *folder,
                      struct err *reterr)
{
	struct xml_out out;
	int columns = chart_columns(run);
	if (xml_out_init(&out, reterr) < 0)
		return -1;
	char title[320];
	(void)snprintf(title, sizeof title, "%.150s: %s, %zu of %zu tests passed",
	               run->facts.rig ? run->facts.rig->name : "run", verdict_name(run_verdict(run)),
	               run->totals.pass, run->totals.tests);
	html_begin(&out);
	html_head(&out, title);
	xml_open(&out, "body");
	header(&out, run);
	xml_open(&out, "main");
	html_identity(&out, run);
	cautions(&out);
	html_abnormal(&out, run);
	html_failures(&out, run, columns);
	html_tests(&out, run);
	html_requirements(&out, run);
	html_sweeps(&out, run);
	html_each_test(&out, run, columns);
	html_sign_off(&out, run);
	xml_close(&out);
	xml_close(&out);
	xml_close(&out);
	if (run_folder_write(folder, "report.css", report_css, report_css_length, reterr) < 0) {
		xml_out_release(&out);
		return -1;
	}
	return xml_out_write(&out, folder, "report.html", reterr);
}

const struct report_kind report_html = {"html", html_write};
