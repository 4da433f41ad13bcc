/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `checks` of a test: each is one kind with its fields, bound by the field
 * table that the kind itself gives, so that a new check needs no line here.
 * What a field names must exist: a channel that is sampled, a mark that a step
 * makes, an attempt of the stimulus. A check on something that nobody records
 * could only ever be inconclusive, and that is known before the bench moves.
 */
#include <math.h>
#include <string.h>

#include "loading.h"

/* A channel that the check may use: sampled, or a command where the field wants one. */
static int use_channel(struct loading *l, const struct field *field, const struct yaml_node *node)
{
	int channel = number_channel_load(l, node);
	if (channel < 0)
		return -1;
	const struct rig_channel *c = &l->rig->channels[channel];
	if (field && (field->flags & FIELD_COMMAND)) {
		if (c->command)
			return channel;
		faults_add(l->faults, node->at, "%s: '%s' is no command of the rig", field->key,
		           c->info.name);
		return -1;
	}
	if (l->sampled[channel] || !l->sample_known)
		return channel;
	faults_add(l->faults, node->at,
	           "channel '%s' is judged but not sampled: add it to `sample` of the test or suite",
	           c->info.name);
	return -1;
}

static bool resolve_channels(struct loading *l, const struct field *field,
                             const struct yaml_node *node, struct int_list *ret)
{
	bool list = node->kind == YAML_SEQUENCE;
	size_t count = list ? node->count : 1;
	if (count == 0) {
		faults_add(l->faults, node->at, "%s: name at least one channel", field->key);
		return false;
	}
	ret->items = arena_array(l->arena, count, sizeof *ret->items);
	if (!ret->items)
		return loading_no_memory(l) != NULL;
	for (size_t i = 0; i < count; i++) {
		int channel = use_channel(l, field, list ? node->items[i] : node);
		if (channel < 0)
			return false;
		ret->items[ret->count++] = channel;
	}
	return true;
}

static bool resolve_mark(struct loading *l, const struct field *field, const struct yaml_node *node,
                         int *ret)
{
	*ret = -1;
	node = values_substitute(l, node);
	if (!node || !bind_expect(&l->binder, node, YAML_SCALAR, "a mark"))
		return false;
	*ret = mark_names_find(&l->test->marks, node->text);
	if (*ret >= 0)
		return true;
	if (!l->stimulus_known)
		return false;
	char buffer[YAML_SHOWN];
	const char *nearest = text_nearest(node->text, l->test->marks.names, l->test->marks.count);
	(void)yaml_shown(node->text, node->length, buffer);
	if (nearest)
		faults_add(l->faults, node->at,
		           "%s: no step of the test makes the mark '%s'; did you mean '%s'?", field->key,
		           buffer, nearest);
	else
		faults_add(l->faults, node->at,
		           "%s: no step of the test makes the mark '%s': write `mark: %s` at one",
		           field->key, buffer, buffer);
	return false;
}

/* The channel whose unit a level takes; -1 after a fault, or where that has its fault already. */
static int level_channel(struct loading *l, const struct field *field, const struct yaml_node *node)
{
	const char *key = field->of ? field->of : "channel";
	const struct yaml_node *name = yaml_get(l->check_map, key);
	if (!name) {
		faults_add(l->faults, node->at, "%s: it is a level of '%s', which is not given", field->key,
		           key);
		return -1;
	}
	if (name->kind == YAML_SEQUENCE && name->count > 0)
		name = name->items[0];
	if (name->kind != YAML_SCALAR)
		return -1;
	name = values_substitute(l, name);
	return name ? rig_channel_find(l->rig, name->text, name->length) : -1;
}

static bool resolve_level(struct loading *l, const struct field *field,
                          const struct yaml_node *node, double *ret)
{
	int channel = level_channel(l, field, node);
	if (channel < 0)
		return false;
	struct step_context context = loading_steps(l);
	return channel_value_load(&context, node, channel, ret) &&
	       level_possible(l, node, channel, *ret);
}

static bool resolve_levels(struct loading *l, const struct field *field,
                           const struct yaml_node *node, double ret[2])
{
	if (node->kind != YAML_SEQUENCE || node->count != 2) {
		faults_add(l->faults, node->at, "%s: expected [LOW, HIGH]", field->key);
		return false;
	}
	if (!resolve_level(l, field, node->items[0], &ret[0]) ||
	    !resolve_level(l, field, node->items[1], &ret[1]))
		return false;
	if (ret[0] < ret[1])
		return true;
	faults_add(l->faults, node->at, "%s: the first level must be below the second", field->key);
	return false;
}

