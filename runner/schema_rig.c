/* SPDX-License-Identifier: Apache-2.0 */
/* The schema of rig files: the tables of rigs/rig_*.c, and what their own code binds. */
#include <string.h>

#include "model.h"
#include "rig_loader.h"
#include "schema_steps.h"

static json_t *tolerated(const struct field *field)
{
	json_t *value = schema_quantity(field->dimension, false);
	json_t *whole = json_pack("{s:s,s:{s:o,s:o},s:[s],s:b}", "type", "object", "properties",
	                          "value", schema_quantity(field->dimension, false), "tolerance",
	                          schema_quantity(&DIM_NUMBER, false), "required", "value",
	                          "additionalProperties", 0);
	return schema_either(value, whole);
}

static json_t *own(const struct field_table *table, const struct field *field);
static const struct schema_maker MAKER = {own, false};

static json_t *accuracy(void)
{
	return schema_of_table(&MAKER, &RIG_ACCURACY_FIELDS, NULL);
}

static json_t *units(void)
{
	size_t count;
	const struct unit *table = unit_table(&count);
	json_t *list = json_array();
	for (size_t i = 0; i < count; i++)
		(void)json_array_append_new(list, json_string(table[i].name));
	return json_pack("{s:o}", "enum", list);
}

static json_t *span(void)
{
	return schema_either(schema_duration(false), schema_list(schema_duration(false), 2, 2));
}

static json_t *channel_own(const char *key)
{
	static const char *const ADDRESSES[] = {"coil", "discrete_input", "input_register",
	                                        "holding_register"};
	for (size_t i = 0; i < FIELD_COUNT(ADDRESSES); i++)
		if (strcmp(key, ADDRESSES[i]) == 0)
			return schema_integer(0, 65535);
	if (strcmp(key, "identification") == 0)
		return schema_integer(0, 255);
	if (strcmp(key, "bit") == 0)
		return schema_integer(0, 15);
	if (strcmp(key, "mask") == 0)
		return json_pack("{s:s,s:i}", "type", "integer", "minimum", 1);
	if (strcmp(key, "device") == 0 || strcmp(key, "read_back") == 0)
		return schema_name();
	if (strcmp(key, "unit") == 0)
		return units();
	if (strcmp(key, "delay") == 0 || strcmp(key, "takes_effect") == 0)
		return span();
	if (strcmp(key, "accuracy") == 0)
		return accuracy();
	if (strcmp(key, "between") == 0)
		return schema_list(schema_scalar(), 2, 2);
	if (strcmp(key, "names") == 0)
		return json_pack("{s:s,s:o}", "type", "object", "additionalProperties", schema_name());
	if (strcmp(key, "calibrated_until") == 0) /* some readers make a date of it */
		return json_pack("{s:s,s:s}", "type", "string", "pattern", "^[0-9]{4}-[0-9]{2}-[0-9]{2}");
	return schema_scalar();
}

static json_t *derived(void)
{
	json_t *schema = schema_of_table(&MAKER, &RIG_DERIVED_FIELDS, NULL);
	json_t *properties = json_object_get(schema, "properties"), *kinds = json_array();
	size_t count;
	const struct derive_kind *const *table = derive_table(&count);
	for (size_t i = 0; i < count; i++) {
		(void)json_array_append_new(kinds, json_string(table[i]->name));
		for (size_t k = 0; k < DERIVE_INPUTS_MOST && table[i]->inputs[k]; k++)
			(void)json_object_set_new(properties, table[i]->inputs[k], schema_name());
	}
	(void)json_object_set_new(properties, "derive", json_pack("{s:o}", "enum", kinds));
	(void)json_object_set_new(properties, "unit", units());
	(void)json_object_set_new(properties, "offset", schema_scalar());
	return schema;
}

static json_t *channels(void)
{
	static const char *const PLACES[] = {
	    "coil", "discrete_input", "input_register", "holding_register", "identification", NULL};
	json_t *plain = schema_of_table(&MAKER, &RIG_CHANNEL_FIELDS, NULL);
	if (plain)
		schema_exactly_one(plain, PLACES);
	json_t *either = json_pack("{s:{s:s,s:[s]},s:o,s:o}", "if", "type", "object", "required",
	                           "derive", "then", derived(), "else", plain);
	return schema_map(either);
}

