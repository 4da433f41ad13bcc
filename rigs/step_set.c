/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Commands: set and ramp. The limits of the rig are checked here, long before
 * the link checks them again, so that a suite that would break one is refused
 * while nothing moves.
 *
 * `slew` is judged on the loaded steps, by following what is commanded. Where
 * that is not known (a test that continues) nothing is refused here. A `set`
 * to 0 is always allowed: it is what the safe state does.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "step_kind.h"

static bool within_limits(const struct step_context *context, const struct rig_channel *channel,
                          const struct assignment *assign)
{
	if (assign->value >= channel->least && assign->value <= channel->most)
		return true;
	char value[96], least[96], most[96];
	const struct rig *rig = context->rig;
	faults_add(context->faults, assign->at,
	           "%s = %s is outside what the rig allows: `between` is %s to %s", channel->info.name,
	           channel_value_text(rig, assign->channel, assign->value, value, sizeof value),
	           channel_value_text(rig, assign->channel, channel->least, least, sizeof least),
	           channel_value_text(rig, assign->channel, channel->most, most, sizeof most));
	return false;
}

static bool within_coding(const struct step_context *context, const struct rig_channel *channel,
                          const struct assignment *assign)
{
	uint16_t words[LINK_REGISTERS_MOST] = {0};
	if (codec_encode(&channel->codec, assign->value, words, NULL) == 0)
		return true;
	char value[96], low[96], high[96];
	double least, most;
	codec_range(&channel->codec, &least, &most);
	const struct rig *rig = context->rig;
	faults_add(context->faults, assign->at, "%s = %s does not fit its coding, which holds %s to %s",
	           channel->info.name,
	           channel_value_text(rig, assign->channel, assign->value, value, sizeof value),
	           channel_value_text(rig, assign->channel, least, low, sizeof low),
	           channel_value_text(rig, assign->channel, most, high, sizeof high));
	return false;
}

bool step_assignment(struct step_loader *loader, const struct yaml_pair *pair, bool past_limits,
                     struct assignment *ret)
{
	const struct step_context *context = loader->context;
	*ret = (struct assignment){.channel = channel_load(context, pair->key), .at = pair->value->at};
	if (ret->channel < 0)
		return false;
	const struct rig_channel *channel = &context->rig->channels[ret->channel];
	if (!channel->info.unit)
		return false;
	if (!channel->command) {
		faults_add(context->faults, pair->key->at,
		           "'%s' is not a command: the rig says `command: true` of those that are",
		           channel->info.name);
		return false;
	}
	return channel_value_load(context, pair->value, ret->channel, &ret->value) &&
	       (past_limits || within_limits(context, channel, ret)) &&
	       within_coding(context, channel, ret);
}

int step_set_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (!bind_expect(&loader->binder, value, YAML_MAPPING, "what is set"))
		return 0;
	if (value->count == 0)
		faults_add(loader->context->faults, value->at, "this sets nothing: {CHANNEL: VALUE}");
	ret->assigns = arena_array(loader->context->arena, value->count + 1, sizeof(struct assignment));
	if (!ret->assigns)
		return step_no_memory(loader);
	for (size_t i = 0; i < value->count; i++)
		if (step_assignment(loader, &value->pairs[i], false, &ret->assigns[ret->assign_count]))
			ret->assign_count++;
	return 0;
}

/* clang-format off */
static const struct field RAMP_ROWS[] = {
	{.key = "over", .kind = FIELD_DURATION, .flags = FIELD_REQUIRED | FIELD_POSITIVE,
	 .offset = offsetof(struct step, duration_ns), .text = "how long it takes"},
	{.key = "wait", .kind = FIELD_YES_NO, .fallback = "yes",
	 .offset = offsetof(struct step, wait), .text = "no: the next step begins at once"},
};
const struct field_table STEP_RAMP_FIELDS = {"ramp", "CHANNEL: VALUE, and how long it takes",
                                             RAMP_ROWS, FIELD_COUNT(RAMP_ROWS)};
/* clang-format on */

