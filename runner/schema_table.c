/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See schema_table.h. A scalar of these files is typed by its field, so that
 * `2.4` may be a text and `100 ms` a time; a schema sees what an editor's YAML
 * reader made of it. Therefore texts may be numbers, and quantities are texts
 * of a pattern that lists the units of their dimension.
 */
#include "schema_table.h"

#include <string.h>

#include "text.h"

static const char NAME[] = "^[A-Za-z][A-Za-z0-9_-]{0,63}$";
static const char NUMBER[] = "[+-]?(0|[1-9][0-9]*)([.][0-9]+)?([eE][+-]?[0-9]+)?";

json_t *schema_name(void)
{
	return json_pack("{s:s,s:s}", "type", "string", "pattern", NAME);
}

json_t *schema_scalar(void)
{
	return json_pack("{s:[s,s,s]}", "type", "string", "number", "boolean");
}

json_t *schema_ref(const char *name)
{
	return json_pack("{s:s+}", "$ref", "#/$defs/", name);
}

json_t *schema_either(json_t *a, json_t *b)
{
	return json_pack("{s:[o,o]}", "anyOf", a, b);
}

json_t *schema_list(json_t *items, int least, int most)
{
	json_t *list = json_pack("{s:s,s:o,s:i}", "type", "array", "items", items, "minItems", least);
	if (list && most > 0)
		(void)json_object_set_new(list, "maxItems", json_integer(most));
	return list;
}

json_t *schema_map(json_t *values)
{
	return json_pack("{s:s,s:o,s:o}", "type", "object", "propertyNames", schema_name(),
	                 "additionalProperties", values);
}

json_t *schema_head(const char *title, const char *text)
{
	return json_pack("{s:s,s:s,s:s}", "$schema", "https://json-schema.org/draft/2020-12/schema",
	                 "title", title, "description", text);
}

static json_t *or_value(json_t *schema, bool values)
{
	return values ? schema_either(
	                    schema, json_pack("{s:s,s:s}", "type", "string", "pattern", "^[$][A-Za-z]"))
	              : schema;
}

static json_t *bounded(const char *type, double least, double most)
{
	json_t *schema = json_pack("{s:s}", "type", type);
	if (schema && (least != 0 || most != 0)) {
		(void)json_object_set_new(schema, "minimum", json_real(least));
		(void)json_object_set_new(schema, "maximum", json_real(most));
	}
	return schema;
}

json_t *schema_integer(double least, double most)
{
	return bounded("integer", least, most);
}

/* "^NUMBER ?(ms|s)$": units with what a regular expression would take for its own made harmless. */
static json_t *quantity_pattern(const char *number, const struct dimension *dimension)
{
	size_t count;
	const struct unit *units = unit_table(&count);
	struct text pattern;
	bool any = false;
	text_init(&pattern, 0);
	text_printf(&pattern, "^%s *(", number);
	for (size_t i = 0; i < count; i++) {
		if (!dimension_agrees(units[i].dimension, *dimension))
			continue;
		text_puts(&pattern, any ? "|" : "");
		for (const char *c = units[i].name; *c; c++)
			text_printf(&pattern, strchr("()[]{}.*+?^$|\\", *c) ? "[%c]" : "%c", *c);
		any = true;
	}
	text_puts(&pattern, ")$");
	json_t *schema = json_pack("{s:s,s:s}", "type", "string", "pattern", text_string(&pattern));
	text_release(&pattern);
	return schema;
}

/* Exactly one of the keys must be given. */
void schema_exactly_one(json_t *schema, const char *const *keys)
{
	json_t *list = json_array();
	for (; *keys; keys++)
		(void)json_array_append_new(list, json_pack("{s:[s]}", "required", *keys));
	(void)json_object_set_new(schema, "oneOf", list);
}

/* Not 0: looked for ahead of the number. */
json_t *schema_duration_positive(bool values)
{
	return or_value(
	    quantity_pattern(
	        "(?![+]?0+([.]0*)?([eE]|[^0-9.eE]))[+]?(0|[1-9][0-9]*)([.][0-9]+)?([eE][+-]?[0-9]+)?",
	        &DIM_TIME),
	    values);
}

