/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Steps in which time passes or is watched: hold, await, silence, cycle, mark.
 * A wait that cannot end, or that waits for nothing, is refused while loading.
 */
#include <stdio.h>
#include <string.h>

#include "step_kind.h"

enum { TIMES_MOST = 100000 };

int step_hold_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (bind_duration(&loader->binder, value, &ret->duration_ns) && ret->duration_ns == 0)
		faults_add(loader->context->faults, value->at,
		           "a hold of zero waits for nothing: give a time or remove the step");
	return 0;
}

/* clang-format off */
static const struct field AWAIT_ROWS[] = {
	{.key = "timeout", .kind = FIELD_DURATION, .flags = FIELD_REQUIRED | FIELD_POSITIVE,
	 .offset = offsetof(struct step, timeout_ns), .text = "how long it may take at most"},
};
const struct field_table STEP_AWAIT_FIELDS = {"await", "a condition, and how long it may take",
                                              AWAIT_ROWS, FIELD_COUNT(AWAIT_ROWS)};

static const struct field SILENCE_ROWS[] = {
	{.key = "device", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "nothing is sent to it"},
	{.key = "for", .kind = FIELD_DURATION, .flags = FIELD_REQUIRED | FIELD_POSITIVE,
	 .offset = offsetof(struct step, duration_ns), .text = "for how long"},
};
const struct field_table STEP_SILENCE_FIELDS = {"silence", "nothing is sent to a device; the connection stays open",
                                                SILENCE_ROWS, FIELD_COUNT(SILENCE_ROWS)};

static const struct field CYCLE_ROWS[] = {
	{.key = "times", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "how often"},
	{.key = "steps", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "what is repeated"},
};
const struct field_table STEP_CYCLE_FIELDS = {"cycle", "steps that are repeated", CYCLE_ROWS,
                                              FIELD_COUNT(CYCLE_ROWS)};

static const struct field MARK_ROWS[] = {
	{.key = "name", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "name of the mark"},
	{.key = "when", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the condition that makes it"},
};
const struct field_table STEP_MARK_FIELDS = {"mark", "names the instant at which a condition becomes true",
                                             MARK_ROWS, FIELD_COUNT(MARK_ROWS)};
/* clang-format on */

int step_await_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (!bind_expect(&loader->binder, value, YAML_MAPPING, "an await"))
		return 0;
	bool good =
	    bind_mapping_beside(&loader->binder, &STEP_AWAIT_FIELDS, condition_fields(), value, ret);
	condition_load(loader->context, value, &STEP_AWAIT_FIELDS, &ret->condition);
	if (good && ret->condition.for_ns >= ret->timeout_ns)
		faults_add(loader->context->faults, value->at,
		           "this await always expires: `for` is not shorter than `timeout`");
	return 0;
}

int step_device(struct step_loader *loader, const struct yaml_node *node)
{
	const struct rig *rig = loader->context->rig;
	const char *name;
	if (!bind_name(&loader->binder, node, &name))
		return -1;
	int device = rig_device_find(rig, name, strlen(name));
	if (device < 0)
		faults_add(loader->context->faults, node->at, "there is no device '%s' in the rig", name);
	return device;
}

/* Whether an interlock is watched without any request to that device. */
static int interlock_elsewhere(struct step_loader *loader, int device, bool *ret_found)
{
	const struct rig *rig = loader->context->rig;
	unsigned char *set = arena_alloc(loader->context->arena, rig->channel_count + 1);
	if (!set)
		return step_no_memory(loader);
	*ret_found = false;
	for (size_t i = 0; i < rig->interlock_count; i++) {
		memset(set, 0, rig->channel_count);
		rig_channel_needs(rig, rig->interlocks[i].condition.channel, set);
		bool elsewhere = true;
		for (size_t j = 0; j < rig->channel_count; j++)
			elsewhere = elsewhere && !(set[j] && rig->channels[j].device == device);
		*ret_found = *ret_found || elsewhere;
	}
	return 0;
}

int step_silence_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	(void)bind_mapping(&loader->binder, &STEP_SILENCE_FIELDS, value, ret);
	const struct yaml_node *device = yaml_get(value, "device");
	ret->device = device ? step_device(loader, device) : -1;
	if (ret->device < 0)
		return 0;
	bool watched = false;
	if (interlock_elsewhere(loader, ret->device, &watched) < 0)
		return -1;
	if (!watched)
		faults_add(loader->context->faults, device->at,
		           "while %s is silent nothing watches the shaft: the rig needs an interlock on a "
		           "channel of another device",
		           loader->context->rig->devices[ret->device].name);
	return 0;
}

int step_cycle_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (!bind_mapping(&loader->binder, &STEP_CYCLE_FIELDS, value, ret))
		return 0;
	int64_t times = 0;
	const struct yaml_node *steps = yaml_get(value, "steps");
	if (bind_integer(&loader->binder, yaml_get(value, "times"), 1, TIMES_MOST, &times))
		ret->times = (int)times;
	int outer = loader->passes;
	loader->passes = ret->times > 1 ? ret->times : outer;
	int rc = step_list_load(loader, steps, &ret->steps, &ret->step_count);
	loader->passes = outer;
	if (rc == 0 && steps->kind == YAML_SEQUENCE && steps->count == 0)
		faults_add(loader->context->faults, steps->at, "a cycle of no steps does nothing");
	return rc;
}

int step_mark_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (!bind_mapping(&loader->binder, &STEP_MARK_FIELDS, value, ret))
		return 0;
	ret->mark = step_mark_enter(loader, yaml_get(value, "name"));
	condition_load(loader->context, yaml_get(value, "when"), NULL, &ret->condition);
	return 0;
}
