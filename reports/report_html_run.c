/* SPDX-License-Identifier: Apache-2.0 */
/* The part of report.html that says what was run: rig, devices, instruments, links. */
#include <string.h>

#include "report_html.h"
#include "sha256.h"

static void term(struct xml_out *out, const char *name, const char *text)
{
	xml_element(out, "dt", NULL, name);
	xml_element(out, "dd", NULL, text);
}

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
	for (size_t i = 0; i < suite->expect_count; i++) {
		(void)snprintf(text, sizeof text, "%.100s %.300s, else the run is refused",
		               suite->expect[i].key, suite->expect[i].text);
		term(out, "Expected", text);
	}
	for (size_t i = 0; i < suite->value_count; i++)
		if (suite->values[i].overridden) {
			(void)snprintf(text, sizeof text, "%.100s = %.300s", suite->values[i].name,
			               suite->values[i].shown);
			term(out, "Overridden", text);
		}
}

static void hash_term(struct xml_out *out, const char *name, const struct yaml_file *file)
{
	char hex[SHA256_HEX_SIZE], text[400];
	if (!file || !file->bytes || sha256_of_bytes(file->bytes, file->length, hex) < 0)
		return;
	(void)snprintf(text, sizeof text, "SHA-256 %s", hex);
	term(out, name, text);
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
	hash_term(out, "Rig file", facts->rig ? facts->rig->file : NULL);
	for (size_t i = 0; i < run->suite_count; i++)
		hash_term(out, "Suite file", run->suites[i].suite->file);
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

bool html_out_of_date(const struct run_facts *facts, const struct accuracy *accuracy)
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
	static const char *const heads[] = {"Channel", "Device", "Evidence", "Limits of error",
	                                    "Calibrated until"};
	bool any = false;
	for (size_t i = 0; facts->rig && i < facts->rig->channel_count; i++)
		any |= facts->rig->infos[i].accuracy.given;
	if (!any)
		return;
	table_open(out, "Instruments", heads, 5);
	for (size_t i = 0; i < facts->rig->channel_count; i++) {
		const struct channel_info *info = &facts->rig->infos[i];
		char limits[200], until[64] = "not given";
		if (!info->accuracy.given)
			continue;
		accuracy_text(info, limits, sizeof limits);
		if (info->accuracy.calibrated_until_day > 0) {
			date_text(info->accuracy.calibrated_until_day, until, sizeof until);
			(void)strncat(until,
			              html_out_of_date(facts, &info->accuracy) ? " (out of date)"
			              : facts->started_utc[0]                  ? " (in date)"
			                                                       : "",
			              sizeof until - strlen(until) - 1);
		}
		row_of(out, "td",
		       (const char *const[]){info->name, info->device ? info->device : "",
		                             evidence_name(info->evidence), limits, until},
		       5);
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

void html_identity(struct xml_out *out, const struct run_result *run)
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
