/* SPDX-License-Identifier: Apache-2.0 */
/*
 * `sample`: what is read while a test runs, and how often. A channel stands in
 * one group only, since it is read at one interval.
 */
#include <math.h>
#include <string.h>

#include "loading.h"

/* A poll every 100 us is beyond what any Modbus link answers. */
#define EVERY_LEAST_NS 100000

static const struct field SAMPLE_FIELDS[] = {
    {.key = "every",
     .kind = FIELD_OWN,
     .flags = FIELD_REQUIRED,
     .dimension = &DIM_TIME,
     .least = EVERY_LEAST_NS,
     .most = 60e9,
     .text = "interval between samples, or `fastest`: as fast as the link allows"},
    {.key = "channels",
     .kind = FIELD_OWN,
     .flags = FIELD_REQUIRED,
     .text = "channels that are read, derived ones too"},
    {.key = "decimate",
     .kind = FIELD_INTEGER,
     .least = 1,
     .most = 1000000,
     .fallback = "1",
     .offset = offsetof(struct sample_group, decimate),
     .text = "of so many rows one is recorded; interlocks and awaits still see each"},
};

static const struct field_table SAMPLE_TABLE = {"sample group",
                                                "What is read while a test runs, and how often.",
                                                SAMPLE_FIELDS, FIELD_COUNT(SAMPLE_FIELDS)};

const struct field_table *sample_fields(void)
{
	return &SAMPLE_TABLE;
}

struct step_context loading_steps(struct loading *l)
{
	return (struct step_context){.rig = l->rig,
	                             .arena = l->arena,
	                             .faults = l->faults,
	                             .substitute = values_substitute,
	                             .substitute_context = l};
}

int number_channel_load(struct loading *l, const struct yaml_node *node)
{
	struct step_context context = loading_steps(l);
	node = values_substitute(l, node);
	int channel = node ? channel_load(&context, node) : -1;
	if (channel < 0)
		return -1;
	const struct rig_channel *c = &l->rig->channels[channel];
	bool text = c->place == PLACE_IDENTIFICATION ||
	            (c->place != PLACE_DERIVED && c->codec.type == CODEC_TEXT);
	if (!text)
		return channel;
	faults_add(l->faults, node->at, "'%s' is text: it cannot be sampled or judged", c->info.name);
	return -1;
}

bool level_possible(struct loading *l, const struct yaml_node *node, int channel, double level)
{
	const struct rig_channel *c = &l->rig->channels[channel];
	if (c->place == PLACE_DERIVED)
		return true;
	double least, most;
	codec_range(&c->codec, &least, &most);
	double span = most - least;
	if (level >= fmin(least, -span) && level <= fmax(most, span))
		return true;
	char low[96], high[96];
	faults_add(l->faults, node->at, "%s can only be %s to %s: the limit could never be reached",
	           c->info.name, channel_value_text(l->rig, channel, least, low, sizeof low),
	           channel_value_text(l->rig, channel, most, high, sizeof high));
	return false;
}

static bool every_load(struct loading *l, const struct yaml_node *node, int64_t *ret_ns)
{
	const struct yaml_node *value = values_substitute(l, node);
	if (!value)
		return false;
	if (value->kind == YAML_SCALAR && strcmp(value->text, "fastest") == 0) {
		*ret_ns = 0;
		return true;
	}
	if (value->kind == YAML_SCALAR && text_is_name(value->text, value->length)) {
		faults_add(l->faults, value->at, "every: expected a time, such as 2 ms, or `fastest`");
		return false;
	}
	if (!bind_duration(&l->binder, value, ret_ns))
		return false;
	if (*ret_ns < EVERY_LEAST_NS || *ret_ns > 60 * NS_PER_S) {
		faults_add(l->faults, value->at,
		           "every: must lie between 100 us and 60 s, or be `fastest`");
		return false;
	}
	return true;
}

/* taken: the channels of the groups before and of this one. */
static bool group_load(struct loading *l, const struct yaml_node *node, unsigned char *taken,
                       struct sample_group *ret_group)
{
	if (!bind_mapping(&l->binder, &SAMPLE_TABLE, node, ret_group))
		return false;
	bool good = every_load(l, yaml_get(node, "every"), &ret_group->every_ns);
	const struct yaml_node *list = yaml_get(node, "channels");
	if (!bind_expect(&l->binder, list, YAML_SEQUENCE, "'channels'"))
		return false;
	if (list->count == 0) {
		faults_add(l->faults, list->at, "no channel is sampled: name at least one");
		return false;
	}
	ret_group->channels = arena_array(l->arena, list->count, sizeof *ret_group->channels);
	if (!ret_group->channels)
		return loading_no_memory(l) != NULL;
	for (size_t i = 0; i < list->count; i++) {
		int channel = number_channel_load(l, list->items[i]);
		if (channel >= 0 && taken[channel])
			faults_add(l->faults, list->items[i]->at, "channel '%s' is sampled already",
			           l->rig->channels[channel].info.name);
		if (channel < 0 || taken[channel]) {
			good = false;
			continue;
		}
		taken[channel] = 1;
		ret_group->channels[ret_group->channel_count++] = channel;
	}
	return good;
}

bool sample_load(struct loading *l, const struct yaml_node *node, struct sample_group **ret_groups,
                 size_t *ret_count)
{
	bool list = node->kind == YAML_SEQUENCE;
	size_t count = list ? node->count : 1;
	if (count == 0 || count > GROUPS_MOST) {
		faults_add(l->faults, node->at, "'sample' has between 1 and %d groups", GROUPS_MOST);
		return false;
	}
	struct sample_group *groups = arena_array(l->arena, count, sizeof *groups);
	unsigned char *taken = arena_alloc(l->arena, l->rig->channel_count + 1);
	if (!groups || !taken)
		return loading_no_memory(l) != NULL;
	bool good = true;
	for (size_t i = 0; i < count; i++)
		good = group_load(l, list ? node->items[i] : node, taken, &groups[i]) && good;
	*ret_groups = groups;
	*ret_count = count;
	return good;
}
