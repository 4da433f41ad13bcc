/* SPDX-License-Identifier: Apache-2.0 */
/*
 * results.json for programs: everything that the other reports say, as values.
 * "format" is 1; it changes when a member changes its meaning or goes away,
 * and not when one is added. A metric's numbers are in its own `unit`, however
 * the limit was written, so that two runs can be compared. What is not a
 * number (NaN, infinity) is null: JSON has no other word for it.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include <jansson.h>

#include "report_text.h"

/* json_object_set_new takes its value, and fails where that is NULL: one check at the end. */
struct json_out {
	bool failed;
};

static void put(struct json_out *out, json_t *object, const char *key, json_t *value)
{
	if (json_object_set_new(object, key, value) < 0)
		out->failed = true;
}

static void append(struct json_out *out, json_t *array, json_t *value)
{
	if (json_array_append_new(array, value) < 0)
		out->failed = true;
}

static json_t *text_value(const char *string)
{
	struct text text;
	text_init(&text, 0);
	text_add_clean(&text, string ? string : "", string ? strlen(string) : 0);
	json_t *value = text.cut ? NULL : json_string(text_string(&text));
	text_release(&text);
	return value;
}

static void put_text(struct json_out *out, json_t *object, const char *key, const char *text)
{
	put(out, object, key, text_value(text));
}

static void put_number(struct json_out *out, json_t *object, const char *key, double value)
{
	put(out, object, key, isfinite(value) ? json_real(value) : json_null());
}

static void put_integer(struct json_out *out, json_t *object, const char *key, int64_t value)
{
	put(out, object, key, json_integer(value));
}

static void put_bool(struct json_out *out, json_t *object, const char *key, bool value)
{
	put(out, object, key, json_boolean(value));
}

static json_t *totals_value(struct json_out *out, const struct run_totals *totals)
{
	json_t *object = json_object();
	put_integer(out, object, "tests", (int64_t)totals->tests);
	put_integer(out, object, "pass", (int64_t)totals->pass);
	put_integer(out, object, "fail", (int64_t)totals->fail);
	put_integer(out, object, "inconclusive", (int64_t)totals->inconclusive);
	put_integer(out, object, "error", (int64_t)totals->error);
	put_integer(out, object, "skipped", (int64_t)totals->skipped);
	return object;
}

static json_t *identities_value(struct json_out *out, const struct run_facts *facts)
{
	json_t *array = json_array();
	for (size_t i = 0; i < facts->identity_count; i++) {
		json_t *one = json_object();
		put_text(out, one, "device", facts->identities[i].device);
		put_text(out, one, "key", facts->identities[i].key);
		put_text(out, one, "text", facts->identities[i].text);
		append(out, array, one);
	}
	return array;
}

static json_t *links_value(struct json_out *out, const struct run_facts *facts)
{
	json_t *array = json_array();
	for (size_t i = 0; i < facts->link_count; i++) {
		const struct link_counts *link = &facts->links[i];
		json_t *one = json_object();
		put_text(out, one, "link", link->link);
		put_integer(out, one, "requests", (int64_t)link->requests);
		put_integer(out, one, "timeouts", (int64_t)link->timeouts);
		put_integer(out, one, "garbled", (int64_t)link->garbled);
		put_integer(out, one, "exceptions", (int64_t)link->exceptions);
		put_integer(out, one, "reconnects", (int64_t)link->reconnects);
		append(out, array, one);
	}
	return array;
}

static json_t *events_value(struct json_out *out, const struct run_facts *facts)
{
	static const char *const words[] = {"link", "interlock", "rest", "note"};
	json_t *array = json_array();
	for (size_t i = 0; i < facts->event_count; i++) {
		const struct run_event *event = &facts->events[i];
		json_t *one = json_object();
		put_text(out, one, "event", words[event->kind]);
		put_text(out, one, "where", event->where);
		put_text(out, one, "text", event->text);
		put_integer(out, one, "first", event->first_ns);
		put_integer(out, one, "last", event->last_ns);
		put_integer(out, one, "count", (int64_t)event->count);
		append(out, array, one);
	}
	return array;
}