int step_ramp_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	if (!bind_expect(&loader->binder, value, YAML_MAPPING, "a ramp"))
		return 0;
	const struct yaml_pair *command = NULL;
	bool single = true;
	for (size_t i = 0; i < value->count; i++) {
		const struct yaml_pair *pair = &value->pairs[i];
		if (field_find(&STEP_RAMP_FIELDS, pair->key->text, pair->key->length))
			continue;
		single = !command;
		if (command)
			faults_add(loader->context->faults, pair->key->at,
			           "a ramp moves one command; for a second one write a ramp with `wait: no` "
			           "before it");
		else
			command = pair;
	}
	if (!command) {
		faults_add(loader->context->faults, value->at,
		           "a ramp needs a command: {CHANNEL: VALUE, over: TIME}");
		return 0;
	}
	struct field own = {.key = command->key->text, .kind = FIELD_OWN};
	const struct field_table beside = {"ramp", "", &own, 1};
	if (single)
		(void)bind_mapping_beside(&loader->binder, &STEP_RAMP_FIELDS, &beside, value, ret);
	ret->assigns = arena_alloc(loader->context->arena, sizeof *ret->assigns);
	if (!ret->assigns)
		return step_no_memory(loader);
	if (step_assignment(loader, command, false, ret->assigns))
		ret->assign_count = 1;
	return 0;
}

/* What is commanded on each channel so far; NaN: not known. */
struct follower {
	struct step_loader *loader;
	double *values;
};

/* The rig's safe state, as far as it is loaded, says what a list begins with. */
static void follow_safe_state(const struct follower *follower)
{
	const struct step_context *context = follower->loader->context;
	const struct rig *rig = context->rig;
	for (size_t i = 0; i < rig->channel_count; i++)
		follower->values[i] = (double)NAN;
	if (context->continues)
		return;
	for (size_t i = 0; i < rig->safe_state_count; i++) {
		const struct step *step = &rig->safe_state[i];
		for (size_t j = 0; step->kind == STEP_SET && j < step->assign_count; j++)
			follower->values[step->assigns[j].channel] = step->assigns[j].value;
	}
}

/* duration 0: a set. */
static void follow_change(const struct follower *follower, const struct assignment *assign,
                          int64_t duration_ns)
{
	const struct step_context *context = follower->loader->context;
	const struct rig_channel *channel = &context->rig->channels[assign->channel];
	double from = follower->values[assign->channel], change = fabs(assign->value - from);
	follower->values[assign->channel] = assign->value;
	if (!(channel->slew > 0) || isnan(from) || change == 0)
		return;
	char value[96], start[96];
	const char *name = channel->info.name, *unit = channel->info.unit->name;
	(void)channel_value_text(context->rig, assign->channel, assign->value, value, sizeof value);
	(void)channel_value_text(context->rig, assign->channel, from, start, sizeof start);
	double rate = change / ((double)duration_ns / 1e9);
	if (duration_ns == 0 && assign->value != 0)
		faults_add(context->faults, assign->at,
		           "%s from %s to %s at once: the rig allows %g %s/s (slew); use a ramp over at "
		           "least %.4g s",
		           name, start, value, channel->slew, unit, change / channel->slew);
	else if (duration_ns > 0 && rate > channel->slew * (1 + 1e-9))
		faults_add(context->faults, assign->at,
		           "%s from %s to %s changes by %.4g %s/s, the rig allows %g (slew): ramp over at "
		           "least %.4g s",
		           name, start, value, rate, unit, channel->slew, change / channel->slew);
}

static void follow_steps(const struct follower *follower, const struct step *steps, size_t count)
{
	for (size_t i = 0; i < count; i++) {
		const struct step *step = &steps[i];
		if (step->kind == STEP_SET || step->kind == STEP_RAMP)
			for (size_t j = 0; j < step->assign_count; j++)
				follow_change(follower, &step->assigns[j],
				              step->kind == STEP_RAMP ? step->duration_ns : 0);
		/* Two passes of a cycle show every change that any pass makes. */
		for (int pass = 0; step->kind == STEP_CYCLE && pass < 2 && pass < step->times; pass++)
			follow_steps(follower, step->steps, step->step_count);
	}
}

int steps_check_slew(struct step_loader *loader, const struct step *steps, size_t count)
{
	const struct rig *rig = loader->context->rig;
	bool any = false;
	for (size_t i = 0; i < rig->channel_count; i++)
		any = any || rig->channels[i].slew > 0;
	if (!any)
		return 0;
	struct follower follower = {
	    loader, arena_array(loader->context->arena, rig->channel_count, sizeof *follower.values)};
	if (!follower.values)
		return step_no_memory(loader);
	follow_safe_state(&follower);
	follow_steps(&follower, steps, count);
	return 0;
}
