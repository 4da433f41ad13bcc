/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Devices: first where they are, then, once channels are known, what identifies
 * them, what shows that they live, and their communication watchdogs.
 */
#include <string.h>

#include "rig_loader.h"
#include "step_kind.h"

enum {
	UNIT_MOST = 247, /* Modbus over Serial Line V1.02, 2.2 */
	UNIT_UNADDRESSED =
	    255, /* Modbus Messaging on TCP/IP V1.0b, 4.4.2: a server that is no gateway */
};

static const char *const GAPS[] = {"forbidden", "allowed", NULL};

struct fields {
	int64_t unit, max_registers, in_flight, life_within_ns, minimum_pause_ns;
	bool under_test;
	int gaps;
};

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "link", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the link it answers on"},
	{.key = "unit", .kind = FIELD_INTEGER, .flags = FIELD_REQUIRED, .least = 1, .most = 255, .offset = offsetof(struct fields, unit),
	 .text = "its unit identifier: 1 to 247; on TCP 255 too"},
	{.key = "under_test", .kind = FIELD_YES_NO, .fallback = "no", .offset = offsetof(struct fields, under_test),
	 .text = "yes for the controller under test: what it says of itself is self-reported"},
	{.key = "identity", .kind = FIELD_OWN, .text = "channels that identify it, by what they are: {firmware: CHANNEL}"},
	{.key = "life", .kind = FIELD_OWN, .text = "a channel that must move: a frozen register image is no measurement"},
	{.key = "life_within", .kind = FIELD_DURATION, .flags = FIELD_POSITIVE, .fallback = "1 s",
	 .offset = offsetof(struct fields, life_within_ns), .text = "within this time `life` must have moved"},
	{.key = "watchdog", .kind = FIELD_OWN, .text = "its communication watchdog, and how it is proven"},
	{.key = "max_registers", .kind = FIELD_INTEGER, .least = 1, .most = LINK_REGISTERS_MOST, .fallback = "125",
	 .offset = offsetof(struct fields, max_registers), .text = "registers that it gives in one reply"},
	{.key = "gaps", .kind = FIELD_CHOICE, .choices = GAPS, .fallback = "forbidden", .offset = offsetof(struct fields, gaps),
	 .text = "whether registers between two channels may be read"},
	{.key = "minimum_pause", .kind = FIELD_DURATION, .fallback = "0 s", .offset = offsetof(struct fields, minimum_pause_ns),
	 .text = "that it wants between its transactions"},
	{.key = "in_flight", .kind = FIELD_INTEGER, .least = 1, .most = 16, .fallback = "1", .offset = offsetof(struct fields, in_flight),
	 .text = "requests that it takes before it has answered the first; TCP only"},
};
static const struct field WATCHDOG_ROWS[] = {
	{.key = "timeout", .kind = FIELD_DURATION, .flags = FIELD_REQUIRED | FIELD_POSITIVE, .offset = offsetof(struct rig_watchdog, timeout_ns),
	 .text = "silence after which it trips"},
	{.key = "arm", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "steps that arm it, at zero command"},
	{.key = "tripped", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the condition that shows that it has tripped"},
	{.key = "clear", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "steps that clear it"},
};
/* clang-format on */
const struct field_table RIG_DEVICE_FIELDS = {"device", "a Modbus server", ROWS, FIELD_COUNT(ROWS)};
const struct field_table RIG_WATCHDOG_FIELDS = {"watchdog", "communication watchdog of a device",
                                                WATCHDOG_ROWS, FIELD_COUNT(WATCHDOG_ROWS)};

static void check_unit(struct rig_loader *loader, const struct yaml_node *node,
                       const struct rig_device *device)
{
	const struct rig *rig = loader->rig;
	bool tcp = rig->links[device->link].config.tcp_host;
	if (device->unit > UNIT_MOST && !(tcp && device->unit == UNIT_UNADDRESSED))
		rig_fault(loader, node, "unit: must be 1 to 247%s, not %d", tcp ? ", or 255" : "",
		          device->unit);
	for (size_t i = 0; i < rig->device_count; i++)
		if (rig->devices[i].link == device->link && rig->devices[i].unit == device->unit)
			rig_fault(loader, node, "the device '%s' is unit %d of this link already",
			          rig->devices[i].name, device->unit);
}

static void load_device(struct rig_loader *loader, const struct yaml_node *node,
                        struct rig_device *device)
{
	struct fields fields = {0};
	device->link = -1;
	device->life = -1;
	device->watchdog.tripped.channel = -1;
	bool good = bind_mapping(&loader->binder, &RIG_DEVICE_FIELDS, node, &fields);
	device->unit = (uint8_t)fields.unit;
	device->under_test = fields.under_test;
	device->life_within_ns = fields.life_within_ns;
	device->max_registers = (int)fields.max_registers;
	device->gaps_allowed = fields.gaps == 1;
	device->minimum_pause_ns = fields.minimum_pause_ns;
	device->in_flight = (int)fields.in_flight;
	const struct yaml_node *link = yaml_get(node, "link");
	device->link = link ? rig_reference(loader, link, "link", rig_link_find) : -1;
	if (!good || device->link < 0)
		return;
	check_unit(loader, yaml_get(node, "unit"), device);
	if (device->in_flight > 1 && !loader->rig->links[device->link].config.tcp_host)
		rig_fault(loader, yaml_get(node, "in_flight"),
		          "in_flight: a serial line carries one request at a time");
}

static void check_under_test(struct rig_loader *loader, const struct yaml_node *node,
                             bool had_faults)
{
	const struct rig *rig = loader->rig;
	const char *first = NULL;
	for (size_t i = 0; i < rig->device_count; i++) {
		if (!rig->devices[i].under_test)
			continue;
		if (first)
			faults_add(loader->faults, rig->devices[i].at,
			           "the device '%s' is under test already: exactly one is", first);
		else
			first = rig->devices[i].name;
	}
	if (!first && rig->device_count > 0 && !had_faults)
		rig_fault(loader, node, "no device says `under_test: yes`: exactly one must");
}

int rig_devices_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "devices"))
		return 0;
	rig->devices = arena_array(loader->arena, node->count + 1, sizeof *rig->devices);
	if (!rig->devices)
		return rig_no_memory(loader);
	size_t before = faults_total(loader->faults);
	if (node->count == 0)
		rig_fault(loader, node, "a rig needs at least one device");
	for (size_t i = 0; i < node->count; i++) {
		struct rig_device *device = &rig->devices[rig->device_count];
		device->at = node->pairs[i].key->at;
		if (!bind_name(&loader->binder, node->pairs[i].key, &device->name))
			continue;
		load_device(loader, node->pairs[i].value, device);
		rig->device_count++;
	}
	check_under_test(loader, node, faults_total(loader->faults) != before);
	return 0;
}

