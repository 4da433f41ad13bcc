/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Field tables against YAML mappings. A scalar is typed here, by the field it
 * stands in, and nowhere else: `on`, `010` or `1:30` mean different things to
 * different YAML readers, so that they are refused with what to write instead.
 * A binder generated from the tables was rejected: a dozen kinds of field do
 * not pay for a generator.
 */
#include "bind.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Above it a double does not count every whole number. */
static const double WHOLE_MOST = 9007199254740992.0;

/* One value that is being read: where it stands, and its key for messages. */
struct spot {
	const struct binder *binder;
	const struct yaml_node *node;
	const char *label; /* key; NULL: none */
};

__attribute__((format(printf, 2, 3))) static bool refuse(const struct spot *spot,
                                                         const char *format, ...)
{
	char message[512];
	va_list args;
	va_start(args, format);
	(void)vsnprintf(message, sizeof message, format, args);
	va_end(args);
	faults_add(spot->binder->faults, spot->node->at, "%s%s%s", spot->label ? spot->label : "",
	           spot->label ? ": " : "", message);
	return false;
}

/* "a" or "an" before the name of a table. */
static const char *article(const char *name)
{
	return strchr("aeio", name[0]) ? "an" : "a";
}

static const char *shown(const struct spot *spot, char buffer[YAML_SHOWN])
{
	return yaml_shown(spot->node->text, spot->node->length, buffer);
}

/* Puts the value behind `$name` in its place; false after a fault. */
static bool substitute(struct spot *spot)
{
	const struct yaml_node *node = spot->node;
	if (node->kind != YAML_SCALAR || node->quoted || node->length == 0 || node->text[0] != '$')
		return true;
	char buffer[YAML_SHOWN];
	if (!spot->binder->substitute)
		return refuse(spot, "'%s': values by name are known in suites only", shown(spot, buffer));
	size_t before = faults_total(spot->binder->faults);
	node = spot->binder->substitute(spot->binder->context, node);
	if (node) {
		spot->node = node;
		return true;
	}
	if (faults_total(spot->binder->faults) == before)
		(void)refuse(spot, "there is no value '%s'", shown(spot, buffer));
	return false;
}

/* A scalar that is there. */
static bool want_scalar(const struct spot *spot, const char *what)
{
	if (spot->node->kind != YAML_SCALAR)
		return refuse(spot, "expected %s, not %s", what, yaml_kind_name(spot->node->kind));
	if (spot->node->length == 0 && !spot->node->quoted)
		return refuse(spot, "a value is missing: expected %s", what);
	return true;
}

/* A scalar that may be a number: plain, with its value put in place of `$name`. */
static bool want_plain(struct spot *spot, const char *what)
{
	if (!substitute(spot) || !want_scalar(spot, what))
		return false;
	char buffer[YAML_SHOWN];
	if (spot->node->quoted)
		return refuse(spot, "'%s' is in quotes, so it is text: write %s without quotes",
		              shown(spot, buffer), what);
	return true;
}

static bool read_text(struct spot spot, const char **ret)
{
	if (!want_scalar(&spot, "text"))
		return false;
	if (spot.node->length > 1000)
		return refuse(&spot, "the text is longer than 1000 bytes");
	*ret = spot.node->text;
	return true;
}

static bool read_name(struct spot spot, const char **ret)
{
	if (!want_scalar(&spot, "a name"))
		return false;
	char buffer[YAML_SHOWN];
	if (!text_is_name(spot.node->text, spot.node->length))
		return refuse(&spot,
		              "'%s' is not a name: up to 64 letters, digits, '_' and '-', a letter first",
		              shown(&spot, buffer));
	*ret = spot.node->text;
	return true;
}

static bool is_word(const struct yaml_node *node, const char *word)
{
	return strcasecmp(node->text, word) == 0;
}

