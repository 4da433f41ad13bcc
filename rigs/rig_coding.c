/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How a channel is coded, what its values are called, how good its instrument
 * is, and what a command may be. Limits are compared with what the coding can
 * hold: a limit that can never be reached protects nothing.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "rig_loader.h"

/* Kinds of coding, as far as keys differ; a bit each. */
enum { COIL = 1, BIT = 2, INTEGER = 4, FLOATING = 8, TEXT = 16, OBJECT = 32 };
enum { NUMBERS = INTEGER | FLOATING, WRITABLE = COIL | BIT | NUMBERS };

static const struct {
	const char *key;
	unsigned of; /* kinds of which it says something */
} KEYS[] = {
    {"words", NUMBERS},
    {"bytes", BIT | NUMBERS | TEXT},
    {"scale", NUMBERS},
    {"zero", NUMBERS},
    {"mask", INTEGER},
    {"bit", BIT},
    {"registers", TEXT},
    {"reversed", NUMBERS},
    {"unit", NUMBERS},
    {"delay", WRITABLE},
    {"accuracy", NUMBERS},
    {"calibrated_until", NUMBERS},
    {"calibration", NUMBERS},
    {"wraps", NUMBERS},
    {"names", COIL | BIT | INTEGER},
    {"command", WRITABLE},
    {"between", WRITABLE},
    {"slew", NUMBERS},
    {"takes_effect", WRITABLE},
    {"read_back", WRITABLE},
};

static unsigned kind_of(const struct rig_channel *channel)
{
	if (channel->place == PLACE_COIL || channel->place == PLACE_DISCRETE_INPUT)
		return COIL;
	if (channel->place == PLACE_IDENTIFICATION)
		return OBJECT;
	switch (channel->codec.type) {
	case CODEC_BIT:
		return BIT;
	case CODEC_FLOAT32:
	case CODEC_FLOAT64:
		return FLOATING;
	case CODEC_TEXT:
		return TEXT;
	default:
		return INTEGER;
	}
}

static const char *kind_name(unsigned kind)
{
	return kind == COIL || kind == BIT ? "a bit"
	       : kind == INTEGER           ? "a whole number"
	       : kind == FLOATING          ? "a floating-point number"
	                                   : "a text";
}

/* The type that is given, or the only one that the place can have. */
static bool load_type(struct rig_loader *loader, const struct yaml_node *node,
                      const struct rig_channel_fields *fields, struct rig_channel *channel)
{
	const struct yaml_node *type = yaml_get(node, "type");
	bool bits = channel->place == PLACE_COIL || channel->place == PLACE_DISCRETE_INPUT;
	bool object = channel->place == PLACE_IDENTIFICATION;
	channel->codec.type = type ? (enum codec_type)fields->type : bits ? CODEC_BIT : CODEC_TEXT;
	if (!type && !bits && !object) {
		rig_fault(loader, node, "the key 'type' is missing in a channel (how registers are coded)");
		return false;
	}
	if ((bits && channel->codec.type != CODEC_BIT) ||
	    (object && channel->codec.type != CODEC_TEXT)) {
		rig_fault(loader, type, "type: here only %s is possible; remove it",
		          bits ? "a bit" : "a text");
		return false;
	}
	return true;
}

static bool is_one_run(uint64_t mask)
{
	uint64_t low = mask & (~mask + 1); /* the lowest bit */
	return ((mask + low) & mask) == 0;
}

static bool load_mask(struct rig_loader *loader, const struct yaml_node *node,
                      struct rig_channel *channel)
{
	int64_t mask;
	int bits = 16 * codec_registers(&channel->codec);
	int64_t most = bits >= 53 ? INT64_C(1) << 53 : (INT64_C(1) << bits) - 1;
	if (!bind_integer(&loader->binder, node, 1, most, &mask))
		return false;
	if (!is_one_run((uint64_t)mask)) {
		rig_fault(loader, node, "mask: its bits must be neighbours");
		return false;
	}
	channel->codec.mask = (uint64_t)mask;
	return true;
}

static bool load_bit(struct rig_loader *loader, const struct yaml_node *node,
                     struct rig_channel *channel)
{
	const struct yaml_node *bit = yaml_get(node, "bit");
	int64_t number;
	if (!bit)
		rig_fault(loader, node, "which bit of the register? Give `bit`, 0 (lowest) to 15");
	if (!bit || !bind_integer(&loader->binder, bit, 0, 15, &number))
		return false;
	channel->codec.bit = (int)number;
	return true;
}

static bool check_keys(struct rig_loader *loader, const struct yaml_node *node, unsigned kind)
{
	bool good = true;
	for (size_t i = 0; i < FIELD_COUNT(KEYS); i++) {
		const struct yaml_node *value = yaml_get(node, KEYS[i].key);
		if (!value || (KEYS[i].of & kind))
			continue;
		rig_fault(loader, value, "'%s' says nothing of %s: remove it", KEYS[i].key,
		          kind_name(kind));
		good = false;
	}
	return good;
}

