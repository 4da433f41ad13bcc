/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `$name` in a suite: what it stands for. A value is a scalar of the file, put
 * in place of the node that names it, so that it is typed by the field it
 * lands in and a fault points at the place where the value is written.
 * Expressions were rejected: a reviewer must see the number that was commanded
 * in the file.
 */
#include <string.h>

#include "loading.h"

void *loading_no_memory(struct loading *l)
{
	l->out_of_memory = true;
	return NULL;
}

static struct value *value_find(struct loading *l, const char *name, size_t length)
{
	for (size_t i = l->value_count; i-- > 0;)
		if (strlen(l->values[i].name) == length && memcmp(l->values[i].name, name, length) == 0)
			return &l->values[i];
	return NULL;
}

static void refuse_unknown(struct loading *l, struct position at, const char *name, size_t length)
{
	const char *names[SUITE_VALUES_MOST + SWEEP_KEYS_MOST];
	char word[65], buffer[YAML_SHOWN];
	for (size_t i = 0; i < l->value_count; i++)
		names[i] = l->values[i].name;
	size_t copied = length < sizeof word ? length : sizeof word - 1;
	memcpy(word, name, copied);
	word[copied] = '\0';
	const char *nearest = text_nearest(word, names, l->value_count);
	(void)yaml_shown(name, length, buffer);
	if (nearest)
		faults_add(l->faults, at, "there is no value '$%s'; did you mean '$%s'?", buffer, nearest);
	else
		faults_add(l->faults, at,
		           "there is no value '$%s': name it in `values` of the suite or in `sweep` of the "
		           "test",
		           buffer);
}

/* The node that stands for a value at a place. */
static const struct yaml_node *value_node(struct loading *l, struct value *value,
                                          struct position at)
{
	value->used = true;
	if (!value->override)
		return value->node;
	/* It has no place in a file: faults point at where it is used. */
	struct yaml_node *node = arena_alloc(l->arena, sizeof *node);
	if (!node)
		return loading_no_memory(l);
	*node = (struct yaml_node){.kind = YAML_SCALAR, .at = at, .text = value->override};
	node->length = strlen(value->override);
	return node;
}

const struct yaml_node *values_substitute(void *context, const struct yaml_node *node)
{
	struct loading *l = context;
	if (node->kind != YAML_SCALAR || node->quoted || node->length == 0 || node->text[0] != '$')
		return node;
	struct value *value = value_find(l, node->text + 1, node->length - 1);
	if (value)
		return value_node(l, value, node->at);
	refuse_unknown(l, node->at, node->text + 1, node->length - 1);
	return NULL;
}

static bool in_name(char c)
{
	return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_' ||
	       c == '-';
}

/*
 * The value named at the begin of `text`: the longest name that is known. A
 * dash ends a name where the whole is none: "$speed-step".
 */
static struct value *value_at(struct loading *l, const char *text, size_t length,
                              size_t *ret_length)
{
	for (size_t at = length; at > 0;) {
		struct value *value = value_find(l, text, at);
		*ret_length = at;
		if (value)
			return value;
		do
			at--;
		while (at > 0 && text[at] != '-');
	}
	*ret_length = length;
	return NULL;
}

/* "" of a value that is no scalar, which is a fault already. */
static const char *value_text(const struct value *value)
{
	if (value->override)
		return value->override;
	return value->node->kind == YAML_SCALAR ? value->node->text : "";
}

const char *values_text(struct loading *l, const struct yaml_node *node)
{
	const char *raw;
	if (!bind_text(&l->binder, node, &raw))
		return NULL;
	struct text out;
	text_init(&out, 4000);
	bool good = true;
	for (const char *c = raw; *c;) {
		size_t length = 0;
		while (*c == '$' && in_name(c[1 + length]))
			length++;
		if (length == 0 || !text_is_name(c + 1, 1)) {
			text_add(&out, c, 1);
			c++;
			continue;
		}
		size_t taken;
		struct value *value = value_at(l, c + 1, length, &taken);
		if (!value) {
			refuse_unknown(l, node->at, c + 1, length);
			good = false;
		} else {
			value->used = true;
			text_puts(&out, value_text(value));
		}
		c += 1 + taken;
	}
	char *copy = good ? arena_strdup(l->arena, text_string(&out)) : NULL;
	if (good && !copy)
		(void)loading_no_memory(l);
	text_release(&out);
	return copy;
}

static void value_load(struct loading *l, const struct yaml_pair *pair, struct override *overrides,
                       size_t override_count)
{
	const char *name, *shown = "";
	if (!bind_name(&l->binder, pair->key, &name))
		return;
	if (bind_expect(&l->binder, pair->value, YAML_SCALAR, "a value of the suite") &&
	    bind_text(&l->binder, pair->value, &shown) && shown[0] == '$')
		faults_add(l->faults, pair->value->at,
		           "'%s' stands for another value: write the number itself", name);
	/* With faults too it is known by its name, else every use would be a fault. */
	struct value *value = &l->values[l->value_count++];
	*value = (struct value){.name = name, .node = pair->value};
	for (size_t i = 0; i < override_count; i++)
		if (strcmp(overrides[i].name, name) == 0) {
			overrides[i].used = true;
			value->override = overrides[i].value;
			shown = overrides[i].value;
		}
	l->suite->values[l->suite->value_count++] =
	    (struct suite_value){name, shown, value->override != NULL};
}

void values_load(struct loading *l, const struct yaml_node *mapping, struct override *overrides,
                 size_t override_count)
{
	l->values = arena_array(l->arena, SUITE_VALUES_MOST + SWEEP_KEYS_MOST, sizeof *l->values);
	l->suite->values = arena_array(l->arena, SUITE_VALUES_MOST, sizeof *l->suite->values);
	if (!l->values || !l->suite->values) {
		(void)loading_no_memory(l);
		return;
	}
	if (!mapping || !bind_expect(&l->binder, mapping, YAML_MAPPING, "'values'"))
		return;
	if (mapping->count > SUITE_VALUES_MOST) {
		faults_add(l->faults, mapping->at, "there are more than %d values", SUITE_VALUES_MOST);
		return;
	}
	for (size_t i = 0; i < mapping->count; i++)
		value_load(l, &mapping->pairs[i], overrides, override_count);
	l->suite_value_count = l->value_count;
}

void overrides_check(struct loading *l, const struct override *overrides, size_t count)
{
	const char *names[SUITE_VALUES_MOST];
	size_t name_count = l->suite->value_count;
	for (size_t i = 0; i < name_count; i++)
		names[i] = l->suite->values[i].name;
	for (size_t i = 0; i < count; i++) {
		if (overrides[i].used)
			continue;
		char buffer[YAML_SHOWN];
		const char *nearest = text_nearest(overrides[i].name, names, name_count);
		(void)yaml_shown(overrides[i].name, strlen(overrides[i].name), buffer);
		if (nearest)
			faults_add(l->faults, (struct position){0},
			           "--set %s: suite %s has no such value; did you mean '%s'?", buffer,
			           l->suite->name, nearest);
		else
			faults_add(l->faults, (struct position){0}, "--set %s: suite %s has no such value",
			           buffer, l->suite->name);
	}
}
