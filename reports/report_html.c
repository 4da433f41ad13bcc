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

static void term(struct xml_out *out, const char *name, const char *text)
{
	xml_element(out, "dt", NULL, name);
	xml_element(out, "dd", NULL, text);
}

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
	xml_close(out);
	xml_elementf(out, "p", "counts",
	             "%zu tests: %zu pass, %zu fail, %zu inconclusive, %zu error, %zu skipped.",
	             totals->tests, totals->pass, totals->fail, totals->inconclusive, totals->error,
	             totals->skipped);
	if (facts->partial || selected < all)
		xml_elementf(out, "p", "note", "Partial: %zu of %zu tests were selected.", selected, all);
	if (run_overridden(run))
		xml_element(out, "p", "note",
		            "Values of the suite were overridden for this run; they are listed below.");
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

/* ---- identity ------------------------------------------------------------- */

static void suite_terms(struct xml_out *out, const struct run_result *run, size_t index)
{
	const struct suite *suite = run->suites[index].suite;
	char label[160], text[600];
	(void)snprintf(text, sizeof text, "%.150s%s%.400s",
	               suite_label(run, index, label, sizeof label),
	               suite->note && *suite->note ? ": " : "", suite->note ? suite->note : "");
	term(out, "Suite", text);
	term(out, "Decision rule",
	     suite->rule == DECISION_GUARDED
	         ? "guarded: pass only where the value with its uncertainty lies inside the limits, "
	           "fail only where it lies wholly outside, else inconclusive (guard band = expanded "
	           "uncertainty, as in JCGM 106)"
	         : "simple: by the value alone; the uncertainty is shown and does not decide");
	for (size_t i = 0; i < suite->value_count; i++)
		if (suite->values[i].overridden) {
			(void)snprintf(text, sizeof text, "%.100s = %.300s", suite->values[i].name,
			               suite->values[i].shown);
			term(out, "Overridden", text);
		}
}

static void identity_terms(struct xml_out *out, const struct run_result *run)
{
	const struct run_facts *facts = &run->facts;
	char text[600], duration[64];
	xml_open(out, "dl");
	(void)snprintf(text, sizeof text, "%.100s%s%.400s", facts->rig ? facts->rig->name : "",
	               facts->rig && facts->rig->note && *facts->rig->note ? ": " : "",
	               facts->rig && facts->rig->note ? facts->rig->note : "");
	term(out, "Rig", text);
	for (size_t i = 0; i < run->suite_count; i++)
		suite_terms(out, run, i);
	(void)snprintf(text, sizeof text, "%s UTC, for %s", facts->started_utc,
	               duration_text(facts->duration_ns, duration, sizeof duration));
	term(out, "Begun", text);
	(void)snprintf(text, sizeof text, "drivetrial %s on %s", facts->tool_version, facts->host);
	term(out, "Made by", text);
	if (facts->realtime[0])
		term(out, "Scheduling", facts->realtime);
	if (facts->rehearsal) {
		(void)snprintf(text, sizeof text, "seed %llu, defect: %.200s",
		               (unsigned long long)facts->seed, facts->defect ? facts->defect : "none");
		term(out, "Modelled bench", text);
	}
	xml_close(out);
}

static void row_of(struct xml_out *out, const char *cell, const char *const *texts, size_t count)
{
	xml_open(out, "tr");
	for (size_t i = 0; i < count; i++) {
		xml_open(out, cell);
		if (strcmp(cell, "th") == 0)
			xml_attr(out, "scope", "col");
		/* Of the links' counts: columns of numbers. */
		if (strcmp(cell, "th") == 0 && count == 6 && i > 0)
			xml_attr(out, "class", "number");
		xml_text(out, texts[i]);
		xml_close(out);
	}
	xml_close(out);
}

static void table_open(struct xml_out *out, const char *title, const char *const *heads,
                       size_t count)
{
	xml_open(out, "table");
	xml_element(out, "caption", NULL, title);
	xml_open(out, "thead");
	row_of(out, "th", heads, count);
	xml_close(out);
	xml_open(out, "tbody");
}

static void table_close(struct xml_out *out)
{
	xml_close(out);
	xml_close(out);
}

static void identities(struct xml_out *out, const struct run_facts *facts)
{
	static const char *const heads[] = {"Device", "What", "As read from the device"};
	if (facts->identity_count == 0)
		return;
	table_open(out, "Devices", heads, 3);
	for (size_t i = 0; i < facts->identity_count; i++) {
		const struct identity_read *one = &facts->identities[i];
		row_of(out, "td", (const char *const[]){one->device, one->key, one->text}, 3);
	}
	table_close(out);
}

