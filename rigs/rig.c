/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Loads a rig: the order of its sections, and the look-ups in a loaded one. All
 * sections are read even after a fault, so that one start shows them all.
 * Channels are found linearly: a rig has some dozens, and names are resolved
 * while loading only.
 */
#include "rig.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "rig_loader.h"

static const char *const ATTENDANCE[] = {"attended", "unattended", NULL};

/* What stands at the top and is no section. */
struct head {
	const char *name, *note;
	int attendance;
	int64_t rest_within_ns, stale_after_ns;
};

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "rig", .kind = FIELD_NAME, .flags = FIELD_REQUIRED, .offset = offsetof(struct head, name),
	 .text = "name of the bench: used for its lock and in reports"},
	{.key = "note", .kind = FIELD_TEXT, .fallback = "", .offset = offsetof(struct head, note),
	 .text = "what it is, for people"},
	{.key = "attendance", .kind = FIELD_CHOICE, .choices = ATTENDANCE, .fallback = "attended",
	 .offset = offsetof(struct head, attendance), .text = "whether somebody stands beside it during a run"},
	{.key = "rest_within", .kind = FIELD_DURATION, .flags = FIELD_POSITIVE, .fallback = "30 s",
	 .offset = offsetof(struct head, rest_within_ns), .text = "longest time that confirming rest may take"},
	{.key = "stale_after", .kind = FIELD_DURATION, .flags = FIELD_POSITIVE, .fallback = "1 s",
	 .offset = offsetof(struct head, stale_after_ns), .text = "a link without a good reply for as long aborts the run"},
	{.key = "links", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the wires, by name"},
	{.key = "devices", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the Modbus servers, by name"},
	{.key = "machine", .kind = FIELD_OWN, .text = "nameplate of the motor under test"},
	{.key = "channels", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "the quantities, by name"},
	{.key = "before", .kind = FIELD_OWN, .text = "conditions that must hold before each test"},
	{.key = "interlocks", .kind = FIELD_OWN, .text = "conditions that hold during the whole run"},
	{.key = "safe_state", .kind = FIELD_OWN, .text = "steps that bring the bench to rest and confirm it"},
	{.key = "direction", .kind = FIELD_OWN, .text = "how the signs of command and instruments are proven first"},
	{.key = "attempts", .kind = FIELD_OWN, .text = "what a test may try although it must be refused"},
	{.key = "parameters", .kind = FIELD_OWN, .text = "file beside this one with the values that the drive must have: CHANNEL: VALUE"},
	{.key = "model", .kind = FIELD_OWN, .text = "what the modelled bench serves; only for rehearse and serve"},
};
/* clang-format on */
const struct field_table RIG_FIELDS = {"rig", "the bench", ROWS, FIELD_COUNT(ROWS)};

int rig_no_memory(struct rig_loader *loader)
{
	return err_set(loader->reterr, ERR_NOMEM, "memory ran out while loading the rig");
}

void rig_fault(struct rig_loader *loader, const struct yaml_node *node, const char *format, ...)
{
	char message[512];
	va_list args;
	va_start(args, format);
	(void)vsnprintf(message, sizeof message, format, args);
	va_end(args);
	faults_add(loader->faults, node->at, "%s", message);
}

static const char *link_name(const struct rig *rig, size_t i)
{
	return i < rig->link_count ? rig->links[i].name : NULL;
}

static const char *device_name(const struct rig *rig, size_t i)
{
	return i < rig->device_count ? rig->devices[i].name : NULL;
}

static const char *channel_name(const struct rig *rig, size_t i)
{
	return i < rig->channel_count ? rig->channels[i].info.name : NULL;
}

static int find(const struct rig *rig, const char *(*name_of)(const struct rig *, size_t),
                const char *name, size_t length)
{
	const char *candidate;
	for (size_t i = 0; (candidate = name_of(rig, i)); i++)
		if (strlen(candidate) == length && memcmp(candidate, name, length) == 0)
			return (int)i;
	return -1;
}

int rig_link_find(const struct rig *rig, const char *name, size_t length)
{
	return find(rig, link_name, name, length);
}

int rig_device_find(const struct rig *rig, const char *name, size_t length)
{
	return find(rig, device_name, name, length);
}

int rig_channel_find(const struct rig *rig, const char *name, size_t length)
{
	return find(rig, channel_name, name, length);
}

int rig_reference(struct rig_loader *loader, const struct yaml_node *node, const char *what,
                  int (*lookup)(const struct rig *, const char *, size_t))
{
	const char *name;
	if (!bind_name(&loader->binder, node, &name))
		return -1;
	int found = lookup(loader->rig, name, strlen(name));
	if (found >= 0)
		return found;
	const char *(*name_of)(const struct rig *, size_t) = lookup == rig_link_find     ? link_name
	                                                     : lookup == rig_device_find ? device_name
	                                                                                 : channel_name;
	const char *candidate, *nearest = NULL;
	size_t best = SIZE_MAX;
	for (size_t i = 0; (candidate = name_of(loader->rig, i)); i++) {
		size_t distance = text_distance(name, candidate);
		if (distance < best && text_nearest(name, &candidate, 1)) {
			best = distance;
			nearest = candidate;
		}
	}
	rig_fault(loader, node, "there is no %s '%s'%s%s%s", what, name,
	          nearest ? "; did you mean '" : "", nearest ? nearest : "", nearest ? "'?" : "");
	return -1;
}

int rig_channel_device(const struct rig *rig, int channel)
{
	/* Loading has refused cycles; the bound holds while it has not yet. */
	for (size_t i = 0; i <= rig->channel_count && channel >= 0; i++) {
		const struct rig_channel *c = &rig->channels[channel];
		if (c->place != PLACE_DERIVED)
			return c->device;
		channel = c->derivation.inputs[0];
	}
	return -1;
}

void rig_channel_needs(const struct rig *rig, int channel, unsigned char *set)
{
	if (channel < 0 || set[channel])
		return;
	const struct rig_channel *c = &rig->channels[channel];
	set[channel] = 1;
	if (c->place != PLACE_DERIVED)
		return;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST; i++)
		rig_channel_needs(rig, c->derivation.inputs[i], set);
}

