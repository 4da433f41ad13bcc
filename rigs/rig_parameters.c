/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The parameters that the drive under test must have: a file beside the rig
 * file, one value a channel. It is a file of its own, since it belongs to the
 * release of the firmware and the rig file to the bench.
 *
 * Only a plain name is taken, so that a rig file from elsewhere cannot make a
 * report carry files of this machine.
 */
#include <stdio.h>
#include <string.h>

#include "rig_loader.h"

static const char ENDING[] = "parameters.yaml";

static bool is_plain(const char *name)
{
	size_t length = strlen(name), ending = sizeof ENDING - 1;
	if (length < ending || length > 100 || strcmp(name + length - ending, ENDING) != 0)
		return false;
	for (const char *c = name; *c; c++)
		if (!(*c >= 'a' && *c <= 'z') && !(*c >= 'A' && *c <= 'Z') && !(*c >= '0' && *c <= '9') &&
		    !strchr("._-", *c))
			return false;
	return name[0] != '.';
}

/* The path beside the rig file, in the arena. */
static const char *beside(struct rig_loader *loader, const char *name)
{
	const char *rig = loader->rig->file->path, *slash = strrchr(rig, '/');
	int folder = slash ? (int)(slash - rig) + 1 : 0;
	return arena_printf(loader->arena, "%.*s%s", folder, rig, name);
}

static void load_value(struct rig_loader *loader, const struct yaml_pair *pair)
{
	struct rig *rig = loader->rig;
	int channel = rig_reference(loader, pair->key, "channel", rig_channel_find);
	if (channel < 0)
		return;
	const struct rig_channel *read = &rig->channels[channel];
	if (read->place == PLACE_DERIVED || read->place == PLACE_IDENTIFICATION ||
	    read->codec.type == CODEC_TEXT) {
		rig_fault(loader, pair->key, "%s is no number that a device holds", read->info.name);
		return;
	}
	struct expected_parameter *item = &rig->parameters[rig->parameter_count];
	item->channel = channel;
	item->at = pair->value->at;
	if (channel_value_load(&loader->steps, pair->value, channel, &item->value))
		rig->parameter_count++;
}

int rig_parameters_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	const char *name;
	struct yaml_node *root = NULL;
	struct err err = {0};
	if (!bind_text(&loader->binder, node, &name))
		return 0;
	if (!is_plain(name)) {
		rig_fault(loader, node,
		          "parameters: a file beside the rig file whose name ends in %s, without folders",
		          ENDING);
		return 0;
	}
	const char *path = beside(loader, name);
	if (!path)
		return rig_no_memory(loader);
	if (yaml_load(path, loader->arena, loader->faults, &rig->parameters_file, &root, &err) < 0) {
		if (err.code == ERR_NOMEM)
			return rig_no_memory(loader);
		rig_fault(loader, node, "parameters: %s %s", name, err.message);
		return 0;
	}
	if (!root || !bind_expect(&loader->binder, root, YAML_MAPPING, "a parameters file"))
		return 0;
	rig->parameters_name = name;
	rig->parameters = arena_array(loader->arena, root->count + 1, sizeof *rig->parameters);
	if (!rig->parameters)
		return rig_no_memory(loader);
	for (size_t i = 0; i < root->count; i++)
		load_value(loader, &root->pairs[i]);
	return 0;
}