/* A channel that must belong to the device; -1 after a fault. */
static int own_channel(struct rig_loader *loader, const struct yaml_node *node, int device)
{
	const struct rig *rig = loader->rig;
	int channel = channel_load(&loader->steps, node);
	if (channel < 0 || !rig->channels[channel].info.unit)
		return -1;
	if (rig->channels[channel].device != device) {
		rig_fault(loader, node, "'%s' is not a channel of %s", rig->channels[channel].info.name,
		          rig->devices[device].name);
		return -1;
	}
	return channel;
}

static int load_identity(struct rig_loader *loader, const struct yaml_node *node, int index)
{
	struct rig_device *device = &loader->rig->devices[index];
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "an identity"))
		return 0;
	device->identity = arena_array(loader->arena, node->count + 1, sizeof *device->identity);
	if (!device->identity)
		return rig_no_memory(loader);
	for (size_t i = 0; i < node->count; i++) {
		struct identity_item item = {0};
		bool good = bind_name(&loader->binder, node->pairs[i].key, &item.key);
		item.channel = own_channel(loader, node->pairs[i].value, index);
		if (good && item.channel >= 0)
			device->identity[device->identity_count++] = item;
	}
	return 0;
}

static void load_life(struct rig_loader *loader, const struct yaml_node *node, int index)
{
	const struct rig *rig = loader->rig;
	int channel = own_channel(loader, node, index);
	if (channel < 0 || !channel_has_number(&loader->steps, channel, node->at))
		return;
	if (rig->channels[channel].command)
		rig_fault(loader, node, "'%s' is a command: it moves only when this program writes it",
		          rig->channels[channel].info.name);
	rig->devices[index].life = channel;
}

static int load_watchdog(struct rig_loader *loader, const struct yaml_node *node,
                         struct rig_watchdog *watchdog)
{
	const struct yaml_node *tripped = yaml_get(node, "tripped"), *arm = yaml_get(node, "arm"),
	                       *clear = yaml_get(node, "clear");
	watchdog->given = bind_mapping(&loader->binder, &RIG_WATCHDOG_FIELDS, node, watchdog);
	loader->steps.allowed = 1u << STEP_SET | 1u << STEP_HOLD | 1u << STEP_AWAIT;
	if (tripped)
		condition_load(&loader->steps, tripped, NULL, &watchdog->tripped);
	if (arm &&
	    steps_load(&loader->steps, arm, &watchdog->arm, &watchdog->arm_count, loader->reterr) < 0)
		return -1;
	return clear ? steps_load(&loader->steps, clear, &watchdog->clear, &watchdog->clear_count,
	                          loader->reterr)
	             : 0;
}

int rig_devices_finish(struct rig_loader *loader, const struct yaml_node *node)
{
	for (size_t i = 0; node->kind == YAML_MAPPING && i < node->count; i++) {
		const struct yaml_node *key = node->pairs[i].key, *device = node->pairs[i].value;
		int index = rig_device_find(loader->rig, key->text, key->length);
		if (index < 0 || device->kind != YAML_MAPPING)
			continue;
		const struct yaml_node *identity = yaml_get(device, "identity"),
		                       *life = yaml_get(device, "life"),
		                       *watchdog = yaml_get(device, "watchdog");
		if (identity && load_identity(loader, identity, index) < 0)
			return -1;
		if (life)
			load_life(loader, life, index);
		if (watchdog && load_watchdog(loader, watchdog, &loader->rig->devices[index].watchdog) < 0)
			return -1;
	}
	return 0;
}