static bool read_yes_no(struct spot spot, bool *ret)
{
	if (!want_plain(&spot, "yes or no"))
		return false;
	const struct yaml_node *node = spot.node;
	bool yes = strcmp(node->text, "yes") == 0 || strcmp(node->text, "true") == 0;
	if (!yes && strcmp(node->text, "no") != 0 && strcmp(node->text, "false") != 0) {
		char buffer[YAML_SHOWN];
		static const char *const ON[] = {"yes", "true", "on", "y", "1"};
		static const char *const OFF[] = {"no", "false", "off", "n", "0"};
		const char *hint = "expected yes or no";
		for (size_t i = 0; i < FIELD_COUNT(ON); i++)
			if (is_word(node, ON[i]))
				hint = "write yes";
			else if (is_word(node, OFF[i]))
				hint = "write no";
		return refuse(&spot, "'%s' is neither yes nor no: %s", shown(&spot, buffer), hint);
	}
	*ret = yes;
	return true;
}

static bool read_number(struct spot *spot, const char *what, double *ret)
{
	if (!want_plain(spot, what))
		return false;
	struct err err = {0};
	if (number_parse(spot->node->text, spot->node->length, ret, &err) < 0)
		return refuse(spot, "%s", err.message);
	return true;
}

static bool read_integer(struct spot spot, double least, double most, int64_t *ret)
{
	double number;
	char buffer[YAML_SHOWN];
	if (!read_number(&spot, "a whole number", &number))
		return false;
	if (number != floor(number) || fabs(number) > WHOLE_MOST)
		return refuse(&spot, "'%s' is not a whole number", shown(&spot, buffer));
	if (number < least || number > most)
		return refuse(&spot, "must be a whole number between %.0f and %.0f, not %s", least, most,
		              shown(&spot, buffer));
	*ret = (int64_t)number;
	return true;
}

static bool read_quantity(struct spot *spot, const struct unit *bare,
                          const struct dimension *wanted, struct quantity *ret)
{
	if (!want_plain(spot, "a value with its unit"))
		return false;
	struct err err = {0};
	if (quantity_parse(spot->node->text, spot->node->length, bare, wanted, ret, &err) < 0)
		return refuse(spot, "%s", err.message);
	return true;
}

static bool read_duration(struct spot *spot, int64_t *ret_ns)
{
	struct quantity quantity;
	if (!read_quantity(spot, NULL, &DIM_TIME, &quantity))
		return false;
	struct err err = {0};
	if (quantity_ns(quantity, ret_ns, &err) < 0)
		return refuse(spot, "%s", err.message);
	return true;
}

static void list_choices(const char *const *choices, struct text *out)
{
	for (size_t i = 0; choices[i]; i++)
		text_printf(out, "%s%s", i == 0 ? "" : choices[i + 1] ? ", " : " or ", choices[i]);
}

static bool read_choice(struct spot spot, const char *const *choices, int *ret)
{
	if (!substitute(&spot) || !want_scalar(&spot, "one of its words"))
		return false;
	size_t count = 0;
	for (; choices[count]; count++)
		if (strcmp(spot.node->text, choices[count]) == 0) {
			*ret = (int)count;
			return true;
		}
	struct text all;
	text_init(&all, 400);
	list_choices(choices, &all);
	char buffer[YAML_SHOWN];
	const char *nearest = text_nearest(spot.node->text, choices, count);
	if (nearest)
		(void)refuse(&spot, "'%s' is not known here; did you mean '%s'? Expected %s",
		             shown(&spot, buffer), nearest, text_string(&all));
	else
		(void)refuse(&spot, "'%s' is not known here: expected %s", shown(&spot, buffer),
		             text_string(&all));
	text_release(&all);
	return false;
}

bool bind_text(const struct binder *binder, const struct yaml_node *node, const char **ret)
{
	return read_text((struct spot){binder, node, NULL}, ret);
}

bool bind_name(const struct binder *binder, const struct yaml_node *node, const char **ret)
{
	return read_name((struct spot){binder, node, NULL}, ret);
}

bool bind_yes_no(const struct binder *binder, const struct yaml_node *node, bool *ret)
{
	return read_yes_no((struct spot){binder, node, NULL}, ret);
}

