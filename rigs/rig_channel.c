/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Channels: where a quantity lies, and what it is. The coding is in
 * rig_coding.c, what is computed from others in rig_derived.c.
 *
 * Two channels may lie on the same registers (bits of one word, a word seen as
 * a whole), so overlaps are no fault. A key that says nothing of a channel's
 * kind of coding is one: who writes `scale` beside a bit expects an effect.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "rig_loader.h"
#include "step_kind.h"

/* As codec_type_names(), which a constant table cannot call; a test compares them. */
static const char *const TYPES[] = {"bit",   "uint16",  "int16",   "uint32", "int32", "uint64",
                                    "int64", "float32", "float64", "text",   NULL};
static const char *const ORDERS[] = {"high_first", "low_first", NULL};
static const char *const CALIBRATIONS[] = {"optional", "required", NULL};

#define AT(member) .offset = offsetof(struct rig_channel_fields, member)
/* clang-format off */
static const struct field ROWS[] = {
	{.key = "device", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the device it belongs to"},
	{.key = "coil", .kind = FIELD_OWN, .text = "address of a coil, from 0"},
	{.key = "discrete_input", .kind = FIELD_OWN, .text = "address of a discrete input, from 0"},
	{.key = "input_register", .kind = FIELD_OWN, .text = "address of the first input register, from 0"},
	{.key = "holding_register", .kind = FIELD_OWN, .text = "address of the first holding register, from 0"},
	{.key = "identification", .kind = FIELD_OWN, .text = "object id of function 43/14, 0 to 255; a text"},
	{.key = "type", .kind = FIELD_CHOICE, .choices = TYPES, AT(type), .text = "how registers are coded"},
	{.key = "words", .kind = FIELD_CHOICE, .choices = ORDERS, .fallback = "high_first", AT(words),
	 .text = "which register of a value comes first"},
	{.key = "bytes", .kind = FIELD_CHOICE, .choices = ORDERS, .fallback = "high_first", AT(bytes),
	 .text = "which byte of a register comes first"},
	{.key = "scale", .kind = FIELD_NUMBER, .flags = FIELD_POSITIVE, .fallback = "1", AT(scale), .text = "unit per step of the coding"},
	{.key = "zero", .kind = FIELD_OWN, .text = "value where the registers hold 0"},
	{.key = "mask", .kind = FIELD_OWN, .text = "the bits of a field, in decimal; the value is shifted down"},
	{.key = "bit", .kind = FIELD_OWN, .text = "of a register: 0 (lowest) to 15; type bit"},
	{.key = "registers", .kind = FIELD_INTEGER, .least = 1, .most = LINK_REGISTERS_MOST, AT(registers), .text = "length of a text"},
	{.key = "reversed", .kind = FIELD_YES_NO, .fallback = "no", AT(reversed), .text = "yes: the sign is turned"},
	{.key = "unit", .kind = FIELD_OWN, .text = "unit of the value; without it a plain number"},
	{.key = "refresh", .kind = FIELD_DURATION, .fallback = "0 s", AT(refresh_ns), .text = "how old the device's own value may be"},
	{.key = "delay", .kind = FIELD_OWN, .text = "[LEAST, MOST] of the instrument; one time means from 0 to it"},
	{.key = "takes_effect", .kind = FIELD_OWN, .text = "[LEAST, MOST] from a command's reply to its effect; one time means from 0 to it"},
	{.key = "accuracy", .kind = FIELD_OWN, .text = "limits of error of the instrument"},
	{.key = "calibrated_until", .kind = FIELD_OWN, .text = "day until which its calibration holds: YYYY-MM-DD"},
	{.key = "calibration", .kind = FIELD_CHOICE, .choices = CALIBRATIONS, .fallback = "optional", AT(calibration),
	 .text = "required: measurements after that day prove nothing"},
	{.key = "wraps", .kind = FIELD_OWN, .text = "modulus of a counter or an angle"},
	{.key = "names", .kind = FIELD_OWN, .text = "named values: {0: none, 3: encoder_loss}"},
	{.key = "command", .kind = FIELD_YES_NO, .fallback = "no", AT(command), .text = "yes: tests may write it"},
	{.key = "between", .kind = FIELD_OWN, .text = "[LEAST, MOST] that a command may be"},
	{.key = "slew", .kind = FIELD_OWN, .text = "largest rate of a command: VALUE per second, such as 500 rpm/s"},
	{.key = "read_back", .kind = FIELD_OWN, .text = "channel that shows the command; none where it clears itself"},
};
/* clang-format on */
const struct field_table RIG_CHANNEL_FIELDS = {"channel", "a named quantity of a device", ROWS,
                                               FIELD_COUNT(ROWS)};

static const char *const PLACES[] = {"coil", "discrete_input", "input_register", "holding_register",
                                     "identification"}; /* enum place */

bool rig_value_load(struct rig_loader *loader, const struct yaml_node *node,
                    const struct rig_channel *channel, double *ret_value)
{
	return channel_value_load(&loader->steps, node, (int)(channel - loader->rig->channels),
	                          ret_value);
}

const struct unit *rig_unit_load(struct rig_loader *loader, const struct yaml_node *node)
{
	const char *name;
	if (!node)
		return unit_one();
	if (!bind_text(&loader->binder, node, &name))
		return NULL;
	const struct unit *unit = unit_find(name, strlen(name));
	if (unit)
		return unit;
	size_t count;
	const struct unit *units = unit_table(&count);
	const char *nearest = NULL;
	for (size_t i = 0; i < count && !nearest; i++) /* RPM for rpm */
		if (strcasecmp(name, units[i].name) == 0)
			nearest = units[i].name;
	for (size_t i = 0; i < count && !nearest; i++)
		nearest = text_nearest(name, &units[i].name, 1);
	char shown[YAML_SHOWN];
	rig_fault(loader, node, "there is no unit '%s'%s%s%s", yaml_shown(name, strlen(name), shown),
	          nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : "");
	return NULL;
}

/* Where it lies; false after a fault. */
static bool load_place(struct rig_loader *loader, const struct yaml_node *node,
                       struct rig_channel *channel)
{
	const struct yaml_node *found = NULL;
	for (size_t i = 0; i < FIELD_COUNT(PLACES); i++) {
		const struct yaml_node *place = yaml_get(node, PLACES[i]);
		if (place && found) {
			rig_fault(loader, place, "a channel lies in one place, not in two");
			return false;
		}
		if (place) {
			found = place;
			channel->place = (enum place)i;
		}
	}
	if (!found) {
		rig_fault(loader, node,
		          "where does it lie? Give its coil, discrete_input, input_register, "
		          "holding_register or identification, or `derive`");
		return false;
	}
	int64_t address;
	if (!bind_integer(&loader->binder, found, 0,
	                  channel->place == PLACE_IDENTIFICATION ? 255 : 65535, &address))
		return false;
	channel->address = (int)address;
	return true;
}

void rig_span_load(struct rig_loader *loader, const struct yaml_node *node, int64_t *ret_least_ns,
                   int64_t *ret_most_ns)
{
	if (node->kind == YAML_SCALAR) {
		(void)bind_duration(&loader->binder, node, ret_most_ns);
		return;
	}
	if (node->kind != YAML_SEQUENCE || node->count != 2) {
		rig_fault(loader, node, "expected one time, or a list of two: [LEAST, MOST]");
		return;
	}
	bool good = bind_duration(&loader->binder, node->items[0], ret_least_ns);
	if (bind_duration(&loader->binder, node->items[1], ret_most_ns) && good &&
	    *ret_least_ns > *ret_most_ns)
		rig_fault(loader, node, "the first time must not be above the second");
}

static void load_wraps(struct rig_loader *loader, const struct yaml_node *node,
                       struct rig_channel *channel)
{
	if (rig_value_load(loader, node, channel, &channel->info.wraps) && !(channel->info.wraps > 0))
		rig_fault(loader, node, "wraps: must be above 0");
}

static void check_reach(struct rig_loader *loader, const struct yaml_node *node,
                        const struct rig_channel *channel)
{
	if (channel->place != PLACE_INPUT_REGISTER && channel->place != PLACE_HOLDING_REGISTER)
		return;
	int registers = codec_registers(&channel->codec);
	const struct rig_device *device = &loader->rig->devices[channel->device];
	const struct yaml_node *at = yaml_get(node, PLACES[channel->place]);
	if (channel->address + registers > 65536)
		rig_fault(loader, at, "its %d registers reach beyond address 65535", registers);
	if (registers > device->max_registers)
		rig_fault(loader, at,
		          "it takes %d registers, but %s gives at most %d in one reply (max_registers)",
		          registers, device->name, device->max_registers);
}

/* What can be read once unit and coding are known. */
static int load_rest(struct rig_loader *loader, const struct yaml_node *node,
                     const struct rig_channel_fields *fields, struct rig_channel *channel)
{
	struct channel_info *info = &channel->info;
	const struct yaml_node *delay = yaml_get(node, "delay"), *wraps = yaml_get(node, "wraps"),
	                       *names = yaml_get(node, "names");
	check_reach(loader, node, channel);
	info->refresh_ns = fields->refresh_ns;
	if (delay)
		rig_span_load(loader, delay, &info->delay_least_ns, &info->delay_most_ns);
	if (wraps)
		load_wraps(loader, wraps, channel);
	if (names && rig_names_load(loader, names, channel) < 0)
		return -1;
	rig_accuracy_load(loader, node, fields, channel);
	rig_command_load(loader, node, channel);
	/* A code has no steps that average: neighbouring numbers are different things. */
	bool code = channel->codec.type == CODEC_BIT || channel->codec.type == CODEC_TEXT || names;
	info->resolution = code ? 0 : codec_resolution(&channel->codec);
	return 0;
}

static int load_read(struct rig_loader *loader, const struct yaml_node *node,
                     struct rig_channel *channel)
{
	struct rig_channel_fields fields = {0};
	bool good = bind_mapping(&loader->binder, &RIG_CHANNEL_FIELDS, node, &fields);
	const struct yaml_node *device = yaml_get(node, "device");
	channel->device = device ? rig_reference(loader, device, "device", rig_device_find) : -1;
	good = load_place(loader, node, channel) && channel->device >= 0 && good;
	const struct unit *unit = rig_unit_load(loader, yaml_get(node, "unit"));
	if (!good || !unit)
		return 0;
	const struct rig_device *owner = &loader->rig->devices[channel->device];
	channel->info.device = owner->name;
	channel->info.evidence = owner->under_test ? EVIDENCE_SELF_REPORTED : EVIDENCE_INDEPENDENT;
	channel->command = fields.command;
	channel->info.unit = unit;
	if (!rig_coding_load(loader, node, &fields, channel)) {
		channel->info.unit = NULL;
		return 0;
	}
	return load_rest(loader, node, &fields, channel);
}

static void load_read_back(struct rig_loader *loader, const struct yaml_node *node, int index)
{
	struct rig_channel *channel = &loader->rig->channels[index];
	const struct yaml_node *given = yaml_get(node, "read_back");
	channel->read_back = channel->command ? index : -1;
	if (!given || !channel->info.unit || !channel->command)
		return;
	if (given->kind == YAML_SCALAR && strcmp(given->text, "none") == 0) {
		channel->read_back = -1;
		return;
	}
	channel->read_back = channel_load(&loader->steps, given);
	if (channel->read_back < 0)
		return;
	const struct rig_channel *shown = &loader->rig->channels[channel->read_back];
	if (!shown->info.unit || !channel_has_number(&loader->steps, channel->read_back, given->at))
		return;
	if (shown->device != channel->device)
		rig_fault(loader, given, "read_back: '%s' is not a channel of %s", shown->info.name,
		          channel->info.device);
	else if (!dimension_agrees(shown->info.unit->dimension, channel->info.unit->dimension))
		rig_fault(loader, given, "read_back: '%s' is in %s, the command in %s", shown->info.name,
		          shown->info.unit->name, channel->info.unit->name);
}

/* Words that mean something else where a channel could stand. */
static bool is_reserved(const char *name)
{
	return strcmp(name, "over") == 0 || strcmp(name, "wait") == 0 || strcmp(name, "none") == 0;
}

/* Columns that every samples file has. */
static bool is_column(const char *name)
{
	return strcmp(name, "earliest") == 0 || strcmp(name, "latest") == 0;
}

static int load_channel(struct rig_loader *loader, const struct yaml_pair *pair,
                        struct rig_channel *channel)
{
	channel->at = pair->key->at;
	channel->device = channel->read_back = -1;
	channel->least = -(double)INFINITY;
	channel->most = (double)INFINITY;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST; i++)
		channel->derivation.inputs[i] = -1;
	if (is_reserved(channel->info.name))
		rig_fault(loader, pair->key, "a channel cannot be called '%s': steps use the word",
		          channel->info.name);
	if (is_column(channel->info.name))
		rig_fault(loader, pair->key,
		          "a channel cannot be called '%s': the samples file has a column of that name",
		          channel->info.name);
	if (!bind_expect(&loader->binder, pair->value, YAML_MAPPING, "a channel"))
		return 0;
	if (yaml_get(pair->value, "derive")) {
		channel->place = PLACE_DERIVED;
		return 0;
	}
	return load_read(loader, pair->value, channel);
}

int rig_channels_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "channels"))
		return 0;
	if (node->count == 0)
		rig_fault(loader, node, "a rig needs at least one channel");
	rig->channels = arena_array(loader->arena, node->count + 1, sizeof *rig->channels);
	const struct yaml_node **nodes = arena_array(loader->arena, node->count + 1, sizeof *nodes);
	if (!rig->channels || !nodes)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++) {
		struct rig_channel *channel = &rig->channels[rig->channel_count];
		if (!bind_name(&loader->binder, node->pairs[i].key, &channel->info.name))
			continue;
		if (load_channel(loader, &node->pairs[i], channel) < 0)
			return -1;
		nodes[rig->channel_count++] = node->pairs[i].value;
	}
	for (size_t i = 0; i < rig->channel_count; i++)
		load_read_back(loader, nodes[i], (int)i);
	return rig_derived_load(loader, nodes);
}
