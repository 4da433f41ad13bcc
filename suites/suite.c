/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A suite file, read against a rig. Loading goes from the top of the file
 * down: values, expectations and samples first, since the tests stand on them.
 * Everything is bound while loading, channels to indices and levels to the
 * units of their channels, so that nothing can turn out to be unknown while
 * the shaft turns.
 */
#include "suite.h"

#include <string.h>

#include "loading.h"

struct suite_head {
	const char *name, *note;
	int decision;
};

static const char *const DECISIONS[] = {"guarded", "simple", NULL};

static const struct field SUITE_FIELDS[] = {
    {.key = "suite",
     .kind = FIELD_NAME,
     .flags = FIELD_REQUIRED,
     .offset = offsetof(struct suite_head, name),
     .text = "name of the suite, for reports"},
    {.key = "note",
     .kind = FIELD_TEXT,
     .offset = offsetof(struct suite_head, note),
     .text = "one line about it, for reports"},
    {.key = "expect",
     .kind = FIELD_OWN,
     .text = "identities that the bench must have, such as {firmware: \"2.4.1\"}; another refuses "
             "the run"},
    {.key = "values",
     .kind = FIELD_OWN,
     .text = "values by name, used as $name; --set overrides them"},
    {.key = "sample",
     .kind = FIELD_OWN,
     .text = "what is read while a test runs: {every, channels}, or a list of them"},
    {.key = "decision",
     .kind = FIELD_CHOICE,
     .fallback = "guarded",
     .choices = DECISIONS,
     .offset = offsetof(struct suite_head, decision),
     .text = "how limits are judged: guarded (the uncertainty counts) or simple (the value alone)"},
    {.key = "tests",
     .kind = FIELD_OWN,
     .flags = FIELD_REQUIRED,
     .text = "the tests, in their order"},
};

static const struct field_table SUITE_TABLE = {"suite", "What is commanded and what is judged.",
                                               SUITE_FIELDS, FIELD_COUNT(SUITE_FIELDS)};

const struct field_table *suite_fields(void)
{
	return &SUITE_TABLE;
}

/* An identity key of any device, or the nearest one for the message. */
static bool identity_known(struct loading *l, const struct yaml_node *key)
{
	const char *names[64];
	size_t count = 0;
	for (size_t d = 0; d < l->rig->device_count; d++)
		for (size_t i = 0; i < l->rig->devices[d].identity_count && count < 64; i++)
			names[count++] = l->rig->devices[d].identity[i].key;
	for (size_t i = 0; i < count; i++)
		if (strcmp(names[i], key->text) == 0)
			return true;
	char buffer[YAML_SHOWN];
	const char *nearest = text_nearest(key->text, names, count);
	(void)yaml_shown(key->text, key->length, buffer);
	if (nearest)
		faults_add(l->faults, key->at,
		           "no device of rig %s has the identity '%s'; did you mean '%s'?", l->rig->name,
		           buffer, nearest);
	else
		faults_add(l->faults, key->at, "no device of rig %s has the identity '%s'", l->rig->name,
		           buffer);
	return false;
}

static void expect_load(struct loading *l, const struct yaml_node *mapping)
{
	if (!mapping || !bind_expect(&l->binder, mapping, YAML_MAPPING, "'expect'"))
		return;
	struct suite *suite = l->suite;
	suite->expect = arena_array(l->arena, mapping->count + 1, sizeof *suite->expect);
	if (!suite->expect) {
		(void)loading_no_memory(l);
		return;
	}
	for (size_t i = 0; i < mapping->count; i++) {
		struct expectation expect = {.key = mapping->pairs[i].key->text,
		                             .at = mapping->pairs[i].value->at};
		const struct yaml_node *value = values_substitute(l, mapping->pairs[i].value);
		if (identity_known(l, mapping->pairs[i].key) && value &&
		    bind_text(&l->binder, value, &expect.text))
			suite->expect[suite->expect_count++] = expect;
	}
}

static int read_tree(struct loading *l, const struct yaml_node *root, struct override *overrides,
                     size_t override_count)
{
	struct suite_head head = {0};
	struct test *bench = NULL;
	size_t bench_count = 0;
	(void)bind_mapping(&l->binder, &SUITE_TABLE, root, &head);
	if (root->kind != YAML_MAPPING)
		return 0;
	l->suite->name = head.name ? head.name : "";
	l->suite->note = head.note ? head.note : "";
	l->suite->rule = (enum decision_rule)head.decision;
	l->rule = l->suite->rule;
	values_load(l, yaml_get(root, "values"), overrides, override_count);
	if (l->out_of_memory)
		return 0;
	overrides_check(l, overrides, override_count);
	expect_load(l, yaml_get(root, "expect"));
	const struct yaml_node *sample = yaml_get(root, "sample");
	l->groups_known = !sample || sample_load(l, sample, &l->groups, &l->group_count);
	if (bench_tests_make(l->rig, l->arena, &bench, &bench_count, l->reterr) < 0)
		return -1;
	const struct yaml_node *tests = yaml_get(root, "tests");
	if (tests)
		tests_load(l, tests, bench, bench_count);
	return 0;
}

int suite_load(const char *path, const struct rig *rig, struct override *overrides,
               size_t override_count, struct arena *arena, struct faults *faults,
               struct suite **ret_suite, struct err *reterr)
{
	*ret_suite = NULL;
	size_t before = faults_total(faults);
	const struct yaml_file *file;
	struct yaml_node *root = NULL;
	if (yaml_load(path, arena, faults, &file, &root, reterr) < 0)
		return -1;
	if (!root)
		return 0;
	struct loading l = {.rig = rig, .arena = arena, .faults = faults, .reterr = reterr};
	l.binder = (struct binder){.arena = arena,
	                           .faults = faults,
	                           .resolve = checks_resolve,
	                           .substitute = values_substitute,
	                           .context = &l};
	l.suite = arena_alloc(arena, sizeof *l.suite);
	if (!l.suite)
		return err_set(reterr, ERR_NOMEM, "memory ran out while loading %s", path);
	l.suite->file = file;
	if (read_tree(&l, root, overrides, override_count) < 0)
		return -1;
	if (l.out_of_memory)
		return err_set(reterr, ERR_NOMEM, "memory ran out while loading %s", path);
	if (faults_total(faults) > before)
		return 0;
	struct selection all = {0};
	if (suite_select(l.suite, &all, reterr) < 0)
		return -1;
	*ret_suite = l.suite;
	return 0;
}
