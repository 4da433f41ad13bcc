/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Derived channels: the formulas are in checks/derive.c; here the inputs are
 * found, their dimensions asked, and what is known of the result is made from
 * what is known of the inputs. Depth first, so that a derived channel may stand
 * before its inputs and be an input itself; a circle is a fault.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "rig_loader.h"
#include "step_kind.h"

static const double FULL_TURN = 6.283185307179586;

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "derive", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the formula"},
	{.key = "unit", .kind = FIELD_OWN, .text = "unit of the result"},
	{.key = "offset", .kind = FIELD_OWN, .text = "is taken into the result as the formula says"},
};
/* clang-format on */
const struct field_table RIG_DERIVED_FIELDS = {"derived channel",
                                               "a quantity computed from others of the same sample",
                                               ROWS, FIELD_COUNT(ROWS)};

enum state { UNSEEN = 0, OPEN, DONE };

struct work {
	struct rig_loader *loader;
	const struct yaml_node *const *nodes;
	unsigned char *states;
};

static void compute(const struct work *work, int index);

static const struct derive_kind *load_kind(struct rig_loader *loader, const struct yaml_node *node)
{
	const char *name;
	if (!bind_name(&loader->binder, node, &name))
		return NULL;
	const struct derive_kind *kind = derive_find(name, strlen(name));
	if (kind)
		return kind;
	size_t count;
	const struct derive_kind *const *table = derive_table(&count);
	struct text all;
	text_init(&all, 300);
	const char *nearest = NULL;
	for (size_t i = 0; i < count; i++) {
		text_printf(&all, "%s%s", i == 0 ? "" : i + 1 < count ? ", " : " or ", table[i]->name);
		if (!nearest)
			nearest = text_nearest(name, &table[i]->name, 1);
	}
	rig_fault(loader, node, "there is no formula '%s'%s%s%s Expected %s", name,
	          nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : ".",
	          text_string(&all));
	text_release(&all);
	return NULL;
}

static bool load_keys(struct rig_loader *loader, const struct yaml_node *node,
                      const struct derive_kind *kind)
{
	struct field inputs[DERIVE_INPUTS_MOST] = {{0}};
	struct field_table beside = {"derived channel", "", inputs, 0};
	bool good = true;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST && kind->inputs[i]; i++) {
		inputs[beside.count++] = (struct field){.key = kind->inputs[i], .kind = FIELD_OWN};
		if (i < kind->required && !yaml_get(node, kind->inputs[i])) {
			rig_fault(loader, node, "%s needs the key '%s': %s", kind->name, kind->inputs[i],
			          kind->text);
			good = false;
		}
	}
	struct channel_info unused = {0};
	return bind_mapping_beside(&loader->binder, &RIG_DERIVED_FIELDS, &beside, node, &unused) &&
	       good;
}

/* Inputs by name, each computed first. */
static bool load_inputs(const struct work *work, const struct yaml_node *node,
                        struct rig_channel *channel, struct dimension *ret_dimensions,
                        size_t *ret_count)
{
	struct rig_loader *loader = work->loader;
	const struct derive_kind *kind = channel->derivation.kind;
	bool good = true;
	*ret_count = 0;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST && kind->inputs[i]; i++) {
		const struct yaml_node *given = yaml_get(node, kind->inputs[i]);
		if (!given)
			continue;
		int input = channel_load(&loader->steps, given);
		if (input < 0) {
			good = false;
			continue;
		}
		if (work->states[input] == OPEN) {
			rig_fault(loader, given, "'%s' is derived from itself",
			          loader->rig->channels[input].info.name);
			good = false;
			continue;
		}
		compute(work, input);
		if (!channel_has_number(&loader->steps, input, given->at)) {
			good = false;
			continue;
		}
		channel->derivation.inputs[i] = input;
		ret_dimensions[(*ret_count)++] = loader->rig->channels[input].info.unit->dimension;
	}
	return good;
}

static const struct unit *result_unit(struct rig_loader *loader, const struct yaml_node *node,
                                      struct dimension dimension)
{
	const struct yaml_node *given = yaml_get(node, "unit");
	char wanted[96];
	const char *name = dimension_name(dimension, wanted, sizeof wanted);
	const struct unit *unit = given ? rig_unit_load(loader, given) : unit_default(dimension);
	if (!unit && !given)
		rig_fault(loader, node, "give the unit of the result, which is %s %s", text_article(name),
		          name);
	if (!unit || dimension_agrees(unit->dimension, dimension))
		return unit;
	rig_fault(loader, given, "unit: the result is %s %s, which is not given in %s",
	          text_article(name), name, unit->name);
	return NULL;
}

/* What is known of the inputs, at its worst. */
static void inherit(const struct rig *rig, struct rig_channel *channel)
{
	struct channel_info *info = &channel->info;
	info->evidence = EVIDENCE_INDEPENDENT;
	info->delay_least_ns = INT64_MAX;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST; i++) {
		if (channel->derivation.inputs[i] < 0)
			continue;
		const struct channel_info *input = &rig->channels[channel->derivation.inputs[i]].info;
		if (!info->device)
			info->device = input->device;
		if (input->evidence == EVIDENCE_SELF_REPORTED)
			info->evidence = EVIDENCE_SELF_REPORTED;
		if (input->refresh_ns > info->refresh_ns)
			info->refresh_ns = input->refresh_ns;
		if (input->delay_most_ns > info->delay_most_ns)
			info->delay_most_ns = input->delay_most_ns;
		if (input->delay_least_ns < info->delay_least_ns)
			info->delay_least_ns = input->delay_least_ns;
	}
	if (channel->derivation.kind->circular) {
		double turn = FULL_TURN / info->unit->scale;
		info->wraps = fabs(turn - round(turn)) < 1e-9 ? round(turn) : turn;
	}
}

static void load_derived(const struct work *work, const struct yaml_node *node,
                         struct rig_channel *channel)
{
	struct rig_loader *loader = work->loader;
	struct dimension dimensions[DERIVE_INPUTS_MOST], result;
	size_t count;
	channel->derivation.kind = load_kind(loader, yaml_get(node, "derive"));
	if (!channel->derivation.kind || !load_keys(loader, node, channel->derivation.kind) ||
	    !load_inputs(work, node, channel, dimensions, &count))
		return;
	struct err err = {0};
	if (channel->derivation.kind->dimension(dimensions, count, &result, &err) < 0) {
		rig_fault(loader, node, "%s: %s", channel->derivation.kind->name, err.message);
		return;
	}
	const struct unit *unit = result_unit(loader, node, result);
	const struct yaml_node *offset = yaml_get(node, "offset");
	struct quantity quantity;
	if (!unit)
		return;
	if (offset && bind_quantity(&loader->binder, offset, unit, &unit->dimension, &quantity))
		channel->derivation.offset = quantity_si(quantity);
	channel->info.unit = unit;
	inherit(loader->rig, channel);
}

static void compute(const struct work *work, int index)
{
	struct rig_channel *channel = &work->loader->rig->channels[index];
	if (work->states[index] != UNSEEN)
		return;
	work->states[index] = OPEN;
	if (channel->place == PLACE_DERIVED)
		load_derived(work, work->nodes[index], channel);
	work->states[index] = DONE;
}

int rig_derived_load(struct rig_loader *loader, const struct yaml_node *const *nodes)
{
	struct work work = {loader, nodes, arena_alloc(loader->arena, loader->rig->channel_count + 1)};
	if (!work.states)
		return rig_no_memory(loader);
	for (size_t i = 0; i < loader->rig->channel_count; i++)
		compute(&work, (int)i);
	return 0;
}