static json_t *facts_value(struct json_out *out, const struct run_facts *facts)
{
	json_t *object = json_object(), *rest = json_object();
	put_text(out, object, "rig", facts->rig ? facts->rig->name : "");
	put_text(out, object, "rig_note", facts->rig ? facts->rig->note : "");
	put_text(out, object, "tool_version", facts->tool_version);
	put_text(out, object, "started", facts->started_utc);
	put_text(out, object, "host", facts->host);
	put_bool(out, object, "rehearsal", facts->rehearsal);
	put(out, object, "defect", facts->defect ? text_value(facts->defect) : json_null());
	char seed[32]; /* as text: many readers keep 53 bits of a number */
	(void)snprintf(seed, sizeof seed, "%llu", (unsigned long long)facts->seed);
	put_text(out, object, "seed", seed);
	put_integer(out, object, "duration_ns", facts->duration_ns);
	put_bool(out, object, "aborted", facts->aborted);
	put_text(out, object, "abort_reason", facts->abort_reason);
	put_bool(out, rest, "needed", facts->rest_was_needed);
	put_bool(out, rest, "confirmed", facts->rest_confirmed);
	put_text(out, rest, "reason", facts->rest_reason);
	put(out, object, "rest", rest);
	put_text(out, object, "realtime", facts->realtime);
	put(out, object, "identities", identities_value(out, facts));
	put(out, object, "links", links_value(out, facts));
	put(out, object, "events", events_value(out, facts));
	return object;
}

static json_t *metric_value(struct json_out *out, const struct metric *metric,
                            const struct limit_result *limit)
{
	json_t *object = json_object();
	put_text(out, object, "name", metric->kind->name);
	put_number(out, object, "value", metric->value);
	put_number(out, object, "low", metric->low);
	put_number(out, object, "high", metric->high);
	put_number(out, object, "uncertainty", metric_uncertainty(metric));
	put_number(out, object, "coverage", metric->coverage);
	put_text(out, object, "unit", metric->unit ? metric->unit->name : "1");
	put_number(out, object, "min", limit ? limit->limit->min : (double)NAN);
	put_number(out, object, "max", limit ? limit->limit->max : (double)NAN);
	put_text(out, object, "evidence", evidence_name(metric->evidence));
	put(out, object, "verdict", limit ? json_string(verdict_name(limit->verdict)) : json_null());
	put_text(out, object, "reason", limit ? limit->reason : "");
	put(out, object, "requirement",
	    limit && limit->limit->requirement ? text_value(limit->limit->requirement) : json_null());
	put_text(out, object, "note", metric->note);
	return object;
}

/* A row for each limit, and one for a metric without: so every row has one verdict at most. */
static json_t *check_value(struct json_out *out, const struct check_result *check)
{
	json_t *object = json_object(), *metrics = json_array();
	put_text(out, object, "name", check->use->name);
	put_text(out, object, "kind", check->use->kind->name);
	put_text(out, object, "verdict", verdict_name(check->verdict));
	for (size_t i = 0; i < check->metric_count; i++) {
		const struct metric_result *metric = &check->metrics[i];
		if (metric->limit_count == 0)
			append(out, metrics, metric_value(out, &metric->metric, NULL));
		for (size_t j = 0; j < metric->limit_count; j++)
			append(out, metrics, metric_value(out, &metric->metric, &metric->limits[j]));
	}
	put(out, object, "metrics", metrics);
	return object;
}

static void put_recorded(struct json_out *out, json_t *object, const struct recorded_test *recorded)
{
	json_t *marks = json_array(), *attempts = json_array();
	put_text(out, object, "end", test_end_name(recorded ? recorded->end : TEST_NOT_STARTED));
	put(out, object, "begin_ns", recorded ? json_integer(recorded->begin_ns) : json_null());
	put(out, object, "end_ns", recorded ? json_integer(recorded->end_ns) : json_null());
	put_integer(out, object, "missed_slots", recorded ? (int64_t)recorded->missed_slots : 0);
	put_integer(out, object, "lost_replies", recorded ? (int64_t)recorded->lost_replies : 0);
	for (size_t i = 0; recorded && i < recorded->mark_count; i++) {
		const struct mark *mark = &recorded->marks[i];
		json_t *one = json_object();
		put_text(out, one, "name", mark->name);
		put(out, one, "earliest", mark->reached ? json_integer(mark->earliest_ns) : json_null());
		put(out, one, "latest", mark->reached ? json_integer(mark->latest_ns) : json_null());
		append(out, marks, one);
	}
	static const char *const words[] = {"accepted", "exception", "no_reply", "not_made"};
	for (size_t i = 0; recorded && i < recorded->outcome_count; i++) {
		const struct outcome *outcome = &recorded->outcomes[i];
		json_t *one = json_object();
		put_text(out, one, "name", outcome->name);
		put_text(out, one, "outcome", (unsigned)outcome->status < 4 ? words[outcome->status] : "?");
		put_integer(out, one, "exception", outcome->exception);
		put_integer(out, one, "expected_exception", outcome->expected_exception);
		append(out, attempts, one);
	}
	put(out, object, "marks", marks);
	put(out, object, "attempts", attempts);
}

