/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Lists of steps: the table of kinds, and what every kind has in common. One
 * grammar serves stimulus, restore, safe state, watchdogs and preparation, so
 * that what brings a bench to rest is read by the code that the tests use; who
 * loads a list says which kinds may stand in it.
 */
#include "step.h"

#include <string.h>

#include "step_kind.h"

/* clang-format off */
static const struct step_row ROWS[] = {
	[STEP_SET] = {"set", "writes commands, in this order", NULL, step_set_load},
	[STEP_RAMP] = {"ramp", "moves a command linearly", &STEP_RAMP_FIELDS, step_ramp_load},
	[STEP_HOLD] = {"hold", "waits", NULL, step_hold_load},
	[STEP_AWAIT] = {"await", "waits for a condition", &STEP_AWAIT_FIELDS, step_await_load},
	[STEP_SILENCE] = {"silence", "sends nothing to a device", &STEP_SILENCE_FIELDS,
	                  step_silence_load},
	[STEP_ATTEMPT] = {"attempt", "makes a request that must be refused", &STEP_ATTEMPT_FIELDS,
	                  step_attempt_load},
	[STEP_CYCLE] = {"cycle", "repeats steps", &STEP_CYCLE_FIELDS, step_cycle_load},
	[STEP_MARK] = {"mark", "names the instant at which a condition becomes true",
	               &STEP_MARK_FIELDS, step_mark_load},
	{0},
};
/* clang-format on */

const struct step_row *step_rows(void)
{
	return ROWS;
}

static const struct yaml_node *substitute(void *context, const struct yaml_node *node)
{
	const struct step_context *steps = context;
	return steps->substitute(steps->substitute_context, node);
}

struct binder step_binder(const struct step_context *context)
{
	return (struct binder){
	    .arena = context->arena,
	    .faults = context->faults,
	    .substitute = context->substitute ? substitute : NULL,
	    .context = (void *)(uintptr_t)context,
	};
}

int step_no_memory(struct step_loader *loader)
{
	return err_set(loader->reterr, ERR_NOMEM, "memory ran out while reading steps");
}

int mark_names_find(const struct mark_names *marks, const char *name)
{
	for (size_t i = 0; i < marks->count; i++)
		if (strcmp(marks->names[i], name) == 0)
			return (int)i;
	return -1;
}

int mark_names_enter(struct mark_names *marks, const char *name)
{
	int known = mark_names_find(marks, name);
	if (known >= 0)
		return known;
	if (marks->count == FIELD_COUNT(marks->names))
		return -1;
	marks->names[marks->count] = name;
	return (int)marks->count++;
}

int step_mark_enter(struct step_loader *loader, const struct yaml_node *node)
{
	struct faults *faults = loader->context->faults;
	struct mark_names *marks = loader->context->marks;
	const char *name;
	if (!bind_name(&loader->binder, node, &name))
		return -1;
	if (!marks) {
		faults_add(faults, node->at, "a mark cannot stand in this list: nothing judges from it");
		return -1;
	}
	if (loader->passes > 1) {
		faults_add(faults, node->at,
		           "the mark '%s' would be made %d times: marks cannot stand in a cycle; "
		           "`repeat` of the test makes it once in each",
		           name, loader->passes);
		return -1;
	}
	if (mark_names_find(marks, name) >= 0) {
		faults_add(faults, node->at, "the mark '%s' is made a second time in this test", name);
		return -1;
	}
	int index = mark_names_enter(marks, name);
	if (index < 0)
		faults_add(faults, node->at, "more than %zu marks in one test", FIELD_COUNT(marks->names));
	return index;
}

static void list_allowed(const struct step_loader *loader, struct text *out)
{
	size_t left = 0;
	for (size_t i = 0; ROWS[i].name; i++)
		left += loader->context->allowed >> i & 1;
	bool first = true;
	for (size_t i = 0; ROWS[i].name; i++) {
		if (!(loader->context->allowed >> i & 1))
			continue;
		left--;
		text_printf(out, "%s%s", first ? "" : left > 0 ? ", " : " or ", ROWS[i].name);
		first = false;
	}
}