bool rig_coding_load(struct rig_loader *loader, const struct yaml_node *node,
                     const struct rig_channel_fields *fields, struct rig_channel *channel)
{
	struct codec *codec = &channel->codec;
	if (!load_type(loader, node, fields, channel))
		return false;
	codec->low_word_first = fields->words == 1;
	codec->low_byte_first = fields->bytes == 1;
	codec->scale = fields->scale;
	codec->reversed = fields->reversed;
	codec->text_registers = (int)fields->registers;
	unsigned kind = kind_of(channel);
	if (!check_keys(loader, node, kind))
		return false;
	if (kind == TEXT && fields->registers == 0) {
		rig_fault(loader, node, "how long is the text? Give `registers`");
		return false;
	}
	const struct yaml_node *zero = yaml_get(node, "zero"), *mask = yaml_get(node, "mask");
	if (zero && !rig_value_load(loader, zero, channel, &codec->zero))
		return false;
	if (mask && !load_mask(loader, mask, channel))
		return false;
	return kind != BIT || load_bit(loader, node, channel);
}

int rig_names_load(struct rig_loader *loader, const struct yaml_node *node,
                   struct rig_channel *channel)
{
	struct channel_info *info = &channel->info;
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "names"))
		return 0;
	double *values = arena_array(loader->arena, node->count + 1, sizeof *values);
	const char **names = arena_array(loader->arena, node->count + 1, sizeof *names);
	if (!values || !names)
		return rig_no_memory(loader);
	double least, most;
	codec_range(&channel->codec, &least, &most);
	for (size_t i = 0; i < node->count; i++) {
		const struct yaml_node *key = node->pairs[i].key;
		size_t n = info->name_count;
		if (!bind_number(&loader->binder, key, &values[n]) ||
		    !bind_name(&loader->binder, node->pairs[i].value, &names[n]))
			continue;
		if (values[n] < least || values[n] > most)
			rig_fault(loader, key, "its coding cannot hold %.10g", values[n]);
		for (size_t j = 0; j < n; j++)
			if (values[j] == values[n])
				rig_fault(loader, key, "%.10g has the name '%s' already", values[n], names[j]);
			else if (strcmp(names[j], names[n]) == 0)
				rig_fault(loader, node->pairs[i].value, "'%s' is the name of %.10g already",
				          names[n], values[j]);
		info->name_count++;
	}
	info->named_values = values;
	info->value_names = names;
	return 0;
}

/* clang-format off */
static const struct field ACCURACY_ROWS[] = {
	{.key = "of_reading", .kind = FIELD_QUANTITY, .dimension = &DIM_NUMBER, .least = 0, .most = 1,
	 .offset = offsetof(struct accuracy, of_reading), .text = "share of the value, such as 0.2 %"},
	{.key = "of_range", .kind = FIELD_QUANTITY, .dimension = &DIM_NUMBER, .least = 0, .most = 1,
	 .offset = offsetof(struct accuracy, of_range), .text = "share of `range`"},
	{.key = "range", .kind = FIELD_OWN, .text = "the instrument's range"},
	{.key = "absolute", .kind = FIELD_OWN, .text = "a fixed part"},
};
/* clang-format on */
const struct field_table RIG_ACCURACY_FIELDS = {"accuracy", "limits of error of an instrument",
                                                ACCURACY_ROWS, FIELD_COUNT(ACCURACY_ROWS)};

/* A day as days since 1970-01-01. */
static void load_day(struct rig_loader *loader, const struct yaml_node *node, int64_t *ret_day)
{
	const char *text;
	if (!bind_text(&loader->binder, node, &text))
		return;
	struct tm tm = {0}, again;
	int used = 0;
	bool good = sscanf(text, "%4d-%2d-%2d%n", &tm.tm_year, &tm.tm_mon, &tm.tm_mday, &used) == 3 &&
	            used == 10 && text[10] == '\0' && text[4] == '-' && text[7] == '-';
	tm.tm_year -= 1900;
	tm.tm_mon -= 1;
	again = tm;
	time_t seconds = timegm(&again);
	/* timegm() turns 30 February into 2 March: a day that changes is none. */
	if (!good || again.tm_mday != tm.tm_mday || again.tm_mon != tm.tm_mon || seconds <= 0) {
		rig_fault(loader, node, "calibrated_until: a day is written as 2027-06-30");
		return;
	}
	*ret_day = seconds / 86400;
}

static void load_limits_of_error(struct rig_loader *loader, const struct yaml_node *node,
                                 struct rig_channel *channel)
{
	struct accuracy *accuracy = &channel->info.accuracy;
	const struct yaml_node *range = yaml_get(node, "range"), *absolute = yaml_get(node, "absolute"),
	                       *of_range = yaml_get(node, "of_range");
	if (!bind_mapping(&loader->binder, &RIG_ACCURACY_FIELDS, node, accuracy))
		return;
	if (range && rig_value_load(loader, range, channel, &accuracy->range) && !(accuracy->range > 0))
		rig_fault(loader, range, "range: must be above 0");
	if (absolute && rig_value_load(loader, absolute, channel, &accuracy->absolute) &&
	    accuracy->absolute < 0)
		rig_fault(loader, absolute, "absolute: must not be below 0");
	if (of_range && !range)
		rig_fault(loader, of_range, "of_range: of which range? Give `range` beside it");
	if (range && !of_range)
		rig_fault(loader, range, "range: says nothing without `of_range`");
	if (node->count == 0)
		rig_fault(loader, node, "accuracy: give of_reading, of_range with range, or absolute");
	accuracy->given = true;
}