static json_t *texts_value(struct json_out *out, const char *const *texts, size_t count)
{
	json_t *array = json_array();
	for (size_t i = 0; i < count; i++)
		append(out, array, text_value(texts[i]));
	return array;
}

static json_t *test_value(struct json_out *out, const struct test_result *result)
{
	const struct test *test = result->test;
	json_t *object = json_object(), *sweep = json_object(), *checks = json_array();
	put_text(out, object, "name", test->name);
	put_text(out, object, "base", test->base ? test->base : test->name);
	put_text(out, object, "title", test->title);
	put(out, object, "requirements",
	    texts_value(out, (const char *const *)test->requirements, test->requirement_count));
	put(out, object, "tags", texts_value(out, (const char *const *)test->tags, test->tag_count));
	for (size_t i = 0; i < test->sweep_count; i++)
		put_text(out, sweep, test->sweep[i].name, test->sweep[i].shown);
	put(out, object, "sweep", sweep);
	put_bool(out, object, "bench", test->bench);
	put_bool(out, object, "selected", test->selected);
	put_text(out, object, "verdict", verdict_name(result->verdict));
	put_text(out, object, "reason", result->reason);
	put_recorded(out, object, result->recorded);
	for (size_t i = 0; i < result->check_count; i++)
		append(out, checks, check_value(out, &result->checks[i]));
	put(out, object, "checks", checks);
	return object;
}

static json_t *suite_value(struct json_out *out, const struct run_result *run, size_t index)
{
	const struct suite_result *result = &run->suites[index];
	const struct suite *suite = result->suite;
	json_t *object = json_object(), *values = json_array(), *expect = json_object();
	json_t *tests = json_array();
	char label[160];
	put_text(out, object, "name", suite_label(run, index, label, sizeof label));
	put_text(out, object, "note", suite->note);
	put_text(out, object, "decision", suite->rule == DECISION_GUARDED ? "guarded" : "simple");
	for (size_t i = 0; i < suite->expect_count; i++)
		put_text(out, expect, suite->expect[i].key, suite->expect[i].text);
	put(out, object, "expect", expect);
	for (size_t i = 0; i < suite->value_count; i++) {
		json_t *one = json_object();
		put_text(out, one, "name", suite->values[i].name);
		put_text(out, one, "value", suite->values[i].shown);
		put_bool(out, one, "overridden", suite->values[i].overridden);
		append(out, values, one);
	}
	put(out, object, "values", values);
	put(out, object, "totals", totals_value(out, &result->totals));
	for (size_t i = 0; i < result->test_count; i++)
		append(out, tests, test_value(out, &result->tests[i]));
	put(out, object, "tests", tests);
	return object;
}

static json_t *run_value(struct json_out *out, const struct run_result *run)
{
	json_t *object = json_object(), *suites = json_array(), *partial = json_object();
	size_t all, selected = run_selected(run, &all);
	put_integer(out, object, "format", 1);
	put_text(out, object, "verdict", verdict_name(run_verdict(run)));
	put_integer(out, object, "exit_code", run->exit_code);
	put(out, object, "totals", totals_value(out, &run->totals));
	put_integer(out, partial, "selected", (int64_t)selected);
	put_integer(out, partial, "of", (int64_t)all);
	put_bool(out, object, "partial", run->facts.partial || selected < all);
	put(out, object, "selection", partial);
	put_bool(out, object, "overridden", run_overridden(run));
	put(out, object, "facts", facts_value(out, &run->facts));
	for (size_t i = 0; i < run->suite_count; i++)
		append(out, suites, suite_value(out, run, i));
	put(out, object, "suites", suites);
	return object;
}

static int results_write(const struct run_result *run, const struct run_folder *folder,
                         struct err *reterr)
{
	struct json_out out = {0};
	json_t *object = run_value(&out, run);
	char *bytes =
	    object && !out.failed ? json_dumps(object, JSON_INDENT(1) | JSON_REAL_PRECISION(15)) : NULL;
	int rc = bytes ? run_folder_write(folder, "results.json", bytes, strlen(bytes), reterr)
	               : err_set(reterr, ERR_NOMEM, "memory ran out while results.json was made");
	free(bytes);
	json_decref(object);
	return rc;
}

const struct report_kind report_results = {"results", results_write};
