/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Values and conditions of channels, as files write them. A value is typed by
 * its channel: by its names, as 0 or 1 of a bit, else as a quantity in the
 * channel's unit. A condition that the channel's coding can never fulfil, or
 * never break, is a fault of the file: it would look like a guard and be none.
 *
 * While a rig is being loaded, a channel that has faults itself has no unit
 * (info.unit NULL); whatever refers to it is passed over without further
 * faults.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "step_kind.h"

int channel_load(const struct step_context *context, const struct yaml_node *node)
{
	const struct rig *rig = context->rig;
	struct binder binder = step_binder(context);
	const char *name;
	if (!bind_name(&binder, node, &name))
		return -1;
	int found = rig_channel_find(rig, name, strlen(name));
	if (found >= 0)
		return found;
	const char *nearest = NULL;
	size_t best = SIZE_MAX;
	for (size_t i = 0; i < rig->channel_count; i++) {
		const char *candidate = rig->channels[i].info.name;
		const char *near = text_nearest(name, &candidate, 1);
		if (near && text_distance(name, near) < best) {
			best = text_distance(name, near);
			nearest = near;
		}
	}
	faults_add(context->faults, node->at, "there is no channel '%s' in the rig%s%s%s", name,
	           nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : "");
	return -1;
}

bool channel_has_number(const struct step_context *context, int channel, struct position at)
{
	const struct rig_channel *c = &context->rig->channels[channel];
	if (!c->info.unit)
		return false;
	if (c->place != PLACE_DERIVED && c->codec.type == CODEC_TEXT) {
		faults_add(context->faults, at, "'%s' is text, not a number", c->info.name);
		return false;
	}
	return true;
}

static bool is_bit(const struct rig_channel *channel)
{
	return channel->place != PLACE_DERIVED && channel->codec.type == CODEC_BIT;
}

/* A name of the channel's values. false with *ret_known false: it is no name at all. */
static bool named_value(const struct step_context *context, const struct yaml_node *node,
                        const struct channel_info *info, bool *ret_known, double *ret_value)
{
	for (size_t i = 0; i < info->name_count; i++)
		if (strcmp(info->value_names[i], node->text) == 0) {
			*ret_value = info->named_values[i];
			return *ret_known = true;
		}
	*ret_known = info->name_count > 0 && text_is_name(node->text, node->length);
	if (!*ret_known)
		return false;
	const char *nearest = text_nearest(node->text, info->value_names, info->name_count);
	struct text all;
	text_init(&all, 300);
	for (size_t i = 0; i < info->name_count; i++)
		text_printf(&all, "%s%s",
		            i == 0                     ? ""
		            : i + 1 < info->name_count ? ", "
		                                       : " or ",
		            info->value_names[i]);
	faults_add(context->faults, node->at, "'%s' is no value of %s, which can be %s%s%s%s",
	           node->text, info->name, text_string(&all), nearest ? "; did you mean '" : "",
	           nearest ? nearest : "", nearest ? "'?" : "");
	text_release(&all);
	return false;
}

bool channel_value_load(const struct step_context *context, const struct yaml_node *node,
                        int channel, double *ret_value)
{
	const struct rig_channel *c = &context->rig->channels[channel];
	struct binder binder = step_binder(context);
	if (!channel_has_number(context, channel, node->at))
		return false;
	if (node->kind == YAML_SCALAR && !node->quoted && node->text[0] == '$' && context->substitute) {
		node = context->substitute(context->substitute_context, node);
		if (!node)
			return false;
	}
	bool known = false;
	if (node->kind == YAML_SCALAR && node->length > 0) {
		if (named_value(context, node, &c->info, &known, ret_value))
			return true;
		if (known)
			return false;
	}
	if (is_bit(c)) {
		if (node->kind == YAML_SCALAR && !node->quoted && node->length == 1 &&
		    (node->text[0] == '0' || node->text[0] == '1')) {
			*ret_value = node->text[0] - '0';
			return true;
		}
		char shown[YAML_SHOWN];
		faults_add(context->faults, node->at, "'%s' is one bit: write 0 or 1, not %s", c->info.name,
		           node->kind == YAML_SCALAR ? yaml_shown(node->text, node->length, shown)
		                                     : yaml_kind_name(node->kind));
		return false;
	}
	struct quantity quantity;
	if (!bind_quantity(&binder, node, c->info.unit, &c->info.unit->dimension, &quantity))
		return false;
	*ret_value = quantity_in(quantity, c->info.unit);
	return true;
}