static void load_head(struct rig_loader *loader, const struct yaml_node *root)
{
	struct head head = {0};
	(void)bind_mapping(&loader->binder, &RIG_FIELDS, root, &head);
	struct rig *rig = loader->rig;
	rig->name = head.name;
	rig->note = head.note;
	rig->unattended = head.attendance == 1;
	rig->rest_within_ns = head.rest_within_ns;
	rig->stale_after_ns = head.stale_after_ns;
}

static int load_machine(struct rig_loader *loader, const struct yaml_node *node)
{
	rig_machine_load(loader, node);
	return 0;
}

/* Interlocks and attempts stand before the steps, which ask for them. */
static const struct {
	const char *key;
	int (*load)(struct rig_loader *loader, const struct yaml_node *node);
} SECTIONS[] = {
    {"links", rig_links_load},       {"devices", rig_devices_load},
    {"machine", load_machine},       {"channels", rig_channels_load},
    {"before", rig_before_load},     {"interlocks", rig_interlocks_load},
    {"attempts", rig_attempts_load}, {"safe_state", rig_safe_state_load},
    {"devices", rig_devices_finish}, {"direction", rig_directions_load},
    {"parameters", rig_parameters_load}, {"model", rig_model_load},
};

/* The infos once more, side by side, as checks want them. */
static int copy_infos(struct rig_loader *loader)
{
	struct rig *rig = loader->rig;
	rig->infos = arena_array(loader->arena, rig->channel_count + 1, sizeof *rig->infos);
	if (!rig->infos)
		return rig_no_memory(loader);
	for (size_t i = 0; i < rig->channel_count; i++)
		rig->infos[i] = rig->channels[i].info;
	return 0;
}

static void check_whole(struct rig_loader *loader, const struct yaml_node *root)
{
	const struct rig *rig = loader->rig;
	for (size_t i = 0; i < rig->channel_count && rig->safe_state_count == 0; i++)
		if (rig->channels[i].command && !yaml_get(root, "safe_state")) {
			rig_fault(loader, root,
			          "the key 'safe_state' is missing in a rig: it has commands, so it must say "
			          "how the bench comes to rest");
			return;
		}
}

static int load_sections(struct rig_loader *loader, const struct yaml_node *root)
{
	rig_machine_load(loader, NULL); /* nothing known, where the section is absent */
	for (size_t i = 0; i < FIELD_COUNT(SECTIONS); i++) {
		const struct yaml_node *node = yaml_get(root, SECTIONS[i].key);
		if (node && SECTIONS[i].load(loader, node) < 0)
			return -1;
	}
	check_whole(loader, root);
	return copy_infos(loader);
}

int rig_load(const char *path, struct arena *arena, struct faults *faults,
             const struct rig **ret_rig, struct err *reterr)
{
	*ret_rig = NULL;
	const struct yaml_file *file = NULL;
	struct yaml_node *root = NULL;
	size_t before = faults_total(faults);
	if (yaml_load(path, arena, faults, &file, &root, reterr) < 0)
		return -1;
	if (!root)
		return 0;
	struct rig_loader loader = {
	    .rig = arena_alloc(arena, sizeof(struct rig)),
	    .arena = arena,
	    .faults = faults,
	    .binder = {.arena = arena, .faults = faults},
	    .reterr = reterr,
	};
	if (!loader.rig)
		return rig_no_memory(&loader);
	loader.rig->file = file;
	/* The lists of a rig must work from whatever is commanded: `continues`. */
	loader.steps = (struct step_context){
	    .rig = loader.rig, .arena = arena, .faults = faults, .continues = true};
	if (!bind_expect(&loader.binder, root, YAML_MAPPING, "a rig file"))
		return 0;
	load_head(&loader, root);
	if (load_sections(&loader, root) < 0)
		return -1;
	if (faults_total(faults) == before)
		*ret_rig = loader.rig;
	return 0;
}
