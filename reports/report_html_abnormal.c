/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The part of report.html that stands before the good news: what went wrong on
 * the way, on which link, what the bench did not confirm, and on whose word
 * the verdicts rest. Everything here is said in counts and names, so that a
 * reader can go and look; a bench without a flaw gets one line.
 *
 * Rejected: a traffic light. It would hide which of these things matters.
 */
#include <math.h>
#include <string.h>

#include "report_html.h"

enum { NAMED_MOST = 12 };

static void events_of(struct xml_out *out, const struct run_facts *facts, enum run_event_kind kind,
                      const char *where)
{
	bool begun = false;
	for (size_t i = 0; i < facts->event_count; i++) {
		const struct run_event *event = &facts->events[i];
		if (event->kind != kind || (where && strcmp(event->where, where) != 0))
			continue;
		if (!begun)
			xml_open(out, "ul");
		begun = true;
		xml_open(out, "li");
		xml_textf(out, "%.300s (", event->text);
		if (event->count > 1)
			xml_textf(out, "%zu times, %.3f s to %.3f s of the run)", event->count,
			          (double)event->first_ns * 1e-9, (double)event->last_ns * 1e-9);
		else
			xml_textf(out, "at %.3f s of the run)", (double)event->first_ns * 1e-9);
		xml_close(out);
	}
	if (begun)
		xml_close(out);
}

static bool has_events(const struct run_facts *facts, enum run_event_kind kind, const char *where)
{
	for (size_t i = 0; i < facts->event_count; i++)
		if (facts->events[i].kind == kind && (!where || strcmp(facts->events[i].where, where) == 0))
			return true;
	return false;
}

static bool run_as_a_whole(struct xml_out *out, const struct run_facts *facts)
{
	bool any = false;
	if (facts->aborted) {
		xml_elementf(out, "li", NULL, "The run was aborted: %s", facts->abort_reason);
		any = true;
	}
	if (facts->rest_was_needed && !facts->rest_confirmed) {
		xml_elementf(out, "li", NULL, "Rest was not confirmed: %s", facts->rest_reason);
		any = true;
	}
	if (has_events(facts, RUN_EVENT_REST, NULL)) {
		xml_open(out, "li");
		xml_text(out, "Ways to rest that were not confirmed:");
		events_of(out, facts, RUN_EVENT_REST, NULL);
		xml_close(out);
		any = true;
	}
	if (has_events(facts, RUN_EVENT_INTERLOCK, NULL)) {
		xml_open(out, "li");
		xml_text(out, "Interlocks that were violated:");
		events_of(out, facts, RUN_EVENT_INTERLOCK, NULL);
		xml_close(out);
		any = true;
	}
	if (facts->defect) {
		xml_elementf(out, "li", NULL, "The modelled controller was built wrong on purpose: %.100s.",
		             facts->defect);
		any = true;
	}
	return any;
}

static bool links(struct xml_out *out, const struct run_facts *facts)
{
	bool any = false;
	for (size_t i = 0; i < facts->link_count; i++) {
		const struct link_counts *link = &facts->links[i];
		/* A connection is made anew on purpose too, to confirm rest: no sign by itself. */
		if (link->timeouts + link->garbled == 0)
			continue;
		any = true;
		xml_open(out, "li");
		xml_textf(out,
		          "Link %.64s: of %llu requests %llu had no reply and %llu a garbled one; "
		          "reconnections: %llu.",
		          link->link, (unsigned long long)link->requests,
		          (unsigned long long)link->timeouts, (unsigned long long)link->garbled,
		          (unsigned long long)link->reconnects);
		events_of(out, facts, RUN_EVENT_LINK, link->link);
		xml_close(out);
	}
	if (!any && has_events(facts, RUN_EVENT_LINK, NULL)) {
		xml_open(out, "li");
		xml_text(out, "What the links reported:");
		events_of(out, facts, RUN_EVENT_LINK, NULL);
		xml_close(out);
		any = true;
	}
	return any;
}

static bool samples(struct xml_out *out, const struct run_result *run)
{
	bool any = false;
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++) {
			const struct recorded_test *recorded = run->suites[s].tests[t].recorded;
			if (!recorded || recorded->missed_slots + recorded->lost_replies == 0)
				continue;
			any = true;
			xml_open(out, "li");
			html_test_link(out, s, t, recorded->name);
			xml_textf(out, ": %zu samples that were due were not taken, %zu replies were lost.",
			          recorded->missed_slots, recorded->lost_replies);
			xml_close(out);
		}
	return any;
}

/* ---- instruments ------------------------------------------------------------ */

static bool instruments(struct xml_out *out, const struct run_result *run)
{
	const struct run_facts *facts = &run->facts;
	bool any = false;
	for (size_t i = 0; facts->rig && i < facts->rig->channel_count; i++) {
		const struct channel_info *info = &facts->rig->infos[i];
		if (html_out_of_date(facts, &info->accuracy)) {
			xml_elementf(out, "li", NULL, "The instrument of channel %.64s is out of calibration.",
			             info->name);
			any = true;
		} else if (info->accuracy.given && info->accuracy.calibrated_until_day == 0) {
			xml_elementf(out, "li", NULL,
			             "No calibration date is given for the instrument of channel %.64s.",
			             info->name);
			any = true;
		}
	}
	return any;
}

