/* SPDX-License-Identifier: Apache-2.0 */
/* See schema_steps.h. A step is a mapping with one word of step_rows(), and maybe `mark`. */
#include "schema_steps.h"

#include <string.h>

#include "step_kind.h"

json_t *schema_condition_own(const struct field *field)
{
	if (strcmp(field->key, "channel") == 0)
		return schema_name();
	if (strcmp(field->key, "between") == 0)
		return schema_list(schema_scalar(), 2, 2);
	return schema_scalar();
}

json_t *schema_condition(const struct schema_maker *maker, const struct field_table *table)
{
	static const char *const COMPARISONS[] = {"is", "above", "below", "between", NULL};
	json_t *schema = table ? schema_of_table(maker, table, condition_fields())
	                       : schema_of_table(maker, condition_fields(), NULL);
	if (schema)
		schema_exactly_one(schema, COMPARISONS);
	return schema;
}

static json_t *some_steps(void)
{
	json_t *steps = schema_ref("steps");
	(void)json_object_set_new(steps, "minItems", json_integer(1));
	return steps;
}

static json_t *step_own(const struct field_table *table, const struct field *field)
{
	if (table == condition_fields())
		return schema_condition_own(field);
	if (strcmp(field->key, "device") == 0 || strcmp(field->key, "name") == 0)
		return schema_name();
	if (strcmp(field->key, "steps") == 0)
		return some_steps();
	if (strncmp(field->key, "read_", 5) == 0)
		return schema_integer(0, 65535);
	if (strcmp(field->key, "function") == 0)
		return schema_integer(1, 127);
	if (strcmp(field->key, "times") == 0)
		return schema_either(schema_integer(1, 1e9),
		                     json_pack("{s:s,s:s}", "type", "string", "pattern", "^[$][A-Za-z]"));
	if (strcmp(field->key, "when") == 0)
		return schema_ref("condition");
	if (strcmp(field->key, "write") == 0)
		return json_pack("{s:s,s:o,s:i,s:i}", "type", "object", "additionalProperties",
		                 schema_scalar(), "minProperties", 1, "maxProperties", 1);
	return schema_scalar();
}

static json_t *assignments(void)
{
	json_t *map = schema_map(schema_scalar());
	if (map)
		(void)json_object_set_new(map, "minProperties", json_integer(1));
	return map;
}

/* The mapping or scalar behind the word of a step. */
static json_t *step_value(const struct schema_maker *maker, enum step_kind kind,
                          const struct step_row *row)
{
	if (kind == STEP_SET)
		return assignments();
	if (kind == STEP_HOLD || !row->fields)
		return schema_duration_positive(maker->values);
	json_t *table = kind == STEP_AWAIT ? schema_condition(maker, row->fields)
	                                   : schema_of_table(maker, row->fields, NULL);
	if (table && kind == STEP_RAMP)
		(void)json_object_set_new(table, "additionalProperties", schema_scalar());
	if (table && kind == STEP_MARK) /* on a step of another kind it is a name */
		return schema_either(schema_name(), table);
	return table;
}

static json_t *step(const struct schema_maker *maker)
{
	json_t *properties = json_object(), *words = json_array();
	const struct step_row *rows = step_rows();
	for (int kind = 0; rows[kind].name; kind++) {
		json_t *value = step_value(maker, (enum step_kind)kind, &rows[kind]);
		if (value)
			(void)json_object_set_new(value, "description", json_string(rows[kind].text));
		(void)json_object_set_new(properties, rows[kind].name, value);
		if (kind != STEP_MARK)
			(void)json_array_append_new(words, json_pack("{s:[s]}", "required", rows[kind].name));
	}
	/* A mark of its own is a mapping and stands alone. */
	(void)json_array_append_new(words, json_pack("{s:[s],s:{s:{s:s}},s:i}", "required", "mark",
	                                             "properties", "mark", "type", "object",
	                                             "maxProperties", 1));
	if (!json_object_get(properties, "mark"))
		(void)json_object_set_new(properties, "mark", schema_name());
	return json_pack("{s:s,s:o,s:o,s:i,s:b}", "type", "object", "properties", properties, "oneOf",
	                 words, "maxProperties", 2, "additionalProperties", 0);
}

json_t *schema_step_defs(bool values)
{
	const struct schema_maker maker = {step_own, values};
	return json_pack("{s:o,s:o,s:o}", "condition",
	                 schema_of_table(&maker, condition_fields(), NULL), "step", step(&maker),
	                 "steps", schema_list(schema_ref("step"), 0, 0));
}