static const struct field WINDOW_FIELDS[] = {
    {.key = "from",
     .kind = FIELD_MARK,
     .offset = offsetof(struct window, from),
     .text = "mark at which it begins; without it the begin of the stimulus"},
    {.key = "after",
     .kind = FIELD_DURATION,
     .most = 3600e9,
     .offset = offsetof(struct window, after_ns),
     .text = "time from the mark's latest instant to the begin of the window"},
    {.key = "for",
     .kind = FIELD_DURATION,
     .flags = FIELD_POSITIVE,
     .most = 3600e9,
     .offset = offsetof(struct window, for_ns),
     .text = "its length; without it to the end of the stimulus"},
};

static const struct field_table WINDOW_TABLE = {"window", "Which samples a check judges.",
                                                WINDOW_FIELDS, FIELD_COUNT(WINDOW_FIELDS)};

const struct field_table *window_fields(void)
{
	return &WINDOW_TABLE;
}

static bool resolve_window(struct loading *l, const struct yaml_node *node, struct window *ret)
{
	if (!bind_mapping(&l->binder, &WINDOW_TABLE, node, ret))
		return false;
	int64_t least_ns, most_ns;
	steps_duration(l->test->stimulus, l->test->stimulus_count, &least_ns, &most_ns);
	if (ret->after_ns + ret->for_ns <= most_ns || !l->stimulus_known)
		return true;
	char a[40], b[40];
	faults_add(l->faults, node->at,
	           "the window ends %s after its mark, and the whole stimulus takes at most %s",
	           duration_text(ret->after_ns + ret->for_ns, a, sizeof a),
	           duration_text(most_ns, b, sizeof b));
	return false;
}

static bool resolve_condition(struct loading *l, const struct yaml_node *node,
                              struct condition *ret)
{
	struct step_context context = loading_steps(l);
	if (!bind_expect(&l->binder, node, YAML_MAPPING, "a condition"))
		return false;
	condition_load(&context, node, NULL, ret);
	const struct yaml_node *channel = yaml_get(node, "channel");
	return ret->channel >= 0 && channel && use_channel(l, NULL, channel) >= 0;
}

static const char *find_attempt(const struct step *steps, size_t count, const char *name,
                                const char **names, size_t *name_count, size_t most)
{
	const char *found = NULL;
	for (size_t i = 0; i < count; i++) {
		const char *inside = NULL;
		if (steps[i].kind == STEP_CYCLE)
			inside =
			    find_attempt(steps[i].steps, steps[i].step_count, name, names, name_count, most);
		else if (steps[i].kind == STEP_ATTEMPT && steps[i].attempt.name) {
			if (*name_count < most)
				names[(*name_count)++] = steps[i].attempt.name;
			if (strcmp(steps[i].attempt.name, name) == 0)
				inside = steps[i].attempt.name;
		}
		found = inside ? inside : found;
	}
	return found;
}

static bool resolve_line(struct loading *l, const struct field *field, const struct yaml_node *node,
                         const char **ret)
{
	const char *names[64];
	size_t count = 0;
	if (!bind_expect(&l->binder, node, YAML_SCALAR, "the name of an attempt"))
		return false;
	*ret = find_attempt(l->test->stimulus, l->test->stimulus_count, node->text, names, &count,
	                    FIELD_COUNT(names));
	if (*ret)
		return true;
	if (!l->stimulus_known)
		return false;
	char buffer[YAML_SHOWN];
	const char *nearest = text_nearest(node->text, names, count);
	(void)yaml_shown(node->text, node->length, buffer);
	faults_add(l->faults, node->at, "%s: the stimulus has no attempt '%s'%s%s%s", field->key,
	           buffer, nearest ? "; did you mean '" : "", nearest ? nearest : "",
	           nearest ? "'?" : "");
	return false;
}

static void store_absent(const struct field *field, void *target)
{
	switch (field->kind) {
	case FIELD_CHANNEL:
	case FIELD_MARK:
		*(int *)target = -1;
		return;
	case FIELD_LEVEL:
		*(double *)target = (double)NAN;
		return;
	case FIELD_LEVELS:
		((double *)target)[0] = ((double *)target)[1] = (double)NAN;
		return;
	case FIELD_WINDOW:
		*(struct window *)target = (struct window){.from = -1};
		return;
	case FIELD_CONDITION:
		*(struct condition *)target = (struct condition){.channel = -1};
		return;
	default:
		return;
	}
}

