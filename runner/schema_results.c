/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The schema of results.json, format 1, by hand: reports/report_results.c is no
 * table. Members may be added within a format, so others are allowed; those
 * named here are always there.
 */
#include <string.h>

#include "schema_table.h"

/* Types: b bool, i integer, n number or null, N integer or null, s text, S text or null, o mapping
 * to text, t list of texts, v verdict, V verdict or null, and [x a list, {x a mapping of group x.
 */
static const struct member {
	const char *group, *name, *type;
} MEMBERS[] = {
    {"run", "format", "i"},
    {"run", "verdict", "v"},
    {"run", "exit_code", "i"},
    {"run", "totals", "{totals"},
    {"run", "partial", "b"},
    {"run", "selection", "{selection"},
    {"run", "overridden", "b"},
    {"run", "facts", "{facts"},
    {"run", "suites", "[suite"},
    {"totals", "tests", "i"},
    {"totals", "pass", "i"},
    {"totals", "fail", "i"},
    {"totals", "inconclusive", "i"},
    {"totals", "error", "i"},
    {"totals", "skipped", "i"},
    {"selection", "selected", "i"},
    {"selection", "of", "i"},
    {"facts", "rig", "s"},
    {"facts", "rig_note", "s"},
    {"facts", "tool_version", "s"},
    {"facts", "started", "s"},
    {"facts", "host", "s"},
    {"facts", "rehearsal", "b"},
    {"facts", "defect", "S"},
    {"facts", "seed", "s"},
    {"facts", "duration_ns", "i"},
    {"facts", "aborted", "b"},
    {"facts", "abort_reason", "s"},
    {"facts", "rest", "{rest"},
    {"facts", "realtime", "s"},
    {"facts", "identities", "[identity"},
    {"facts", "links", "[link"},
    {"facts", "events", "[event"},
    {"event", "event", "s"},
    {"event", "where", "s"},
    {"event", "text", "s"},
    {"event", "first", "i"},
    {"event", "last", "i"},
    {"event", "count", "i"},
    {"rest", "needed", "b"},
    {"rest", "confirmed", "b"},
    {"rest", "reason", "s"},
    {"identity", "device", "s"},
    {"identity", "key", "s"},
    {"identity", "text", "s"},
    {"link", "link", "s"},
    {"link", "requests", "i"},
    {"link", "timeouts", "i"},
    {"link", "garbled", "i"},
    {"link", "exceptions", "i"},
    {"link", "reconnects", "i"},
    {"suite", "name", "s"},
    {"suite", "note", "s"},
    {"suite", "decision", "s"},
    {"suite", "expect", "o"},
    {"suite", "values", "[value"},
    {"suite", "totals", "{totals"},
    {"suite", "tests", "[test"},
    {"value", "name", "s"},
    {"value", "value", "s"},
    {"value", "overridden", "b"},
    {"test", "name", "s"},
    {"test", "base", "s"},
    {"test", "title", "s"},
    {"test", "requirements", "t"},
    {"test", "tags", "t"},
    {"test", "sweep", "o"},
    {"test", "bench", "b"},
    {"test", "selected", "b"},
    {"test", "verdict", "v"},
    {"test", "reason", "s"},
    {"test", "end", "s"},
    {"test", "begin_ns", "N"},
    {"test", "end_ns", "N"},
    {"test", "missed_slots", "i"},
    {"test", "lost_replies", "i"},
    {"test", "marks", "[mark"},
    {"test", "attempts", "[attempt"},
    {"test", "checks", "[check"},
    {"mark", "name", "s"},
    {"mark", "earliest", "N"},
    {"mark", "latest", "N"},
    {"attempt", "name", "s"},
    {"attempt", "outcome", "s"},
    {"attempt", "exception", "i"},
    {"attempt", "expected_exception", "i"},
    {"check", "name", "s"},
    {"check", "kind", "s"},
    {"check", "verdict", "v"},
    {"check", "metrics", "[metric"},
    {"metric", "name", "s"},
    {"metric", "value", "n"},
    {"metric", "low", "n"},
    {"metric", "high", "n"},
    {"metric", "uncertainty", "n"},
    {"metric", "coverage", "n"},
    {"metric", "unit", "s"},
    {"metric", "min", "n"},
    {"metric", "max", "n"},
    {"metric", "evidence", "s"},
    {"metric", "verdict", "V"},
    {"metric", "reason", "s"},
    {"metric", "requirement", "S"},
    {"metric", "note", "s"},
};

static json_t *or_null(const char *type)
{
	return json_pack("{s:[s,s]}", "type", type, "null");
}

static json_t *verdict(bool may_be_null)
{
	json_t *words = json_pack("[s,s,s,s,s]", "pass", "fail", "inconclusive", "error", "skipped");
	if (may_be_null)
		(void)json_array_append_new(words, json_null());
	return json_pack("{s:o}", "enum", words);
}

static json_t *type_schema(const char *type)
{
	json_t *text = NULL;
	switch (*type) {
	case 'b':
		return json_pack("{s:s}", "type", "boolean");
	case 'i':
		return json_pack("{s:s}", "type", "integer");
	case 'n':
		return or_null("number");
	case 'N':
		return or_null("integer");
	case 's':
		return json_pack("{s:s}", "type", "string");
	case 'S':
		return or_null("string");
	case 'v':
	case 'V':
		return verdict(*type == 'V');
	case 'o':
		text = json_pack("{s:s}", "type", "string");
		return json_pack("{s:s,s:o}", "type", "object", "additionalProperties", text);
	case 't':
		text = json_pack("{s:s}", "type", "string");
		return schema_list(text, 0, 0);
	case '[':
		return schema_list(schema_ref(type + 1), 0, 0);
	default:
		return schema_ref(type + 1);
	}
}

static json_t *group(const char *name)
{
	json_t *properties = json_object(), *required = json_array();
	for (size_t i = 0; i < FIELD_COUNT(MEMBERS); i++) {
		if (strcmp(MEMBERS[i].group, name) != 0)
			continue;
		(void)json_object_set_new(properties, MEMBERS[i].name, type_schema(MEMBERS[i].type));
		(void)json_array_append_new(required, json_string(MEMBERS[i].name));
	}
	return json_pack("{s:s,s:o,s:o}", "type", "object", "properties", properties, "required",
	                 required);
}

json_t *schema_results(void)
{
	json_t *schema = schema_head("results.json of drivetrial, format 1",
	                             "What a run measured and concluded. Times are nanoseconds since "
	                             "the start of the run; a metric's numbers are in its unit.");
	json_t *run = group("run"), *defs = json_object();
	for (size_t i = 0; i < FIELD_COUNT(MEMBERS); i++)
		if (!json_object_get(defs, MEMBERS[i].group))
			(void)json_object_set_new(defs, MEMBERS[i].group, group(MEMBERS[i].group));
	(void)json_object_set_new(json_object_get(run, "properties"), "format",
	                          json_pack("{s:i}", "const", 1));
	if (!schema || !run || json_object_update(schema, run) < 0 ||
	    json_object_set(schema, "$defs", defs) < 0) {
		json_decref(schema);
		schema = NULL;
	}
	json_decref(run);
	json_decref(defs);
	return schema;
}
