/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One test of the file, many test cases: the cross product of a sweep, and
 * repeats. The first key varies slowest, as nested loops in the order of the
 * file would. Names are made of the text of the file, without blanks, so that
 * they stay the same from run to run and a CI server can follow a case.
 */
#include <stdio.h>
#include <string.h>

#include "loading.h"

/* Every unknown key is refused by the field table of the test; here only what is inside. */
static bool sweep_key_load(struct loading *l, const struct yaml_pair *pair,
                           struct sweep_key *ret_key)
{
	if (!bind_name(&l->binder, pair->key, &ret_key->name))
		return false;
	for (size_t i = 0; i < l->suite_value_count; i++)
		if (strcmp(l->values[i].name, ret_key->name) == 0) {
			faults_add(l->faults, pair->key->at,
			           "'%s' is a value of the suite already: give the sweep another name",
			           ret_key->name);
			return false;
		}
	if (!bind_expect(&l->binder, pair->value, YAML_SEQUENCE, "what is swept over"))
		return false;
	size_t count = pair->value->count;
	if (count == 0) {
		faults_add(l->faults, pair->value->at, "a sweep of nothing: give at least one value");
		return false;
	}
	ret_key->items = arena_array(l->arena, count, sizeof(void *));
	ret_key->shown = arena_array(l->arena, count, sizeof *ret_key->shown);
	if (!ret_key->items || !ret_key->shown)
		return loading_no_memory(l) != NULL;
	for (size_t i = 0; i < count; i++) {
		const struct yaml_node *item = values_substitute(l, pair->value->items[i]);
		if (!item || !bind_expect(&l->binder, item, YAML_SCALAR, "a value of a sweep") ||
		    !bind_text(&l->binder, item, &ret_key->shown[i]))
			return false;
		ret_key->items[i] = item;
		for (size_t k = 0; k < i; k++)
			if (strcmp(ret_key->shown[k], ret_key->shown[i]) == 0) {
				faults_add(l->faults, pair->value->items[i]->at, "'%s' is in the sweep twice",
				           ret_key->shown[i]);
				return false;
			}
	}
	ret_key->count = count;
	return true;
}

static bool sweep_keys_load(struct loading *l, const struct yaml_node *node,
                            struct sweep *ret_sweep)
{
	if (!bind_expect(&l->binder, node, YAML_MAPPING, "'sweep'"))
		return false;
	if (node->count == 0) {
		faults_add(l->faults, node->at,
		           "a sweep of nothing: write it as {NAME: [VALUE, VALUE, ...]}");
		return false;
	}
	if (node->count > SWEEP_KEYS_MOST) {
		faults_add(l->faults, node->at, "a sweep goes over at most %d names", SWEEP_KEYS_MOST);
		return false;
	}
	bool good = true;
	for (size_t i = 0; i < node->count; i++)
		good = sweep_key_load(l, &node->pairs[i], &ret_sweep->keys[i]) && good;
	if (!good)
		return false;
	ret_sweep->key_count = node->count;
	for (size_t i = 0; i < node->count; i++) {
		ret_sweep->points *= ret_sweep->keys[i].count;
		if (ret_sweep->points > CASES_MOST) {
			faults_add(l->faults, node->at, "the sweep has more than %d points", CASES_MOST);
			return false;
		}
	}
	return true;
}

bool sweep_load(struct loading *l, const struct yaml_node *test, struct sweep *ret_sweep)
{
	*ret_sweep = (struct sweep){.points = 1, .cases = 1};
	const struct yaml_node *sweep = yaml_get(test, "sweep");
	const struct yaml_node *repeat = yaml_get(test, "repeat");
	if (sweep && !sweep_keys_load(l, sweep, ret_sweep))
		return false;
	ret_sweep->cases = ret_sweep->points;
	if (!repeat)
		return true;
	if (!bind_integer(&l->binder, repeat, 1, CASES_MOST, &ret_sweep->repeat))
		return false;
	ret_sweep->cases *= (size_t)ret_sweep->repeat;
	if (ret_sweep->cases > CASES_MOST) {
		faults_add(l->faults, repeat->at, "the test has more than %d cases", CASES_MOST);
		return false;
	}
	return true;
}

/* What would end or split a name in a list of names. */
static void add_compact(struct text *out, const char *shown)
{
	for (const char *c = shown; *c; c++)
		if (*c != ' ' && *c != '\t')
			text_add(out, strchr("[],=\n*", *c) ? "_" : c, 1);
}

static void name_case(struct text *out, const struct sweep *sweep, const size_t *at,
                      const char *base)
{
	text_puts(out, base);
	for (size_t i = 0; i < sweep->key_count; i++) {
		text_printf(out, "%s%s=", i == 0 ? "[" : ",", sweep->keys[i].name);
		add_compact(out, sweep->keys[i].shown[at[i]]);
	}
	if (sweep->key_count > 0)
		text_puts(out, "]");
}

bool sweep_enter(struct loading *l, const struct sweep *sweep, size_t number, const char *base,
                 struct test *test)
{
	size_t repeats = sweep->repeat > 0 ? (size_t)sweep->repeat : 1;
	size_t point = number / repeats, at[SWEEP_KEYS_MOST] = {0};
	for (size_t i = sweep->key_count; i-- > 0;) {
		at[i] = point % sweep->keys[i].count;
		point /= sweep->keys[i].count;
	}
	test->sweep = arena_array(l->arena, sweep->key_count + 1, sizeof *test->sweep);
	if (!test->sweep)
		return loading_no_memory(l) != NULL;
	for (size_t i = 0; i < sweep->key_count; i++) {
		const struct sweep_key *key = &sweep->keys[i];
		struct value *value = &l->values[l->suite_value_count + i];
		bool used = number > 0 && value->used;
		*value = (struct value){.name = key->name, .node = key->items[at[i]], .used = used};
		test->sweep[i] = (struct sweep_value){key->name, key->shown[at[i]]};
	}
	l->value_count = l->suite_value_count + sweep->key_count;
	test->sweep_count = sweep->key_count;
	struct text name;
	text_init(&name, 1000);
	name_case(&name, sweep, at, base);
	if (sweep->repeat > 0)
		text_printf(&name, "[%zu]", number % repeats + 1);
	test->base = base;
	test->name = arena_strdup(l->arena, text_string(&name));
	text_release(&name);
	return test->name || loading_no_memory(l);
}

void sweep_leave(struct loading *l, const struct sweep *sweep, const struct yaml_node *test)
{
	const struct yaml_node *node = yaml_get(test, "sweep");
	for (size_t i = 0; node && i < sweep->key_count; i++)
		if (!l->values[l->suite_value_count + i].used)
			faults_add(l->faults, node->pairs[i].key->at,
			           "the test never uses '$%s', so every point of the sweep would be the same",
			           sweep->keys[i].name);
	l->value_count = l->suite_value_count;
}