bool checks_resolve(void *context, const struct field_table *table, const struct field *field,
                    const struct yaml_node *mapping, const struct yaml_node *node, void *target)
{
	struct loading *l = context;
	(void)table;
	(void)mapping;
	store_absent(field, target);
	if (!node)
		return true;
	switch (field->kind) {
	case FIELD_CHANNEL:
		*(int *)target = use_channel(l, field, node);
		return *(int *)target >= 0;
	case FIELD_CHANNELS:
		return resolve_channels(l, field, node, target);
	case FIELD_MARK:
		return resolve_mark(l, field, node, target);
	case FIELD_LEVEL:
		return resolve_level(l, field, node, target);
	case FIELD_LEVELS:
		return resolve_levels(l, field, node, target);
	case FIELD_WINDOW:
		return resolve_window(l, node, target);
	case FIELD_CONDITION:
		return resolve_condition(l, node, target);
	case FIELD_LINE_NAME:
		return resolve_line(l, field, node, target);
	default:
		return true;
	}
}

static const struct check_kind *kind_load(struct loading *l, const struct yaml_node *key)
{
	const struct check_kind *kind = check_find(key->text, key->length);
	if (kind)
		return kind;
	size_t count;
	const struct check_kind *const *table = check_table(&count);
	const char *names[64];
	for (size_t i = 0; i < count && i < FIELD_COUNT(names); i++)
		names[i] = table[i]->name;
	char buffer[YAML_SHOWN];
	const char *nearest =
	    text_nearest(key->text, names, count < FIELD_COUNT(names) ? count : FIELD_COUNT(names));
	(void)yaml_shown(key->text, key->length, buffer);
	faults_add(l->faults, key->at, "unknown check '%s'%s%s%s", buffer,
	           nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : "");
	return NULL;
}

static const struct field CHECK_FIELDS[] = {
    {.key = "limits",
     .kind = FIELD_OWN,
     .flags = FIELD_REQUIRED,
     .text = "limits by metric: {METRIC: {min, max, is, requirement, decision}}"},
};

static const struct field_table CHECK_TABLE = {"check", "What stands in every check.", CHECK_FIELDS,
                                               FIELD_COUNT(CHECK_FIELDS)};

const struct field_table *check_fields(void)
{
	return &CHECK_TABLE;
}

/* The kind's name, and from the second of a kind on a number. */
static const char *check_name(struct loading *l, const struct check_kind *kind)
{
	size_t same = 1;
	for (size_t i = 0; i < l->test->check_count; i++)
		same += l->test->checks[i].kind == kind;
	if (same == 1)
		return kind->name;
	const char *name = arena_printf(l->arena, "%s-%zu", kind->name, same);
	return name ? name : loading_no_memory(l);
}

static void check_load(struct loading *l, const struct yaml_node *item)
{
	if (!bind_expect(&l->binder, item, YAML_MAPPING, "a check"))
		return;
	if (item->count != 1) {
		faults_add(l->faults, item->at,
		           "a check is one kind with its fields: `- step_response: {...}`");
		return;
	}
	const struct check_kind *kind = kind_load(l, item->pairs[0].key);
	const struct yaml_node *fields = tables_resolve(l, item->pairs[0].value);
	if (!kind || !fields || !bind_expect(&l->binder, fields, YAML_MAPPING, kind->name))
		return;
	struct check_use use = {.kind = kind, .at = item->pairs[0].key->at};
	use.params = arena_alloc(l->arena, kind->params_size ? kind->params_size : 1);
	use.name = check_name(l, kind);
	if (!use.params || !use.name) {
		(void)loading_no_memory(l);
		return;
	}
	l->check_map = fields;
	bool good = bind_mapping_beside(&l->binder, kind->fields, &CHECK_TABLE, fields, use.params);
	const struct yaml_node *limits = yaml_get(fields, "limits");
	size_t before = faults_total(l->faults);
	if (limits)
		limits_load(l, limits, &use);
	else
		faults_add(l->faults, use.at, "check %s has no limits, so it could not fail", kind->name);
	good = good && faults_total(l->faults) == before;
	struct err err = {0};
	if (good && kind->verify && kind->verify(use.params, l->rig->infos, &l->rig->machine, &err) < 0)
		faults_add(l->faults, use.at, "%s: %s", kind->name, err.message);
	l->test->checks[l->test->check_count++] = use;
}

void checks_load(struct loading *l, const struct yaml_node *list)
{
	if (!bind_expect(&l->binder, list, YAML_SEQUENCE, "'checks'"))
		return;
	if (list->count == 0)
		faults_add(l->faults, list->at, "a test without checks could not fail: add one");
	l->test->checks = arena_array(l->arena, list->count + 1, sizeof *l->test->checks);
	if (!l->test->checks) {
		(void)loading_no_memory(l);
		return;
	}
	for (size_t i = 0; i < list->count && !l->out_of_memory; i++)
		check_load(l, list->items[i]);
}