void rig_accuracy_load(struct rig_loader *loader, const struct yaml_node *node,
                       const struct rig_channel_fields *fields, struct rig_channel *channel)
{
	const struct yaml_node *accuracy = yaml_get(node, "accuracy"),
	                       *until = yaml_get(node, "calibrated_until");
	if (accuracy)
		load_limits_of_error(loader, accuracy, channel);
	if (until)
		load_day(loader, until, &channel->info.accuracy.calibrated_until_day);
	channel->info.accuracy.calibration_required = fields->calibration == 1;
	if (fields->calibration == 1 && !until)
		rig_fault(loader, yaml_get(node, "calibration"),
		          "calibration: required, but `calibrated_until` is missing");
}

/* The largest rate: "500 rpm/s", or a bare number of units per second. */
static void load_slew(struct rig_loader *loader, const struct yaml_node *node,
                      struct rig_channel *channel)
{
	struct yaml_node value = *node;
	const struct unit *unit = channel->info.unit;
	struct quantity quantity;
	if (node->kind == YAML_SCALAR && node->length > 2 &&
	    memcmp(node->text + node->length - 2, "/s", 2) == 0)
		value.length -= 2;
	else if (node->kind == YAML_SCALAR && node->length > 0 && !node->quoted &&
	         strspn(node->text, "0123456789.eE+-") != node->length) {
		rig_fault(loader, node, "slew: write a rate, such as 100 %s/s", unit->name);
		return;
	}
	if (!bind_quantity(&loader->binder, &value, unit, &unit->dimension, &quantity))
		return;
	channel->slew = quantity_in(quantity, unit);
	if (!(channel->slew > 0))
		rig_fault(loader, node, "slew: must be above 0");
}

static void load_between(struct rig_loader *loader, const struct yaml_node *node,
                         struct rig_channel *channel)
{
	double ends[2], least, most;
	if (node->kind != YAML_SEQUENCE || node->count != 2) {
		rig_fault(loader, node, "between: takes a list of two values: [LEAST, MOST]");
		return;
	}
	bool good = rig_value_load(loader, node->items[0], channel, &ends[0]);
	if (!rig_value_load(loader, node->items[1], channel, &ends[1]) || !good)
		return;
	if (!(ends[0] < ends[1])) {
		rig_fault(loader, node, "between: the first value must be below the second");
		return;
	}
	codec_range(&channel->codec, &least, &most);
	int index = (int)(channel - loader->rig->channels);
	for (size_t i = 0; i < 2; i++) {
		char value[96], low[96], high[96];
		if (ends[i] >= least && ends[i] <= most)
			continue;
		rig_fault(loader, node->items[i],
		          "between: the coding cannot hold %s: it goes from %s to %s",
		          channel_value_text(loader->rig, index, ends[i], value, sizeof value),
		          channel_value_text(loader->rig, index, least, low, sizeof low),
		          channel_value_text(loader->rig, index, most, high, sizeof high));
	}
	channel->least = ends[0];
	channel->most = ends[1];
}

void rig_command_load(struct rig_loader *loader, const struct yaml_node *node,
                      struct rig_channel *channel)
{
	static const char *const KEYS_OF_COMMANDS[] = {"between", "slew", "takes_effect", "read_back"};
	for (size_t i = 0; !channel->command && i < FIELD_COUNT(KEYS_OF_COMMANDS); i++)
		if (yaml_get(node, KEYS_OF_COMMANDS[i]))
			rig_fault(loader, yaml_get(node, KEYS_OF_COMMANDS[i]),
			          "%s: belongs to a command; say `command: true` if this is one",
			          KEYS_OF_COMMANDS[i]);
	if (!channel->command)
		return;
	if (channel->place != PLACE_COIL && channel->place != PLACE_HOLDING_REGISTER) {
		rig_fault(loader, yaml_get(node, "command"),
		          "command: only a coil or a holding register can be written");
		return;
	}
	const struct yaml_node *between = yaml_get(node, "between"), *slew = yaml_get(node, "slew"),
	                       *effect = yaml_get(node, "takes_effect");
	if (channel->codec.type == CODEC_BIT) { /* it has no other values */
		channel->least = 0;
		channel->most = 1;
	}
	if (between)
		load_between(loader, between, channel);
	if (slew)
		load_slew(loader, slew, channel);
	if (effect)
		rig_span_load(loader, effect, &channel->effect_least_ns, &channel->effect_most_ns);
}
