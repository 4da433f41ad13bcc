/* SPDX-License-Identifier: Apache-2.0 */
/* The schema of suite files: the tables of suites/suite_*.c and of every check. */
#include <string.h>

#include "schema_steps.h"
#include "suite.h"

static json_t *own(const struct field_table *table, const struct field *field);
static const struct schema_maker MAKER = {own, true};

static json_t *texts(void)
{
	return schema_either(schema_scalar(), schema_list(schema_scalar(), 1, 0));
}

static json_t *sample(void)
{
	return schema_either(schema_of_table(&MAKER, sample_fields(), NULL),
	                     schema_list(schema_of_table(&MAKER, sample_fields(), NULL), 1, 0));
}

/* min or max of a metric: a quantity of its shape, or a table by the points of a sweep. */
static json_t *bound_of(enum metric_shape shape)
{
	static const struct dimension *const DIMENSIONS[] = {
	    [METRIC_ANGLE_ELEC] = &DIM_ANGLE_ELEC, [METRIC_ANGLE_MECH] = &DIM_ANGLE_MECH};
	json_t *table = json_pack("{s:s}", "type", "object");
	json_t *percent;
	switch (shape) {
	case METRIC_TIME:
		return schema_either(schema_duration(true), table);
	case METRIC_PERCENT:
		percent = json_pack("{s:s,s:s}", "type", "string", "pattern", "^([$][A-Za-z]|.*%$)");
		return schema_either(schema_either(percent, json_pack("{s:i}", "const", 0)), table);
	case METRIC_ANGLE_ELEC:
	case METRIC_ANGLE_MECH:
		return schema_either(schema_quantity(DIMENSIONS[shape], true), table);
	default:
		return schema_either(schema_scalar(), table);
	}
}

static json_t *limit_of(const struct metric_kind *metric)
{
	static const char *const BOUNDS[] = {"min", "max"};
	json_t *limit = schema_of_table(&MAKER, limit_fields(), metric->options);
	json_t *properties = json_object_get(limit, "properties");
	if (!properties)
		return limit;
	(void)json_object_set_new(limit, "description", json_string(metric->text));
	if (metric->shape == METRIC_YES_NO) {
		(void)json_object_del(properties, "min");
		(void)json_object_del(properties, "max");
		(void)json_object_set_new(limit, "required", json_pack("[s]", "is"));
		return limit;
	}
	(void)json_object_del(properties, "is");
	for (size_t i = 0; i < FIELD_COUNT(BOUNDS); i++)
		(void)json_object_set_new(properties, BOUNDS[i], bound_of(metric->shape));
	(void)json_object_set_new(limit, "anyOf",
	                          json_pack("[{s:[s]},{s:[s]}]", "required", "min", "required", "max"));
	return limit;
}

static json_t *limits_of(const struct check_kind *kind)
{
	json_t *metrics = json_object();
	for (size_t m = 0; m < kind->metric_count; m++) {
		/* A limit, or a table of limits by the points of a sweep. */
		json_t *table = json_pack("{s:s,s:[s]}", "type", "object", "required", "at");
		json_t *limit = schema_either(limit_of(&kind->metrics[m]), table);
		(void)json_object_set_new(metrics, kind->metrics[m].name, limit);
	}
	return json_pack("{s:s,s:o,s:i,s:b}", "type", "object", "properties", metrics, "minProperties",
	                 1, "additionalProperties", 0);
}

static json_t *checks(void)
{
	size_t count;
	const struct check_kind *const *table = check_table(&count);
	json_t *kinds = json_object();
	for (size_t i = 0; i < count; i++) {
		json_t *check = schema_of_table(&MAKER, table[i]->fields, check_fields());
		if (check) {
			(void)json_object_set_new(check, "description", json_string(table[i]->text));
			(void)json_object_set_new(json_object_get(check, "properties"), "limits",
			                          limits_of(table[i]));
		}
		(void)json_object_set_new(kinds, table[i]->name, check);
	}
	json_t *check = json_pack("{s:s,s:o,s:i,s:i,s:b}", "type", "object", "properties", kinds,
	                          "minProperties", 1, "maxProperties", 1, "additionalProperties", 0);
	return schema_list(check, 1, 0);
}

static json_t *limit_own(const struct field *field)
{
	if (strcmp(field->key, "is") == 0)
		return json_pack("{s:[b,b,s,s,s,s]}", "enum", 1, 0, "yes", "no", "true", "false");
	if (strcmp(field->key, "requirement") == 0)
		return texts();
	/* A limit may be a table by the point of a sweep. */
	return json_object();
}

static json_t *own(const struct field_table *table, const struct field *field)
{
	const char *key = field->key;
	if (table == limit_fields())
		return limit_own(field);
	if (strcmp(key, "tests") == 0)
		return schema_list(schema_of_table(&MAKER, test_fields(), NULL), 1, 0);
	if (strcmp(key, "sample") == 0)
		return sample();
	if (strcmp(key, "expect") == 0 || strcmp(key, "values") == 0)
		return schema_map(schema_scalar());
	if (strcmp(key, "sweep") == 0)
		return schema_map(schema_list(schema_scalar(), 1, 0));
	if (strcmp(key, "stimulus") == 0)
		return json_pack("{s:s,s:i}", "$ref", "#/$defs/steps", "minItems", 1);
	if (strcmp(key, "restore") == 0)
		return schema_ref("steps");
	if (strcmp(key, "checks") == 0)
		return checks();
	if (strcmp(key, "requirement") == 0 || strcmp(key, "tags") == 0)
		return texts();
	if (strcmp(key, "channels") == 0)
		return schema_list(schema_name(), 1, 0);
	return NULL;
}

json_t *schema_suite(void)
{
	json_t *schema = schema_head("suite file of drivetrial", suite_fields()->text);
	json_t *table = schema_of_table(&MAKER, suite_fields(), NULL);
	json_t *defs = schema_step_defs(true);
	(void)json_object_set_new(defs, "window", schema_of_table(&MAKER, window_fields(), NULL));
	if (!schema || !table || !defs || json_object_update_missing(schema, table) < 0 ||
	    json_object_set(schema, "$defs", defs) < 0) {
		json_decref(schema);
		schema = NULL;
	}
	json_decref(table);
	json_decref(defs);
	return schema;
}