/* Days since 1970 of a date, by the rule of the Gregorian calendar; -1 where it is none. */
static int64_t day_of(const char *utc)
{
	int year, month, day;
	if (sscanf(utc, "%4d-%2d-%2d", &year, &month, &day) != 3)
		return -1;
	int64_t y = month <= 2 ? year - 1 : year, m = month <= 2 ? month + 9 : month - 3;
	return 365 * y + y / 4 - y / 100 + y / 400 + (m * 306 + 5) / 10 + day - 1 - 719468;
}

static void date_text(int64_t day, char *buffer, size_t size)
{
	char shape[16];
	/* From the day count back by search over years: dates of calibration are near. */
	for (int year = 1970; year < 2300; year++)
		for (int month = 1; month <= 12; month++) {
			(void)snprintf(shape, sizeof shape, "%04d-%02d-01", year, month);
			int64_t first = day_of(shape);
			if (day < first || day >= first + 28 + 3)
				continue;
			(void)snprintf(shape, sizeof shape, "%04d-%02d-01", month == 12 ? year + 1 : year,
			               month == 12 ? 1 : month + 1);
			if (day >= day_of(shape))
				continue;
			(void)snprintf(buffer, size, "%04d-%02d-%02d", year, month, (int)(day - first + 1));
			return;
		}
	(void)snprintf(buffer, size, "unknown");
}

static bool out_of_date(const struct run_facts *facts, const struct accuracy *accuracy)
{
	return accuracy->calibrated_until_day > 0 &&
	       day_of(facts->started_utc) > accuracy->calibrated_until_day;
}

static void accuracy_text(const struct channel_info *info, char *buffer, size_t size)
{
	const struct accuracy *a = &info->accuracy;
	int used = 0;
	buffer[0] = '\0';
	if (a->of_reading > 0)
		used += snprintf(buffer, size, "%.4g %% of reading", a->of_reading * 100);
	if (a->of_range > 0)
		used += snprintf(buffer + used, size - (size_t)used, "%s%.4g %% of %.6g %.40s",
		                 used ? " + " : "", a->of_range * 100, a->range, info->unit->name);
	if (a->absolute > 0)
		(void)snprintf(buffer + used, size - (size_t)used, "%s%.6g %.40s", used ? " + " : "",
		               a->absolute, info->unit->name);
}

static void instruments(struct xml_out *out, const struct run_facts *facts)
{
	static const char *const heads[] = {"Channel", "Device", "Limits of error", "Calibrated until"};
	bool any = false;
	for (size_t i = 0; facts->rig && i < facts->rig->channel_count; i++)
		any |= facts->rig->infos[i].accuracy.given;
	if (!any)
		return;
	table_open(out, "Instruments", heads, 4);
	for (size_t i = 0; i < facts->rig->channel_count; i++) {
		const struct channel_info *info = &facts->rig->infos[i];
		char limits[200], until[64] = "not given";
		if (!info->accuracy.given)
			continue;
		accuracy_text(info, limits, sizeof limits);
		if (info->accuracy.calibrated_until_day > 0) {
			date_text(info->accuracy.calibrated_until_day, until, sizeof until);
			if (out_of_date(facts, &info->accuracy))
				(void)strncat(until, " (out of date)", sizeof until - strlen(until) - 1);
		}
		row_of(out, "td", (const char *const[]){info->name, info->device, limits, until}, 4);
	}
	table_close(out);
}

static void links(struct xml_out *out, const struct run_facts *facts)
{
	static const char *const heads[] = {"Link",    "Requests",   "Timeouts",
	                                    "Garbled", "Exceptions", "Reconnects"};
	if (facts->link_count == 0)
		return;
	table_open(out, "Links", heads, 6);
	for (size_t i = 0; i < facts->link_count; i++) {
		const struct link_counts *link = &facts->links[i];
		const uint64_t counts[5] = {link->requests, link->timeouts, link->garbled, link->exceptions,
		                            link->reconnects};
		xml_open(out, "tr");
		xml_element(out, "td", NULL, link->link);
		for (int j = 0; j < 5; j++)
			xml_elementf(out, "td", "number", "%llu", (unsigned long long)counts[j]);
		xml_close(out);
	}
	table_close(out);
}

static void identity(struct xml_out *out, const struct run_result *run)
{
	xml_open(out, "section");
	xml_element(out, "h2", NULL, "What was run");
	identity_terms(out, run);
	identities(out, &run->facts);
	instruments(out, &run->facts);
	links(out, &run->facts);
	xml_element(
	    out, "p", "note",
	    "The files of the run (samples, journal, rig and suite as they were) lie beside this "
	    "page; sha256sum -c SHA256SUMS shows whether one was changed by accident.");
	xml_close(out);
}

/* ---- what is not as it should be ------------------------------------------ */