/* Whether the coding can hold a value of a condition; `is` needs one of its steps. */
static bool coding_holds(const struct step_context *context, int channel, double value, bool exact,
                         struct position at)
{
	const struct rig_channel *c = &context->rig->channels[channel];
	if (c->place == PLACE_DERIVED)
		return true;
	double least, most;
	char shown[96], low[96], high[96];
	codec_range(&c->codec, &least, &most);
	(void)channel_value_text(context->rig, channel, value, shown, sizeof shown);
	if (value < least || value > most) {
		faults_add(context->faults, at, "%s can never be %s: its coding holds %s to %s",
		           c->info.name, shown,
		           channel_value_text(context->rig, channel, least, low, sizeof low),
		           channel_value_text(context->rig, channel, most, high, sizeof high));
		return false;
	}
	double step = codec_resolution(&c->codec);
	double forward = c->codec.reversed ? -value : value;
	double steps = step > 0 ? (forward - c->codec.zero) / step : 0;
	if (exact && fabs(steps - round(steps)) > 1e-6) {
		faults_add(context->faults, at,
		           "%s can never be exactly %s: it comes in steps of %.6g; use `between`",
		           c->info.name, shown, step);
		return false;
	}
	return true;
}

/* clang-format off */
static const struct field CONDITION_ROWS[] = {
	{.key = "channel", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the channel that is looked at"},
	{.key = "is", .kind = FIELD_OWN, .text = "it has this value"},
	{.key = "above", .kind = FIELD_OWN, .text = "it is above this value"},
	{.key = "below", .kind = FIELD_OWN, .text = "it is below this value"},
	{.key = "between", .kind = FIELD_OWN, .text = "[least, most]: it lies between, both included"},
	{.key = "for", .kind = FIELD_DURATION, .offset = offsetof(struct condition, for_ns),
	 .text = "dwell: it holds for at least this long"},
};
/* clang-format on */
static const struct field_table CONDITION = {"condition", "what a channel must be", CONDITION_ROWS,
                                             FIELD_COUNT(CONDITION_ROWS)};

const struct field_table *condition_fields(void)
{
	return &CONDITION;
}

static bool load_bounds(const struct step_context *context, const struct yaml_node *node,
                        struct condition *ret)
{
	if (node->kind != YAML_SEQUENCE || node->count != 2) {
		faults_add(context->faults, node->at,
		           "`between` takes a list of two values: [LEAST, MOST]");
		return false;
	}
	bool good = channel_value_load(context, node->items[0], ret->channel, &ret->a);
	good = channel_value_load(context, node->items[1], ret->channel, &ret->b) && good;
	if (!good)
		return false;
	if (!(ret->a < ret->b)) {
		faults_add(context->faults, node->at,
		           "the first value of `between` must be below the second");
		return false;
	}
	good = coding_holds(context, ret->channel, ret->a, false, node->items[0]->at);
	return coding_holds(context, ret->channel, ret->b, false, node->items[1]->at) && good;
}

static bool load_comparison(const struct step_context *context, const struct yaml_node *mapping,
                            struct condition *ret)
{
	static const char *const KEYS[] = {"is", "above", "below", "between"}; /* as the enum */
	const struct yaml_node *found = NULL;
	for (size_t i = 0; i < FIELD_COUNT(KEYS); i++) {
		const struct yaml_node *node = yaml_get(mapping, KEYS[i]);
		if (node && found) {
			faults_add(context->faults, node->at,
			           "a condition has one of is, above, below and between, not two");
			return false;
		}
		if (node) {
			found = node;
			ret->kind = (enum condition_kind)i;
		}
	}
	if (!found) {
		faults_add(context->faults, mapping->at,
		           "a condition needs one of is, above, below or between");
		return false;
	}
	if (ret->kind == CONDITION_BETWEEN)
		return load_bounds(context, found, ret);
	return channel_value_load(context, found, ret->channel, &ret->a) &&
	       coding_holds(context, ret->channel, ret->a, ret->kind == CONDITION_IS, found->at);
}

void condition_load(const struct step_context *context, const struct yaml_node *mapping,
                    const struct field_table *also, struct condition *ret)
{
	struct binder binder = step_binder(context);
	*ret = (struct condition){.channel = -1};
	const struct yaml_node *dwell = yaml_get(mapping, "for");
	bool good = true;
	if (!also)
		good = bind_mapping(&binder, &CONDITION, mapping, ret);
	else if (dwell)
		good = bind_duration(&binder, dwell, &ret->for_ns);
	const struct yaml_node *channel = yaml_get(mapping, "channel");
	if (!channel && also && mapping->kind == YAML_MAPPING)
		faults_add(context->faults, mapping->at, "the key 'channel' is missing in the %s (%s)",
		           also->name, CONDITION_ROWS[0].text);
	if (!channel)
		return;
	ret->channel = channel_load(context, channel);
	if (ret->channel < 0)
		return;
	if (!channel_has_number(context, ret->channel, channel->at) ||
	    !load_comparison(context, mapping, ret) || !good)
		ret->channel = -1;
}