static json_t *links(void)
{
	static const char *const KINDS[] = {"tcp", "rtu", NULL};
	json_t *link = schema_of_table(&MAKER, &RIG_LINK_FIELDS, NULL);
	if (link)
		schema_exactly_one(link, KINDS);
	return schema_map(link);
}

static json_t *top_own(const char *key)
{
	if (strcmp(key, "links") == 0)
		return links();
	if (strcmp(key, "devices") == 0)
		return schema_map(schema_of_table(&MAKER, &RIG_DEVICE_FIELDS, NULL));
	if (strcmp(key, "machine") == 0)
		return schema_of_table(&MAKER, &RIG_MACHINE_FIELDS, NULL);
	if (strcmp(key, "channels") == 0)
		return channels();
	if (strcmp(key, "before") == 0)
		return schema_list(schema_condition(&MAKER, &RIG_PRECONDITION_FIELDS), 0, 0);
	if (strcmp(key, "interlocks") == 0)
		return schema_list(schema_ref("condition"), 0, 0);
	if (strcmp(key, "safe_state") == 0)
		return schema_ref("steps");
	if (strcmp(key, "direction") == 0) {
		json_t *one = schema_of_table(&MAKER, &RIG_DIRECTION_FIELDS, NULL);
		json_t *again = json_deep_copy(one);
		return schema_either(one, schema_list(again, 0, 0));
	}
	if (strcmp(key, "attempts") == 0)
		return schema_list(schema_of_table(&MAKER, &RIG_ATTEMPT_FIELDS, NULL), 0, 0);
	if (strcmp(key, "parameters") == 0) /* a file beside the rig file */
		return json_pack("{s:s,s:s}", "type", "string", "pattern", "^[^/]*parameters[.]yaml$");
	if (strcmp(key, "model") == 0)
		return schema_of_table(&MAKER, &RIG_MODEL_FIELDS, NULL);
	return NULL;
}

static json_t *device_own(const char *key)
{
	if (strcmp(key, "identity") == 0)
		return schema_map(schema_name());
	if (strcmp(key, "watchdog") == 0)
		return schema_of_table(&MAKER, &RIG_WATCHDOG_FIELDS, NULL);
	return strcmp(key, "link") == 0 || strcmp(key, "life") == 0 ? schema_name() : NULL;
}

static json_t *rules_own(const char *key)
{
	if (strcmp(key, "arm") == 0 || strcmp(key, "clear") == 0 || strcmp(key, "prepare") == 0 ||
	    strcmp(key, "restore") == 0)
		return schema_ref("steps");
	if (strcmp(key, "tripped") == 0)
		return schema_ref("condition");
	if (strcmp(key, "agree") == 0)
		return schema_list(schema_name(), 1, 0);
	if (strcmp(key, "command") == 0 || strcmp(key, "channel") == 0 || strcmp(key, "device") == 0)
		return schema_name();
	if (strcmp(key, "serves") == 0)
		return schema_map(json_pack("{s:s}", "type", "string"));
	if (strcmp(key, "parameters") == 0)
		return schema_of_table(&MAKER, model_parameters(), NULL);
	return strcmp(key, "at") == 0 ? schema_scalar() : NULL;
}

static json_t *own(const struct field_table *table, const struct field *field)
{
	if (table == &RIG_FIELDS)
		return top_own(field->key);
	if (table == &RIG_CHANNEL_FIELDS)
		return channel_own(field->key);
	if (table == &RIG_DEVICE_FIELDS)
		return device_own(field->key);
	if (table == &RIG_MACHINE_FIELDS && field->dimension)
		return tolerated(field);
	if (table == &RIG_LINK_FIELDS)
		return json_pack("{s:s}", "type", "string");
	if (table == &RIG_ACCURACY_FIELDS || table == model_parameters())
		return schema_scalar();
	if (table == condition_fields())
		return schema_condition_own(field);
	return rules_own(field->key);
}

json_t *schema_rig(void)
{
	json_t *schema = schema_head("rig file of drivetrial", RIG_FIELDS.text);
	json_t *table = schema_of_table(&MAKER, &RIG_FIELDS, NULL);
	json_t *defs = schema_step_defs(false);
	if (!schema || !table || !defs || json_object_update_missing(schema, table) < 0 ||
	    json_object_set(schema, "$defs", defs) < 0) {
		json_decref(schema);
		schema = NULL;
	}
	json_decref(table);
	json_decref(defs);
	return schema;
}