static void count_evidence(const struct run_result *run, size_t *ret_self, size_t *ret_all)
{
	*ret_self = *ret_all = 0;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct test_result *test = &run->suites[s].tests[t];
			for (size_t c = 0; c < test->check_count; c++)
				for (size_t m = 0; m < test->checks[c].metric_count; m++) {
					const struct metric_result *metric = &test->checks[c].metrics[m];
					*ret_all += metric->limit_count;
					if (metric->metric.evidence == EVIDENCE_SELF_REPORTED)
						*ret_self += metric->limit_count;
				}
		}
}

static bool abnormal_links(struct xml_out *out, const struct run_facts *facts)
{
	bool any = false;
	for (size_t i = 0; i < facts->link_count; i++) {
		const struct link_counts *link = &facts->links[i];
		/* A connection is made anew on purpose too, to confirm rest: no sign by itself. */
		if (link->timeouts + link->garbled == 0)
			continue;
		any = true;
		xml_elementf(out, "li", NULL,
		             "Link %.64s: of %llu requests %llu had no reply and %llu a garbled one; "
		             "reconnections: %llu.",
		             link->link, (unsigned long long)link->requests,
		             (unsigned long long)link->timeouts, (unsigned long long)link->garbled,
		             (unsigned long long)link->reconnects);
	}
	return any;
}

static bool abnormal_tests(struct xml_out *out, const struct run_result *run)
{
	bool any = false;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct recorded_test *recorded = run->suites[s].tests[t].recorded;
			if (!recorded || recorded->missed_slots + recorded->lost_replies == 0)
				continue;
			any = true;
			xml_open(out, "li");
			xml_open(out, "a");
			xml_attrf(out, "href", "#t%zu-%zu", s, t);
			xml_text(out, recorded->name);
			xml_close(out);
			xml_textf(out, ": %zu samples that were due were not taken, %zu replies were lost.",
			          recorded->missed_slots, recorded->lost_replies);
			xml_close(out);
		}
	return any;
}

static void abnormal(struct xml_out *out, const struct run_result *run)
{
	const struct run_facts *facts = &run->facts;
	size_t self, all;
	bool any = false;
	count_evidence(run, &self, &all);
	xml_open(out, "section");
	xml_element(out, "h2", NULL, "What to know before the good news");
	xml_open(out, "ul");
	if (facts->aborted) {
		xml_elementf(out, "li", NULL, "The run was aborted: %s", facts->abort_reason);
		any = true;
	}
	if (facts->rest_was_needed && !facts->rest_confirmed) {
		xml_elementf(out, "li", NULL, "Rest was not confirmed: %s", facts->rest_reason);
		any = true;
	}
	if (facts->defect) {
		xml_elementf(out, "li", NULL, "The modelled controller was built wrong on purpose: %.100s.",
		             facts->defect);
		any = true;
	}
	any |= abnormal_links(out, facts);
	any |= abnormal_tests(out, run);
	for (size_t i = 0; facts->rig && i < facts->rig->channel_count; i++)
		if (out_of_date(facts, &facts->rig->infos[i].accuracy)) {
			xml_elementf(out, "li", NULL, "The instrument of channel %.64s is out of calibration.",
			             facts->rig->infos[i].name);
			any = true;
		}
	if (self) {
		xml_elementf(out, "li", NULL,
		             "%zu of %zu limits rest on what the device under test says of itself.", self,
		             all);
		any = true;
	}
	if (!any)
		xml_element(out, "li", NULL, "Nothing abnormal was recorded.");
	xml_close(out);
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

static void head(struct xml_out *out, const struct run_result *run)
{
	xml_open(out, "head");
	xml_open(out, "meta");
	xml_attr(out, "charset", "utf-8");
	xml_close_void(out);
	xml_open(out, "meta");
	xml_attr(out, "name", "viewport");
	xml_attr(out, "content", "width=device-width, initial-scale=1");
	xml_close_void(out);
	xml_open(out, "meta");
	xml_attr(out, "name", "color-scheme");
	xml_attr(out, "content", "light dark");
	xml_close_void(out);
	xml_elementf(out, "title", NULL, "%s: %s, %zu of %zu tests passed",
	             run->facts.rig ? run->facts.rig->name : "run", verdict_name(run_verdict(run)),
	             run->totals.pass, run->totals.tests);
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
	if (xml_out_init(&out, reterr) < 0)
		return -1;
	xml_raw(&out, "<!DOCTYPE html>\n");
	xml_open(&out, "html");
	out.lines = true;
	xml_attr(&out, "xmlns", "http://www.w3.org/1999/xhtml");
	xml_attr(&out, "lang", "en");
	head(&out, run);
	xml_open(&out, "body");
	header(&out, run);
	xml_open(&out, "main");
	identity(&out, run);
	cautions(&out);
	abnormal(&out, run);
	html_failures(&out, run);
	html_tests(&out, run);
	html_each_test(&out, run, chart_columns(run));
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