/* Independent channels that limits rest on and whose limits of error nobody gave. */
static bool without_accuracy(struct xml_out *out, const struct run_result *run)
{
	const struct rig *rig = run->facts.rig;
	bool any = false;
	for (size_t i = 0; rig && i < rig->channel_count; i++) {
		const struct channel_info *info = &rig->infos[i];
		bool judged = false;
		if (rig->channels[i].command || info->evidence != EVIDENCE_INDEPENDENT ||
		    info->accuracy.given || info->name_count || info->unit == unit_one() ||
		    rig->channels[i].device < 0)
			continue;
		for (size_t s = 0; s < run->suite_count && !judged; s++)
			for (size_t t = 0; t < run->suites[s].test_count && !judged; t++)
				for (size_t c = 0; c < run->suites[s].tests[t].check_count; c++)
					judged |= use_channel(run->suites[s].tests[t].checks[c].use) == (int)i;
		if (!judged)
			continue;
		any = true;
		xml_elementf(out, "li", NULL,
		             "Channel %.64s is judged, but the rig gives no limits of error for its "
		             "instrument: its numbers may be worse than their intervals say.",
		             info->name);
	}
	return any;
}

/* ---- on whose word ------------------------------------------------------------ */

/* The bench's own channel of the same quantity, which would have been the better witness. */
static const char *better_witness(const struct rig *rig, int channel)
{
	if (!rig || channel < 0 || (size_t)channel >= rig->channel_count)
		return NULL;
	const struct channel_info *info = &rig->infos[channel];
	if (rig->channels[channel].command || info->name_count || info->unit == unit_one() ||
	    info->evidence == EVIDENCE_INDEPENDENT)
		return NULL;
	for (size_t i = 0; i < rig->channel_count; i++)
		if (rig->infos[i].evidence == EVIDENCE_INDEPENDENT && !rig->channels[i].command &&
		    rig->infos[i].name_count == 0 && rig->infos[i].unit != unit_one() &&
		    dimension_agrees(rig->infos[i].unit->dimension, info->unit->dimension))
			return rig->infos[i].name;
	return NULL;
}

struct words {
	size_t limits, self, better, named;
};

static void count_words(const struct run_result *run, struct words *words)
{
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++)
			for (size_t c = 0; c < run->suites[s].tests[t].check_count; c++) {
				const struct check_result *check = &run->suites[s].tests[t].checks[c];
				bool better = better_witness(run->facts.rig, use_channel(check->use)) != NULL;
				for (size_t m = 0; m < check->metric_count; m++) {
					const struct metric_result *metric = &check->metrics[m];
					words->limits += metric->limit_count;
					if (metric->metric.evidence != EVIDENCE_SELF_REPORTED)
						continue;
					words->self += metric->limit_count;
					if (better)
						words->better += metric->limit_count;
				}
			}
}

static void name_better(struct xml_out *out, const struct run_result *run, struct words *words)
{
	xml_open(out, "ul");
	for (size_t s = 0; s < run->suite_count; s++)
		for (size_t t = 0; t < run->suites[s].test_count; t++)
			for (size_t c = 0; c < run->suites[s].tests[t].check_count; c++) {
				const struct check_result *check = &run->suites[s].tests[t].checks[c];
				int channel = use_channel(check->use);
				const char *better = better_witness(run->facts.rig, channel);
				for (size_t m = 0; better && m < check->metric_count; m++) {
					const struct metric_result *metric = &check->metrics[m];
					if (metric->metric.evidence != EVIDENCE_SELF_REPORTED ||
					    metric->limit_count == 0 || words->named++ >= NAMED_MOST)
						continue;
					xml_open(out, "li");
					html_test_link(out, s, t, run->suites[s].tests[t].test->name);
					xml_textf(out, ": %.40s of %.64s; the bench has %.64s",
					          metric->metric.kind->name, run->facts.rig->infos[channel].name,
					          better);
					xml_close(out);
				}
			}
	if (words->named > NAMED_MOST)
		xml_elementf(out, "li", NULL, "and %zu more", words->named - NAMED_MOST);
	xml_close(out);
}

static bool evidence(struct xml_out *out, const struct run_result *run)
{
	struct words words = {0};
	count_words(run, &words);
	if (words.self == 0)
		return false;
	xml_open(out, "li");
	xml_textf(out, "%zu of %zu limits rest on what the device under test says of itself.",
	          words.self, words.limits);
	if (words.better) {
		xml_textf(out,
		          " For %zu of them the bench has an instrument for the same quantity, which would "
		          "be the better witness:",
		          words.better);
		name_better(out, run, &words);
	} else {
		xml_text(out, " They are about codes, states and times of its own messages.");
	}
	xml_close(out);
	return true;
}

static bool notes(struct xml_out *out, const struct run_facts *facts)
{
	bool any = has_events(facts, RUN_EVENT_NOTE, NULL);
	if (any) {
		xml_open(out, "li");
		xml_text(out, "Noted while the run went on:");
		events_of(out, facts, RUN_EVENT_NOTE, NULL);
		xml_close(out);
	}
	if (facts->events_left_out)
		xml_elementf(out, "li", NULL, "%zu more events are in the journal only.",
		             facts->events_left_out);
	return any || facts->events_left_out > 0;
}

void html_abnormal(struct xml_out *out, const struct run_result *run)
{
	bool any = false;
	xml_open(out, "section");
	xml_element(out, "h2", NULL, "What to know before the good news");
	xml_open(out, "ul");
	any |= run_as_a_whole(out, &run->facts);
	any |= links(out, &run->facts);
	any |= samples(out, run);
	any |= instruments(out, run);
	any |= without_accuracy(out, run);
	any |= evidence(out, run);
	any |= notes(out, &run->facts);
	if (!any)
		xml_element(out, "li", NULL, "Nothing abnormal was recorded.");
	xml_close(out);
	xml_close(out);
}
