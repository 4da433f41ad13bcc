/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What the bench demands and allows: conditions before a test, interlocks, the
 * safe state, the proof of direction, allowed attempts, and what a modelled
 * bench serves.
 */
#include <math.h>
#include <string.h>

#include "rig_loader.h"
#include "step_kind.h"

static const char *const FUNCTIONS[] = {"any", NULL};

struct attempt_fields {
	int functions;
	bool moving;
};

/* clang-format off */
static const struct field PRECONDITION_ROWS[] = {
	{.key = "wait", .kind = FIELD_DURATION, .fallback = "0 s", .offset = offsetof(struct precondition, wait_ns),
	 .text = "how long it may take to come true"},
};
static const struct field DIRECTION_ROWS[] = {
	{.key = "command", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the command that is given"},
	{.key = "at", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "its value: low, and not 0"},
	{.key = "agree", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "channels that must have its sign, one of an instrument among them"},
	{.key = "prepare", .kind = FIELD_OWN, .text = "steps before"},
	{.key = "restore", .kind = FIELD_OWN, .text = "steps after"},
};
static const struct field ATTEMPT_ROWS[] = {
	{.key = "channel", .kind = FIELD_OWN, .text = "a command that may be written past its limits"},
	{.key = "device", .kind = FIELD_OWN, .text = "a device that may be asked for what it does not have"},
	{.key = "functions", .kind = FIELD_CHOICE, .choices = FUNCTIONS, .offset = offsetof(struct attempt_fields, functions),
	 .text = "any: function codes and reads"},
	{.key = "moving", .kind = FIELD_YES_NO, .fallback = "no", .offset = offsetof(struct attempt_fields, moving),
	 .text = "yes: also while the shaft may turn"},
};
static const struct field MODEL_ROWS[] = {
	{.key = "serves", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the model's signal on each channel"},
	{.key = "parameters", .kind = FIELD_OWN, .text = "of the modelled bench"},
};
/* clang-format on */
const struct field_table RIG_PRECONDITION_FIELDS = {
    "condition of `before`", "what must hold before each test", PRECONDITION_ROWS,
    FIELD_COUNT(PRECONDITION_ROWS)};
const struct field_table RIG_DIRECTION_FIELDS = {"direction", "proof that signs agree",
                                                 DIRECTION_ROWS, FIELD_COUNT(DIRECTION_ROWS)};
const struct field_table RIG_ATTEMPT_FIELDS = {"allowed attempt", "what a test may try",
                                               ATTEMPT_ROWS, FIELD_COUNT(ATTEMPT_ROWS)};
const struct field_table RIG_MODEL_FIELDS = {"model", "what the modelled bench serves", MODEL_ROWS,
                                             FIELD_COUNT(MODEL_ROWS)};

int rig_before_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_SEQUENCE, "before"))
		return 0;
	rig->before = arena_array(loader->arena, node->count + 1, sizeof *rig->before);
	if (!rig->before)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++) {
		struct precondition *item = &rig->before[rig->before_count++];
		item->at = node->items[i]->at;
		(void)bind_mapping_beside(&loader->binder, &RIG_PRECONDITION_FIELDS, condition_fields(),
		                          node->items[i], item);
		condition_load(&loader->steps, node->items[i], &RIG_PRECONDITION_FIELDS, &item->condition);
	}
	return 0;
}

int rig_interlocks_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_SEQUENCE, "interlocks"))
		return 0;
	rig->interlocks = arena_array(loader->arena, node->count + 1, sizeof *rig->interlocks);
	if (!rig->interlocks)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++) {
		struct interlock *item = &rig->interlocks[rig->interlock_count++];
		item->at = node->items[i]->at;
		condition_load(&loader->steps, node->items[i], NULL, &item->condition);
	}
	return 0;
}

int rig_safe_state_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	struct step *steps;
	size_t count;
	loader->steps.allowed = 1u << STEP_SET | 1u << STEP_HOLD | 1u << STEP_AWAIT;
	if (steps_load(&loader->steps, node, &steps, &count, loader->reterr) < 0)
		return -1;
	rig->safe_state = steps;
	rig->safe_state_count = count;
	bool confirms = false;
	for (size_t i = 0; i < count; i++)
		confirms = confirms || steps[i].kind == STEP_AWAIT;
	if (!confirms && node->kind == YAML_SEQUENCE)
		rig_fault(loader, node,
		          "a safe state without an `await` confirms nothing: add one on the "
		          "measured speed");
	return 0;
}

static void load_command(struct rig_loader *loader, const struct yaml_node *node,
                         struct rig_direction *direction)
{
	const struct rig *rig = loader->rig;
	const struct yaml_node *command = yaml_get(node, "command"), *at = yaml_get(node, "at");
	direction->command = channel_load(&loader->steps, command);
	if (direction->command < 0)
		return;
	const struct rig_channel *channel = &rig->channels[direction->command];
	if (!channel->info.unit)
		return;
	if (!channel->command) {
		rig_fault(loader, command, "'%s' is not a command", channel->info.name);
		return;
	}
	if (!channel_value_load(&loader->steps, at, direction->command, &direction->at_value))
		return;
	char value[96], least[96], most[96];
	if (direction->at_value == 0)
		rig_fault(loader, at, "at: 0 has no sign to compare");
	else if (direction->at_value < channel->least || direction->at_value > channel->most)
		rig_fault(
		    loader, at, "at: %s is outside what the command may be: `between` is %s to %s",
		    channel_value_text(rig, direction->command, direction->at_value, value, sizeof value),
		    channel_value_text(rig, direction->command, channel->least, least, sizeof least),
		    channel_value_text(rig, direction->command, channel->most, most, sizeof most));
}

