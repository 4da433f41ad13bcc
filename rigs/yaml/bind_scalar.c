/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Scalars. They are typed here, by the field they stand in, and nowhere else:
 * `on`, `010` or `1:30` mean different things to different YAML readers, so
 * that they are refused with what to write instead.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "bind_spot.h"

bool spot_refuse(const struct spot *spot, const char *format, ...)
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

const char *spot_shown(const struct spot *spot, char buffer[YAML_SHOWN])
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
		return spot_refuse(spot, "'%s': values by name are known in suites only",
		                   spot_shown(spot, buffer));
	size_t before = faults_total(spot->binder->faults);
	node = spot->binder->substitute(spot->binder->context, node);
	if (node) {
		spot->node = node;
		return true;
	}
	if (faults_total(spot->binder->faults) == before)
		(void)spot_refuse(spot, "there is no value '%s'", spot_shown(spot, buffer));
	return false;
}

/* A scalar that is there. */
static bool want_scalar(const struct spot *spot, const char *what)
{
	if (spot->node->kind != YAML_SCALAR)
		return spot_refuse(spot, "expected %s, not %s", what, yaml_kind_name(spot->node->kind));
	if (spot->node->length == 0 && !spot->node->quoted)
		return spot_refuse(spot, "a value is missing: expected %s", what);
	return true;
}

/* A scalar that may be a number: plain, with its value put in place of `$name`. */
static bool want_plain(struct spot *spot, const char *what)
{
	if (!substitute(spot) || !want_scalar(spot, what))
		return false;
	char buffer[YAML_SHOWN];
	if (spot->node->quoted)
		return spot_refuse(spot, "'%s' is in quotes, so it is text: write %s without quotes",
		                   spot_shown(spot, buffer), what);
	return true;
}

bool spot_text(struct spot spot, const char **ret)
{
	if (!want_scalar(&spot, "text"))
		return false;
	if (spot.node->length > 1000)
		return spot_refuse(&spot, "the text is longer than 1000 bytes");
	*ret = spot.node->text;
	return true;
}

bool spot_name(struct spot spot, const char **ret)
{
	if (!want_scalar(&spot, "a name"))
		return false;
	char buffer[YAML_SHOWN];
	if (!text_is_name(spot.node->text, spot.node->length))
		return spot_refuse(
		    &spot, "'%s' is not a name: up to 64 letters, digits, '_' and '-', a letter first",
		    spot_shown(&spot, buffer));
	*ret = spot.node->text;
	return true;
}

static bool is_word(const struct yaml_node *node, const char *word)
{
	return strcasecmp(node->text, word) == 0;
}

bool spot_yes_no(struct spot spot, bool *ret)
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
		return spot_refuse(&spot, "'%s' is neither yes nor no: %s", spot_shown(&spot, buffer),
		                   hint);
	}
	*ret = yes;
	return true;
}

bool spot_number(struct spot *spot, const char *what, double *ret)
{
	if (!want_plain(spot, what))
		return false;
	struct err err = {0};
	if (number_parse(spot->node->text, spot->node->length, ret, &err) < 0)
		return spot_refuse(spot, "%s", err.message);
	return true;
}

bool spot_integer(struct spot spot, double least, double most, int64_t *ret)
{
	double number;
	char buffer[YAML_SHOWN];
	if (!spot_number(&spot, "a whole number", &number))
		return false;
	if (number != floor(number) || fabs(number) > WHOLE_MOST)
		return spot_refuse(&spot, "'%s' is not a whole number", spot_shown(&spot, buffer));
	if (number < least || number > most)
		return spot_refuse(&spot, "expected a whole number between %.0f and %.0f, not %s", least,
		                   most, spot_shown(&spot, buffer));
	*ret = (int64_t)number;
	return true;
}

bool spot_quantity(struct spot *spot, const struct unit *bare, const struct dimension *wanted,
                   struct quantity *ret)
{
	if (!want_plain(spot, "a value with its unit"))
		return false;
	struct err err = {0};
	if (quantity_parse(spot->node->text, spot->node->length, bare, wanted, ret, &err) < 0)
		return spot_refuse(spot, "%s", err.message);
	return true;
}

bool spot_duration(struct spot *spot, int64_t *ret_ns)
{
	struct quantity quantity;
	if (!spot_quantity(spot, NULL, &DIM_TIME, &quantity))
		return false;
	struct err err = {0};
	if (quantity_ns(quantity, ret_ns, &err) < 0)
		return spot_refuse(spot, "%s", err.message);
	return true;
}

static void list_choices(const char *const *choices, struct text *out)
{
	for (size_t i = 0; choices[i]; i++)
		text_printf(out, "%s%s", i == 0 ? "" : choices[i + 1] ? ", " : " or ", choices[i]);
}

bool spot_choice(struct spot spot, const char *const *choices, int *ret)
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
		(void)spot_refuse(&spot, "'%s' is not known here; did you mean '%s'? Expected %s",
		                  spot_shown(&spot, buffer), nearest, text_string(&all));
	else
		(void)spot_refuse(&spot, "'%s' is not known here: expected %s", spot_shown(&spot, buffer),
		                  text_string(&all));
	text_release(&all);
	return false;
}

bool bind_text(const struct binder *binder, const struct yaml_node *node, const char **ret)
{
	return spot_text((struct spot){binder, node, NULL}, ret);
}

bool bind_name(const struct binder *binder, const struct yaml_node *node, const char **ret)
{
	return spot_name((struct spot){binder, node, NULL}, ret);
}

bool bind_yes_no(const struct binder *binder, const struct yaml_node *node, bool *ret)
{
	return spot_yes_no((struct spot){binder, node, NULL}, ret);
}

bool bind_integer(const struct binder *binder, const struct yaml_node *node, int64_t least,
                  int64_t most, int64_t *ret)
{
	return spot_integer((struct spot){binder, node, NULL}, (double)least, (double)most, ret);
}

bool bind_number(const struct binder *binder, const struct yaml_node *node, double *ret)
{
	struct spot spot = {binder, node, NULL};
	return spot_number(&spot, "a number", ret);
}

bool bind_duration(const struct binder *binder, const struct yaml_node *node, int64_t *ret_ns)
{
	struct spot spot = {binder, node, NULL};
	return spot_duration(&spot, ret_ns);
}

bool bind_quantity(const struct binder *binder, const struct yaml_node *node,
                   const struct unit *bare, const struct dimension *wanted, struct quantity *ret)
{
	struct spot spot = {binder, node, NULL};
	return spot_quantity(&spot, bare, wanted, ret);
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