json_t *schema_duration(bool values)
{
	json_t *text = quantity_pattern("[+]?(0|[1-9][0-9]*)([.][0-9]+)?([eE][+-]?[0-9]+)?", &DIM_TIME);
	return or_value(schema_either(text, json_pack("{s:i}", "const", 0)), values);
}

json_t *schema_quantity(const struct dimension *dimension, bool values)
{
	bool plain = !dimension || dimension_agrees(*dimension, DIM_NUMBER);
	json_t *text =
	    dimension ? quantity_pattern(NUMBER, dimension) : json_pack("{s:s}", "type", "string");
	json_t *bare = plain ? json_pack("{s:s}", "type", "number") : json_pack("{s:i}", "const", 0);
	return or_value(schema_either(text, bare), values);
}

static json_t *yes_no(void)
{
	return json_pack("{s:[b,b,s,s,s,s]}", "enum", 1, 0, "yes", "no", "true", "false");
}

static json_t *choices(const struct field *field)
{
	json_t *list = json_array();
	for (size_t i = 0; field->choices && field->choices[i]; i++)
		(void)json_array_append_new(list, json_string(field->choices[i]));
	return json_pack("{s:o}", "enum", list);
}

static json_t *bare_schema(const struct schema_maker *maker, const struct field_table *table,
                           const struct field *field)
{
	bool values = maker->values;
	json_t *schema;
	switch (field->kind) {
	case FIELD_OWN:
		schema = maker->own(table, field);
		return schema ? schema : json_object();
	case FIELD_NAME:
		return schema_name();
	case FIELD_TEXT:
		return schema_scalar();
	case FIELD_YES_NO:
		return or_value(yes_no(), values);
	case FIELD_INTEGER:
		return or_value(schema_integer(field->least, field->most), values);
	case FIELD_NUMBER:
		schema = bounded("number", field->least, field->most);
		if (schema && (field->flags & FIELD_POSITIVE))
			(void)json_object_set_new(schema, "exclusiveMinimum", json_integer(0));
		return or_value(schema, values);
	case FIELD_QUANTITY:
		return schema_quantity(field->dimension, values);
	case FIELD_DURATION:
		return field->flags & FIELD_POSITIVE ? schema_duration_positive(values)
		                                     : schema_duration(values);
	case FIELD_CHOICE:
		return or_value(choices(field), values);
	case FIELD_CHANNEL:
	case FIELD_MARK:
	case FIELD_LINE_NAME:
		return or_value(schema_name(), values);
	case FIELD_CHANNELS:
		return schema_either(schema_name(), schema_list(schema_name(), 1, 0));
	case FIELD_LEVEL:
		return schema_scalar();
	case FIELD_LEVELS:
		return schema_list(schema_scalar(), 2, 2);
	case FIELD_WINDOW:
		return schema_ref("window");
	case FIELD_CONDITION:
		return schema_ref("condition");
	}
	return json_object();
}

json_t *schema_of_field(const struct schema_maker *maker, const struct field_table *table,
                        const struct field *field)
{
	json_t *schema = bare_schema(maker, table, field);
	if (schema && field->text)
		(void)json_object_set_new(schema, "description", json_string(field->text));
	if (schema && field->fallback && field->fallback[0])
		(void)json_object_set_new(schema, "default", json_string(field->fallback));
	return schema;
}

json_t *schema_of_table(const struct schema_maker *maker, const struct field_table *table,
                        const struct field_table *also)
{
	json_t *properties = json_object(), *required = json_array();
	const struct field_table *tables[] = {table, also};
	for (size_t t = 0; t < 2; t++)
		for (size_t i = 0; tables[t] && i < tables[t]->count; i++) {
			const struct field *field = &tables[t]->fields[i];
			(void)json_object_set_new(properties, field->key,
			                          schema_of_field(maker, tables[t], field));
			if (field->flags & FIELD_REQUIRED)
				(void)json_array_append_new(required, json_string(field->key));
		}
	return json_pack("{s:s,s:s,s:o,s:o,s:b}", "type", "object", "description", table->text,
	                 "properties", properties, "required", required, "additionalProperties", 0);
}
