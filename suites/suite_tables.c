/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Values tabled over a sweep: wherever a check has a value, it may have
 *     {at: speed, 500 rpm: 60 ms, 1500 rpm: 120 ms}
 * instead, and the entry of the point at hand takes its place before anything
 * is bound. So limits, targets, bands and windows can all be tables, tables may
 * stand in tables, and no field needs to know. Interpolating between points was
 * rejected: a limit between two written ones is nobody's requirement.
 */
#include <string.h>

#include "loading.h"

static const char table_key[] = "at";

/* The same text but for blanks: "500 rpm", "500rpm". */
static bool same_text(const char *a, const char *b)
{
	while (true) {
		a += strspn(a, " \t");
		b += strspn(b, " \t");
		if (*a != *b)
			return false;
		if (!*a)
			return true;
		a++;
		b++;
	}
}

static const struct sweep_key *swept(const struct loading *l, const char *name)
{
	for (size_t i = 0; l->sweep && i < l->sweep->key_count; i++)
		if (strcmp(l->sweep->keys[i].name, name) == 0)
			return &l->sweep->keys[i];
	return NULL;
}

static const struct yaml_node *refuse_name(struct loading *l, const struct yaml_node *name)
{
	const char *names[SWEEP_KEYS_MOST];
	size_t count = l->sweep ? l->sweep->key_count : 0;
	char buffer[YAML_SHOWN];
	for (size_t i = 0; i < count; i++)
		names[i] = l->sweep->keys[i].name;
	const char *nearest = text_nearest(name->text, names, count);
	(void)yaml_shown(name->text, name->length, buffer);
	if (nearest)
		faults_add(l->faults, name->at, "the test does not sweep over '%s'; did you mean '%s'?",
		           buffer, nearest);
	else
		faults_add(l->faults, name->at,
		           "a table goes over a value that the test sweeps over, and '%s' is none", buffer);
	return NULL;
}

/* The text of an entry's key, with `$name` replaced; NULL after a fault. */
static const char *entry_text(struct loading *l, const struct yaml_node *key)
{
	const struct yaml_node *node = values_substitute(l, key);
	return node ? node->text : NULL;
}

/* Every entry must be a point of the sweep, each once: else a typing error would hide. */
static bool entries_known(struct loading *l, const struct yaml_node *table,
                          const struct sweep_key *key)
{
	bool good = true;
	for (size_t i = 0; i < table->count; i++) {
		const struct yaml_node *node = table->pairs[i].key;
		if (strcmp(node->text, table_key) == 0)
			continue;
		const char *text = entry_text(l, node);
		bool found = false;
		for (size_t k = 0; text && k < key->count; k++)
			found = found || same_text(text, key->shown[k]);
		good = good && text;
		if (!text || found)
			continue;
		char buffer[YAML_SHOWN];
		const char *nearest = text_nearest(text, key->shown, key->count);
		(void)yaml_shown(text, strlen(text), buffer);
		faults_add(l->faults, node->at, "the sweep over %s has no '%s'%s%s%s", key->name, buffer,
		           nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : "");
		good = false;
	}
	return good;
}

/* The entry of the point at hand; NULL after a fault. */
static const struct yaml_node *select_entry(struct loading *l, const struct yaml_node *table)
{
	const struct yaml_node *name = yaml_get(table, table_key);
	if (!bind_expect(&l->binder, name, YAML_SCALAR, "what a table goes over"))
		return NULL;
	const struct sweep_key *key = swept(l, name->text);
	if (!key)
		return refuse_name(l, name);
	if (!entries_known(l, table, key))
		return NULL;
	const char *point = NULL;
	for (size_t i = 0; i < l->test->sweep_count; i++)
		if (strcmp(l->test->sweep[i].name, key->name) == 0)
			point = l->test->sweep[i].shown;
	const struct yaml_node *found = NULL;
	for (size_t i = 0; point && i < table->count; i++) {
		if (strcmp(table->pairs[i].key->text, table_key) == 0)
			continue;
		const char *text = entry_text(l, table->pairs[i].key);
		if (!text || !same_text(text, point))
			continue;
		if (found) {
			faults_add(l->faults, table->pairs[i].key->at, "the table has '%s' twice", point);
			return NULL;
		}
		found = table->pairs[i].value;
	}
	if (!found)
		faults_add(l->faults, table->at, "the table over %s has no entry for %s", key->name,
		           point ? point : "?");
	return found;
}

static bool holds_table(const struct yaml_node *node)
{
	if (node->kind == YAML_MAPPING && yaml_get(node, table_key))
		return true;
	for (size_t i = 0; i < node->count; i++)
		if (holds_table(node->kind == YAML_MAPPING ? node->pairs[i].value : node->items[i]))
			return true;
	return false;
}

const struct yaml_node *tables_resolve(struct loading *l, const struct yaml_node *node)
{
	if (!holds_table(node))
		return node;
	if (node->kind == YAML_MAPPING && yaml_get(node, table_key)) {
		const struct yaml_node *entry = select_entry(l, node);
		return entry ? tables_resolve(l, entry) : NULL;
	}
	struct yaml_node *copy = arena_alloc(l->arena, sizeof *copy);
	if (!copy)
		return loading_no_memory(l);
	*copy = *node;
	if (node->kind == YAML_MAPPING)
		copy->pairs = arena_array(l->arena, node->count, sizeof *copy->pairs);
	else
		copy->items = arena_array(l->arena, node->count, sizeof *copy->items);
	if (node->kind == YAML_MAPPING ? !copy->pairs : !copy->items)
		return loading_no_memory(l);
	for (size_t i = 0; i < node->count; i++) {
		bool mapping = node->kind == YAML_MAPPING;
		const struct yaml_node *part =
		    tables_resolve(l, mapping ? node->pairs[i].value : node->items[i]);
		if (!part)
			return NULL;
		struct yaml_node *kept = arena_alloc(l->arena, sizeof *kept);
		if (!kept)
			return loading_no_memory(l);
		*kept = *part;
		if (mapping)
			copy->pairs[i] = (struct yaml_pair){node->pairs[i].key, kept};
		else
			copy->items[i] = kept;
	}
	return copy;
}