bool bind_integer(const struct binder *binder, const struct yaml_node *node, int64_t least,
                  int64_t most, int64_t *ret)
{
	return read_integer((struct spot){binder, node, NULL}, (double)least, (double)most, ret);
}

bool bind_number(const struct binder *binder, const struct yaml_node *node, double *ret)
{
	struct spot spot = {binder, node, NULL};
	return read_number(&spot, "a number", ret);
}

bool bind_duration(const struct binder *binder, const struct yaml_node *node, int64_t *ret_ns)
{
	struct spot spot = {binder, node, NULL};
	return read_duration(&spot, ret_ns);
}

bool bind_quantity(const struct binder *binder, const struct yaml_node *node,
                   const struct unit *bare, const struct dimension *wanted, struct quantity *ret)
{
	struct spot spot = {binder, node, NULL};
	return read_quantity(&spot, bare, wanted, ret);
}

bool bind_expect(const struct binder *binder, const struct yaml_node *node, enum yaml_kind kind,
                 const char *what)
{
	if (node->kind == kind)
		return true;
	bool empty = node->kind == YAML_SCALAR && node->length == 0 && !node->quoted;
	faults_add(binder->faults, node->at, "%s must be %s, not %s", what, yaml_kind_name(kind),
	           empty ? "empty" : yaml_kind_name(node->kind));
	return false;
}

static bool is_bounded(const struct field *field)
{
	return field->least != 0 || field->most != 0;
}

/* The value in the measure of the field's bounds. */
static bool within(const struct spot *spot, const struct field *field, double value)
{
	char bounds[128], buffer[YAML_SHOWN];
	if (is_bounded(field) && (value < field->least || value > field->most))
		return refuse(spot, "must lie %s, not %s", field_bounds_text(field, bounds, sizeof bounds),
		              shown(spot, buffer));
	if ((field->flags & FIELD_POSITIVE) && !(value > 0))
		return refuse(spot, "must be above 0, not %s", shown(spot, buffer));
	return true;
}

static bool store_integer(struct spot spot, const struct field *field, int64_t *target)
{
	bool bounded = is_bounded(field);
	int64_t value;
	if (!read_integer(spot, bounded ? field->least : -WHOLE_MOST,
	                  bounded ? field->most : WHOLE_MOST, &value) ||
	    !within(&spot, field, (double)value))
		return false;
	*target = value;
	return true;
}

static bool store_number(struct spot spot, const struct field *field, double *target)
{
	double value;
	if (!read_number(&spot, "a number", &value) || !within(&spot, field, value))
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
	if (!read_quantity(&spot, bare, wanted, &quantity) ||
	    !within(&spot, field, quantity_si(quantity)))
		return false;
	*target = quantity_si(quantity);
	return true;
}

static bool store_duration(struct spot spot, const struct field *field, int64_t *target)
{
	int64_t ns;
	if (!read_duration(&spot, &ns) || !within(&spot, field, (double)ns))
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
		return read_name(spot, place);
	case FIELD_TEXT:
		return read_text(spot, place);
	case FIELD_YES_NO:
		return read_yes_no(spot, place);
	case FIELD_INTEGER:
		return store_integer(spot, field, place);
	case FIELD_NUMBER:
		return store_number(spot, field, place);
	case FIELD_QUANTITY:
		return store_quantity(spot, field, place);
	case FIELD_DURATION:
		return store_duration(spot, field, place);
	case FIELD_CHOICE:
		return read_choice(spot, field->choices, place);
	default:
		return binder->resolve
		           ? binder->resolve(binder->context, table, field, mapping, node, place)
		           : refuse(&(struct spot){binder, node ? node : mapping, field->key},
		                    "cannot be given in %s %s of this file", article(table->name),
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
	const char *a = article(table->name);
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
		           article(table->name), table->name, field->text);
		good = false;
	}
	struct yaml_node fallback = {
	    .kind = YAML_SCALAR,
	    .at = mapping->at,
	    .text = field->fallback,
	    .length = field->fallback ? strlen(field->fallback) : 0,
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
	(void)snprintf(what, sizeof what, "%s %s", article(table->name), table->name);
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