static void refuse_kind(const struct step_loader *loader, const struct yaml_node *key, bool known)
{
	const char *names[FIELD_COUNT(ROWS)];
	size_t count = 0;
	for (; ROWS[count].name; count++)
		names[count] = ROWS[count].name;
	struct text allowed;
	text_init(&allowed, 200);
	list_allowed(loader, &allowed);
	char shown[YAML_SHOWN];
	(void)yaml_shown(key->text, key->length, shown);
	const char *nearest = known ? NULL : text_nearest(shown, names, count);
	if (nearest)
		faults_add(loader->context->faults, key->at, "there is no step '%s'; did you mean '%s'?",
		           shown, nearest);
	else
		faults_add(loader->context->faults, key->at, "%s '%s'%s: expected %s",
		           known ? "a step" : "there is no step", shown,
		           known ? " cannot stand in this list" : "", text_string(&allowed));
	text_release(&allowed);
}

static int row_of(const struct yaml_node *key)
{
	for (int i = 0; ROWS[i].name; i++)
		if (strcmp(ROWS[i].name, key->text) == 0)
			return i;
	return -1;
}

/* The pair that says what kind of step it is; NULL after a fault. */
static const struct yaml_pair *kind_pair(const struct step_loader *loader,
                                         const struct yaml_node *item, int *ret_row)
{
	const struct yaml_pair *found = NULL;
	bool good = true;
	for (size_t i = 0; i < item->count; i++) {
		const struct yaml_pair *pair = &item->pairs[i];
		int row = row_of(pair->key);
		if (row == STEP_MARK && pair->value->kind == YAML_SCALAR)
			continue; /* the mark of a step */
		if (row < 0 || !(loader->context->allowed >> row & 1)) {
			refuse_kind(loader, pair->key, row >= 0);
			good = false;
		} else if (found) {
			faults_add(loader->context->faults, pair->key->at,
			           "one step an item: begin '- %s:' on a line of its own", pair->key->text);
			good = false;
		} else {
			found = pair;
			*ret_row = row;
		}
	}
	if (good && !found)
		faults_add(loader->context->faults, item->at, "a step is missing here");
	return good ? found : NULL;
}

static int load_step(struct step_loader *loader, const struct yaml_node *item,
                     struct step *ret_step)
{
	*ret_step = (struct step){
	    .at = item->at, .mark = -1, .device = -1, .wait = true, .condition = {.channel = -1}};
	ret_step->attempt = (struct attempt){.channel = -1, .device = -1};
	if (!bind_expect(&loader->binder, item, YAML_MAPPING, "a step"))
		return 0;
	int row = -1;
	const struct yaml_pair *pair = kind_pair(loader, item, &row);
	if (!pair)
		return 0;
	ret_step->kind = (enum step_kind)row;
	const struct yaml_node *mark = yaml_get(item, "mark");
	if (mark && mark->kind == YAML_SCALAR)
		ret_step->mark = step_mark_enter(loader, mark);
	return ROWS[row].load(loader, pair->value, ret_step);
}

int step_list_load(struct step_loader *loader, const struct yaml_node *list,
                   struct step **ret_steps, size_t *ret_count)
{
	*ret_steps = NULL;
	*ret_count = 0;
	if (!bind_expect(&loader->binder, list, YAML_SEQUENCE, "steps"))
		return 0;
	struct step *steps = arena_array(loader->context->arena, list->count + 1, sizeof *steps);
	if (!steps)
		return step_no_memory(loader);
	for (size_t i = 0; i < list->count; i++)
		if (load_step(loader, list->items[i], &steps[i]) < 0)
			return -1;
	*ret_steps = steps;
	*ret_count = list->count;
	return 0;
}

int steps_load(const struct step_context *context, const struct yaml_node *list,
               struct step **ret_steps, size_t *ret_count, struct err *reterr)
{
	struct step_loader loader = {
	    .context = context, .binder = step_binder(context), .reterr = reterr, .passes = 1};
	size_t before = faults_total(context->faults);
	if (step_list_load(&loader, list, ret_steps, ret_count) < 0)
		return -1;
	if (faults_total(context->faults) != before)
		return 0;
	return steps_check_slew(&loader, *ret_steps, *ret_count);
}