static int load_agree(struct rig_loader *loader, const struct yaml_node *node,
                      struct rig_direction *direction)
{
	const struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_SEQUENCE, "agree"))
		return 0;
	direction->agree = arena_array(loader->arena, node->count + 1, sizeof *direction->agree);
	if (!direction->agree)
		return rig_no_memory(loader);
	bool independent = false, good = true;
	for (size_t i = 0; i < node->count; i++) {
		int channel = channel_load(&loader->steps, node->items[i]);
		if (channel < 0 || !channel_has_number(&loader->steps, channel, node->items[i]->at)) {
			good = false;
			continue;
		}
		direction->agree[direction->agree_count++] = channel;
		independent = independent || rig->channels[channel].info.evidence == EVIDENCE_INDEPENDENT;
	}
	if (good && !independent)
		rig_fault(loader, node,
		          "agree: at least one channel must be of a device that is not under "
		          "test: a controller with a wrong sign agrees with itself");
	return 0;
}

static int load_direction(struct rig_loader *loader, const struct yaml_node *node,
                          struct rig_direction *direction)
{
	char unused; /* all fields are bound below */
	direction->at = node->at;
	if (!bind_mapping(&loader->binder, &RIG_DIRECTION_FIELDS, node, &unused))
		return 0;
	direction->given = true;
	load_command(loader, node, direction);
	if (load_agree(loader, yaml_get(node, "agree"), direction) < 0)
		return -1;
	const struct yaml_node *prepare = yaml_get(node, "prepare"),
	                       *restore = yaml_get(node, "restore");
	loader->steps.allowed = 1u << STEP_SET | 1u << STEP_HOLD | 1u << STEP_AWAIT;
	if (prepare && steps_load(&loader->steps, prepare, &direction->prepare,
	                          &direction->prepare_count, loader->reterr) < 0)
		return -1;
	return restore ? steps_load(&loader->steps, restore, &direction->restore,
	                            &direction->restore_count, loader->reterr)
	               : 0;
}

int rig_directions_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	bool list = node->kind == YAML_SEQUENCE;
	size_t count = list ? node->count : 1;
	rig->directions = arena_array(loader->arena, count + 1, sizeof *rig->directions);
	if (!rig->directions)
		return rig_no_memory(loader);
	for (size_t i = 0; i < count; i++)
		if (load_direction(loader, list ? node->items[i] : node,
		                   &rig->directions[rig->direction_count++]) < 0)
			return -1;
	return 0;
}

static void load_attempt(struct rig_loader *loader, const struct yaml_node *node,
                         struct allowed_attempt *ret)
{
	struct attempt_fields fields = {0};
	*ret = (struct allowed_attempt){.device = -1, .channel = -1};
	if (!bind_mapping(&loader->binder, &RIG_ATTEMPT_FIELDS, node, &fields))
		return;
	ret->moving = fields.moving;
	const struct yaml_node *channel = yaml_get(node, "channel"), *device = yaml_get(node, "device"),
	                       *functions = yaml_get(node, "functions");
	if (!channel == !device || !functions != !device) {
		rig_fault(loader, node,
		          "an allowed attempt is {channel: NAME} or {device: NAME, functions: any}");
		return;
	}
	if (device) {
		ret->device = rig_reference(loader, device, "device", rig_device_find);
		ret->any_function = true;
		return;
	}
	int index = channel_load(&loader->steps, channel);
	if (index < 0 || !loader->rig->channels[index].info.unit)
		return;
	if (!loader->rig->channels[index].command)
		rig_fault(loader, channel, "'%s' is not a command", loader->rig->channels[index].info.name);
	ret->channel = index;
	ret->device = loader->rig->channels[index].device;
}

int rig_attempts_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_SEQUENCE, "attempts"))
		return 0;
	rig->attempts = arena_array(loader->arena, node->count + 1, sizeof *rig->attempts);
	if (!rig->attempts)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++)
		load_attempt(loader, node->items[i], &rig->attempts[rig->attempt_count++]);
	return 0;
}

static int load_serves(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "serves"))
		return 0;
	rig->served = arena_array(loader->arena, node->count + 1, sizeof *rig->served);
	if (!rig->served)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++) {
		struct served_channel item = {.at = node->pairs[i].value->at};
		item.channel = channel_load(&loader->steps, node->pairs[i].key);
		if (!bind_text(&loader->binder, node->pairs[i].value, &item.signal) || item.channel < 0)
			continue;
		if (rig->channels[item.channel].place == PLACE_DERIVED) {
			rig_fault(loader, node->pairs[i].key, "'%s' is derived: it is not served but computed",
			          rig->channels[item.channel].info.name);
			continue;
		}
		rig->served[rig->served_count++] = item;
	}
	return 0;
}

int rig_model_load(struct rig_loader *loader, const struct yaml_node *node)
{
	char unused; /* all fields are bound below */
	if (!bind_mapping(&loader->binder, &RIG_MODEL_FIELDS, node, &unused))
		return 0;
	loader->rig->has_model = true;
	const struct yaml_node *parameters = yaml_get(node, "parameters");
	if (parameters && bind_expect(&loader->binder, parameters, YAML_MAPPING, "parameters"))
		loader->rig->model_parameters = parameters;
	return load_serves(loader, yaml_get(node, "serves"));
}
