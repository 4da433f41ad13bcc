/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Field tables against YAML mappings. A binder generated from the tables was
 * rejected: a dozen kinds of field do not pay for a generator.
 */
#include "bind.h"

#include <stdio.h>
#include <string.h>

#include "bind_spot.h"

static bool is_bounded(const struct field *field)
{
	return field->least != 0 || field->most != 0;
}

/* The value in the measure of the field's bounds. */
static bool within(const struct spot *spot, const struct field *field, double value)
{
	char bounds[128], buffer[YAML_SHOWN];
	if (is_bounded(field) && (value < field->least || value > field->most))
		return spot_refuse(spot, "must lie %s, not %s",
		                   field_bounds_text(field, bounds, sizeof bounds),
		                   spot_shown(spot, buffer));
	if ((field->flags & FIELD_POSITIVE) && !(value > 0))
		return spot_refuse(spot, "must be above 0, not %s", spot_shown(spot, buffer));
	return true;
}

static bool store_integer(struct spot spot, const struct field *field, int64_t *target)
{
	bool bounded = is_bounded(field);
	int64_t value;
	if (!spot_integer(spot, bounded ? field->least : -WHOLE_MOST,
	                  bounded ? field->most : WHOLE_MOST, &value) ||
	    !within(&spot, field, (double)value))
		return false;
	*target = value;
	return true;
}

static bool store_number(struct spot spot, const struct field *field, double *target)
{
	double value;
	if (!spot_number(&spot, "a number", &value) || !within(&spot, field, value))
		return false;
	*target = value;
	return true;
}

/* A share may be written as 5 % or 0.05; what has a dimension needs its unit. */
static bool store_quantity(struct spot spot, const struct field *field, double *target)
{
	const struct dimension *wanted = field->dimension ? field->dimension : &DIM_NUMBER;
	struct quantity quantity;
	const struct unit *bare = dimension_agrees(*wanted, DIM_NUMBER) ? unit_one() : NULL;
	if (!spot_quantity(&spot, bare, wanted, &quantity) ||
	    !within(&spot, field, quantity_si(quantity)))
		return false;
	*target = quantity_si(quantity);
	return true;
}

static bool store_duration(struct spot spot, const struct field *field, int64_t *target)
{
	int64_t ns;
	if (!spot_duration(&spot, &ns) || !within(&spot, field, (double)ns))
		return false;
	*target = ns;
	return true;
}

/* node NULL: absent (only kinds that `resolve` stores come here then). */
static bool store(const struct binder *binder, const struct field_table *table,
                  const struct field *field, const struct yaml_node *mapping,
                  const struct yaml_node *node, void *target)
{
	void *place = (char *)target + field->offset;
	struct spot spot = {binder, node, field->key};
	switch (field->kind) {
	case FIELD_OWN:
		return true;
	case FIELD_NAME:
		return spot_name(spot, place);
	case FIELD_TEXT:
		return spot_text(spot, place);
	case FIELD_YES_NO:
		return spot_yes_no(spot, place);
	case FIELD_INTEGER:
		return store_integer(spot, field, place);
	case FIELD_NUMBER:
		return store_number(spot, field, place);
	case FIELD_QUANTITY:
		return store_quantity(spot, field, place);
	case FIELD_DURATION:
		return store_duration(spot, field, place);
	case FIELD_CHOICE:
		return spot_choice(spot, field->choices, place);
	default:
		return binder->resolve
		           ? binder->resolve(binder->context, table, field, mapping, node, place)
		           : spot_refuse(&(struct spot){binder, node ? node : mapping, field->key},
		                         "cannot be given in %s %s of this file", text_article(table->name),
		                         table->name);
	}
}

static bool needs_resolve(const struct field *field)
{
	return field->kind >= FIELD_CHANNEL;
}

static bool refuse_unknown(const struct binder *binder, const struct field_table *table,
                           const struct field_table *also, const struct yaml_node *key)
{
	char buffer[YAML_SHOWN];
	const char *nearest = field_nearest(table, key->text, key->length);
	if (!nearest && also)
		nearest = field_nearest(also, key->text, key->length);
	const char *a = text_article(table->name);
	(void)yaml_shown(key->text, key->length, buffer);
	if (strstr(key->text, "\xC2\xA0"))
		faults_add(binder->faults, key->at,
		           "unknown key '%s' in %s %s: there is a no-break space in it", buffer, a,
		           table->name);
	else if (nearest)
		faults_add(binder->faults, key->at, "unknown key '%s' in %s %s; did you mean '%s'?", buffer,
		           a, table->name, nearest);
	else
		faults_add(binder->faults, key->at, "unknown key '%s' in %s %s", buffer, a, table->name);
	return false;
}

static bool known_keys(const struct binder *binder, const struct field_table *table,
                       const struct field_table *also, const struct yaml_node *mapping)
{
	bool good = true;
	for (size_t i = 0; i < mapping->count; i++) {
		const struct yaml_node *key = mapping->pairs[i].key;
		if (!field_find(table, key->text, key->length) &&
		    !(also && field_find(also, key->text, key->length)))
			good = refuse_unknown(binder, table, also, key);
	}
	return good;
}

static bool store_absent(const struct binder *binder, const struct field_table *table,
                         const struct field *field, const struct yaml_node *mapping, void *target)
{
	bool good = true;
	if (field->flags & FIELD_REQUIRED) {
		faults_add(binder->faults, mapping->at, "the key '%s' is missing in %s %s (%s)", field->key,
		           text_article(table->name), table->name, field->text);
		good = false;
	}
	struct yaml_node fallback = {
	    .kind = YAML_SCALAR,
	    .at = mapping->at,
	    .text = field->fallback,
	    .length = field->fallback ? strlen(field->fallback) : 0,
	    .quoted = field->fallback && field->fallback[0] == '\0', /* "" is a text */
	};
	if (field->fallback)
		return store(binder, table, field, mapping, &fallback, target) && good;
	if (needs_resolve(field) && binder->resolve)
		return store(binder, table, field, mapping, NULL, target) && good;
	return good;
}

bool bind_mapping_beside(const struct binder *binder, const struct field_table *table,
                         const struct field_table *also, const struct yaml_node *mapping,
                         void *target)
{
	char what[96];
	(void)snprintf(what, sizeof what, "%s %s", text_article(table->name), table->name);
	if (!bind_expect(binder, mapping, YAML_MAPPING, what))
		return false;
	bool good = known_keys(binder, table, also, mapping);
	for (size_t i = 0; i < table->count; i++) {
		const struct field *field = &table->fields[i];
		const struct yaml_node *node = yaml_get(mapping, field->key);
		if (!node)
			good = store_absent(binder, table, field, mapping, target) && good;
		else
			good = store(binder, table, field, mapping, node, target) && good;
	}
	return good;
}

bool bind_mapping(const struct binder *binder, const struct field_table *table,
                  const struct yaml_node *mapping, void *target)
{
	return bind_mapping_beside(binder, table, NULL, mapping, target);
}
