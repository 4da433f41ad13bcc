/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Binds the `model:` section of a rig to the signals of the modelled bench.
 * Every channel that is read from a device must be served: a channel that was
 * silently answered with zeros would rehearse a bench that does not exist.
 */
#include "served_inner.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "bind.h"

static void nameplate(struct model_config *config, const struct machine *machine)
{
	if (machine->pole_pairs > 0)
		config->pole_pairs = machine->pole_pairs;
	if (machine->encoder_lines > 0)
		config->encoder_lines = machine->encoder_lines;
	const struct {
		double value, *target;
	} rows[] = {
	    {machine->flux_linkage.value, &config->flux_linkage_wb},
	    {machine->inductance_d.value, &config->inductance_d_h},
	    {machine->inductance_q.value, &config->inductance_q_h},
	    {machine->rated_speed.value, &config->rated_speed_rad_s},
	    {machine->rated_torque.value, &config->rated_torque_nm},
	    {machine->rated_current.value, &config->rated_current_a},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
		if (isfinite(rows[i].value))
			*rows[i].target = rows[i].value;
}

/* Parameters of the file; resistance and DC voltage fall back to the nameplate. */
static void parameters(struct served *served, struct faults *faults, struct model_config *config)
{
	const struct rig *rig = served->rig;
	const struct yaml_node *given = rig->model_parameters;
	const struct binder binder = {.arena = &served->arena, .faults = faults};
	if (given)
		(void)bind_mapping(&binder, model_parameters(), given, config);
	if (isfinite(rig->machine.resistance.value) && !(given && yaml_get(given, "resistance")))
		config->resistance_ohm = rig->machine.resistance.value;
	if (isfinite(rig->machine.dc_voltage.value) && !(given && yaml_get(given, "dc_voltage")))
		config->dc_voltage_v = rig->machine.dc_voltage.value;
}

/* The row of a signal that fits the channel; -1 after a fault. */
static int bind_signal(const struct rig_channel *channel, const struct served_channel *serves,
                       struct faults *faults)
{
	size_t count;
	const struct model_signal *signals = model_signals(&count);
	int row = model_signal_find(serves->signal, strlen(serves->signal));
	char wanted[64], have[64];

	if (row < 0) {
		const char *names[128];
		size_t known = count < 128 ? count : 128;
		for (size_t i = 0; i < known; i++)
			names[i] = signals[i].name;
		const char *nearest = known > 0 ? text_nearest(serves->signal, names, known) : NULL;
		faults_add(faults, serves->at, "the modelled bench has no signal '%s'%s%s%s",
		           serves->signal, nearest ? "; did you mean '" : "", nearest ? nearest : "",
		           nearest ? "'?" : "");
		return -1;
	}
	const struct model_signal *signal = &signals[row];
	bool is_text = channel->codec.type == CODEC_TEXT || channel->place == PLACE_IDENTIFICATION;
	if (is_text != (signal->dimension == NULL)) {
		faults_add(faults, serves->at, "%s is %s, but the signal %s is %s", channel->info.name,
		           is_text ? "text" : "a number", signal->name,
		           signal->dimension ? "a number" : "text");
		return -1;
	}
	if (!is_text && !dimension_agrees(channel->info.unit->dimension, *signal->dimension)) {
		faults_add(faults, serves->at, "%s is in %s (%s), but the signal %s is %s",
		           channel->info.name, channel->info.unit->name,
		           dimension_name(channel->info.unit->dimension, have, sizeof have), signal->name,
		           dimension_name(*signal->dimension, wanted, sizeof wanted));
		return -1;
	}
	if (channel->command && !signal->writable) {
		faults_add(faults, serves->at, "%s is a command, but the signal %s cannot be written",
		           channel->info.name, signal->name);
		return -1;
	}
	return row;
}

static int width_of(const struct rig_channel *channel)
{
	bool one = channel->place == PLACE_COIL || channel->place == PLACE_DISCRETE_INPUT ||
	           channel->place == PLACE_IDENTIFICATION;
	return one ? 1 : codec_registers(&channel->codec);
}

static const struct served_channel *find_serves(const struct rig *rig, int channel)
{
	for (size_t i = 0; i < rig->served_count; i++)
		if (rig->served[i].channel == channel)
			return &rig->served[i];
	return NULL;
}

static int add_entry(struct served *served, int index, struct faults *faults)
{
	const struct rig_channel *channel = &served->rig->channels[index];
	const struct served_channel *serves = find_serves(served->rig, index);
	struct served_device *device = &served->devices[channel->device];
	struct served_area *area = &device->areas[channel->place];

	if (!serves) {
		faults_add(faults, channel->at,
		           "the model section does not say which signal is served on %s",
		           channel->info.name);
		return 0;
	}
	int signal = bind_signal(channel, serves, faults);
	if (signal < 0)
		return 0;
	if (!area->entries)
		area->entries =
		    arena_array(&served->arena, served->rig->channel_count, sizeof *area->entries);
	if (!area->entries)
		return -1;
	size_t count;
	device->heard |= 1u << model_signals(&count)[signal].device;
	area->entries[area->count++] = (struct served_entry){
	    .channel = channel,
	    .signal = signal,
	    .first = channel->address,
	    .end = channel->address + width_of(channel),
	};
	return 0;
}

/* The used range of an area, and room for its image. */
static int lay_out(struct served *served, struct served_area *area)
{
	if (area->count == 0)
		return 0;
	area->first = area->entries[0].first;
	for (size_t i = 0; i < area->count; i++) {
		const struct served_entry *entry = &area->entries[i];
		area->first = entry->first < area->first ? entry->first : area->first;
		area->end = entry->end > area->end ? entry->end : area->end;
	}
	size_t length = (size_t)(area->end - area->first);
	area->image = arena_array(&served->arena, length, sizeof *area->image);
	area->described = arena_array(&served->arena, length, sizeof *area->described);
	if (!area->image || !area->described)
		return -1;
	for (size_t i = 0; i < area->count; i++)
		for (int at = area->entries[i].first; at < area->entries[i].end; at++)
			area->described[at - area->first] = 1;
	return 0;
}

static int bind_map(struct served *served, struct faults *faults)
{
	const struct rig *rig = served->rig;
	served->devices = arena_array(&served->arena, rig->device_count, sizeof *served->devices);
	if (!served->devices)
		return -1;
	for (size_t i = 0; i < rig->device_count; i++)
		served->devices[i].device = &rig->devices[i];
	for (size_t i = 0; i < rig->channel_count; i++)
		if (rig->channels[i].place != PLACE_DERIVED && add_entry(served, (int)i, faults) < 0)
			return -1;
	for (size_t i = 0; i < rig->device_count; i++)
		for (int place = PLACE_COIL; place <= PLACE_HOLDING_REGISTER; place++)
			if (lay_out(served, &served->devices[i].areas[place]) < 0)
				return -1;
	return 0;
}

/* Defects that lie in the handling of requests; those of a device are the controller's. */
static void bind_defects(struct served *served)
{
	for (size_t i = 0; i < served->rig->device_count; i++) {
		struct served_device *device = &served->devices[i];
		if (!device->device->under_test)
			continue;
		device->wrong_exception = model_has_defect(served->model, "wrong-exception");
		device->writes_neighbour = model_has_defect(served->model, "writes-neighbour");
		device->swaps_words = model_has_defect(served->model, "word-order-swapped");
		device->tears = model_has_defect(served->model, "torn");
	}
}

int served_new(const struct rig *rig, uint64_t seed, uint64_t defects, struct faults *faults,
               struct served **ret_served, struct err *reterr)
{
	struct model_config config;
	const size_t faults_before = faults->count + faults->more;
	int rc = -1;

	*ret_served = NULL;
	struct served *served = calloc(1, sizeof *served);
	if (!served)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	arena_init(&served->arena, 0);
	served->rig = rig;
	if (!rig->has_model) {
		faults_add(faults, (struct position){.file = rig->file, .line = 1, .column = 1},
		           "this rig has no 'model' section: it says which signal of the modelled bench is "
		           "served on each channel");
		rc = 0;
		goto out;
	}
	model_config_init(&config);
	nameplate(&config, &rig->machine);
	parameters(served, faults, &config);
	config.seed = seed;
	config.defects = defects;
	if (bind_map(served, faults) < 0) {
		err_set(reterr, ERR_NOMEM, "memory ran out");
		goto out;
	}
	if (faults->count + faults->more > faults_before) {
		rc = 0;
		goto out;
	}
	if (model_new(&config, &served->model, reterr) < 0)
		goto out;
	bind_defects(served);
	*ret_served = served;
	return 0;
out:
	served_release(served);
	return rc;
}

void served_release(struct served *served)
{
	if (!served)
		return;
	model_release(served->model);
	arena_release(&served->arena);
	free(served);
}

struct model *served_model(struct served *served)
{
	return served->model;
}
