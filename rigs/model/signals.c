/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Signals by name, read and written. The list is a header with one row a
 * signal, from which the public table and the table of places are made, so
 * that both have the same rows. Values that a device keeps in its register
 * image are read from there; commands are read back as written. A function
 * for each signal was rejected: most are a number at an offset.
 */
#include <math.h>
#include <string.h>

#include "model_inner.h"

enum holds { HOLDS_DOUBLE, HOLDS_INT, HOLDS_BOOL, HOLDS_LIFE, HOLDS_NS, HOLDS_RELAY, HOLDS_TEXT };

enum what { /* a write does */
	        WRITE_NOTHING = 0,
	        WRITE_SPEED,
	        WRITE_CONTROL,
	        WRITE_WATCHDOG,
	        WRITE_LOAD_TORQUE,
	        WRITE_LOAD_CONTROL,
	        WRITE_LOAD_WATCHDOG,
	        WRITE_RELAY,
};

struct where {
	enum holds holds;
	enum what what;
	size_t offset; /* in struct model; of a relay: its number */
};

static const struct model_signal SIGNALS[] = {
#define SHOWN(name, device, dim, holds, member, line) {name, device, &(dim), false, 0, 0, line},
#define WRITTEN(name, what, device, dim, low, high, holds, member, line)                           \
	{name, device, &(dim), true, low, high, line},
#define RELAY(name, relay, line) {name, MODEL_FAULT_BOX, &DIM_NUMBER, true, 0, 1, line},
#define TEXT(name, member, line) {name, MODEL_CONTROLLER, NULL, false, 0, 0, line},
#include "model_signal_list.h"
#undef SHOWN
#undef WRITTEN
#undef RELAY
#undef TEXT
};

static const struct where PLACES[] = {
#define SHOWN(name, device, dim, holds, member, line)                                              \
	{holds, WRITE_NOTHING, offsetof(struct model, member)},
#define WRITTEN(name, what, device, dim, low, high, holds, member, line)                           \
	{holds, what, offsetof(struct model, member)},
#define RELAY(name, relay, line) {HOLDS_RELAY, WRITE_RELAY, relay},
#define TEXT(name, member, line) {HOLDS_TEXT, WRITE_NOTHING, offsetof(struct model, member)},
#include "model_signal_list.h"
#undef SHOWN
#undef WRITTEN
#undef RELAY
#undef TEXT
};

enum { SIGNAL_COUNT = sizeof SIGNALS / sizeof SIGNALS[0] };

const struct model_signal *model_signals(size_t *ret_count)
{
	*ret_count = SIGNAL_COUNT;
	return SIGNALS;
}

int model_signal_find(const char *name, size_t length)
{
	for (int i = 0; i < SIGNAL_COUNT; i++)
		if (strlen(SIGNALS[i].name) == length && memcmp(SIGNALS[i].name, name, length) == 0)
			return i;
	return -1;
}

double model_read(struct model *model, int signal)
{
	if (signal < 0 || signal >= SIGNAL_COUNT)
		return (double)NAN;
	const struct where *where = &PLACES[signal];
	const void *at = (const char *)model + where->offset;
	switch (where->holds) {
	case HOLDS_DOUBLE:
		return *(const double *)at;
	case HOLDS_INT:
		return *(const int *)at;
	case HOLDS_BOOL:
		return *(const bool *)at;
	case HOLDS_LIFE:
		return *(const uint16_t *)at;
	case HOLDS_NS:
		return (double)*(const int64_t *)at * 1e-9;
	case HOLDS_RELAY:
		return model->fault_box.relays[where->offset].wanted;
	case HOLDS_TEXT:
		break;
	}
	return (double)NAN;
}

const char *model_read_text(const struct model *model, int signal)
{
	if (signal < 0 || signal >= SIGNAL_COUNT || PLACES[signal].holds != HOLDS_TEXT)
		return "";
	return (const char *)model + PLACES[signal].offset;
}

static double rated_torque(const struct model_config *config)
{
	if (config->rated_torque_nm > 0)
		return config->rated_torque_nm;
	return 1.5 * config->pole_pairs * config->flux_linkage_wb * config->rated_current_a;
}

/* Largest magnitude that a command may have, by the nameplate. */
static double command_most(const struct model *model, enum what what)
{
	if (what == WRITE_SPEED)
		return model->controller.speed_most_rad_s;
	if (what == WRITE_LOAD_TORQUE)
		return 1.5 * rated_torque(&model->config) * (1 + 1e-9);
	return HUGE_VAL;
}

enum model_answer model_write_check(const struct model *model, int signal, double value)
{
	if (signal < 0 || signal >= SIGNAL_COUNT || !SIGNALS[signal].writable)
		return MODEL_BAD_ADDRESS;
	const struct model_signal *row = &SIGNALS[signal];
	enum what what = PLACES[signal].what;
	if (!(value >= row->least && value <= row->most))
		return MODEL_BAD_VALUE;
	enum holds holds = PLACES[signal].holds;
	if ((holds == HOLDS_INT || holds == HOLDS_RELAY) && value != floor(value))
		return MODEL_BAD_VALUE;
	bool lenient =
	    what == WRITE_SPEED && (defect_in(model->config.defects, DEFECT_OUT_OF_RANGE_ACCEPTED) ||
	                            defect_in(model->config.defects, DEFECT_CLIPS_SILENTLY));
	if (fabs(value) > command_most(model, what) && !lenient)
		return MODEL_BAD_VALUE;
	return MODEL_ACCEPTED;
}

enum model_answer model_write(struct model *model, int signal, double value)
{
	enum model_answer answer = model_write_check(model, signal, value);
	if (answer != MODEL_ACCEPTED)
		return answer;
	struct controller *controller = &model->controller;
	switch (PLACES[signal].what) {
	case WRITE_SPEED:
		if (fabs(value) > controller->speed_most_rad_s &&
		    defect_in(model->config.defects, DEFECT_CLIPS_SILENTLY))
			value = copysign(controller->speed_most_rad_s, value);
		controller->speed_command_rad_s = value;
		break;
	case WRITE_CONTROL:
		controller_control(controller, (int)value, model->now_ns);
		break;
	case WRITE_WATCHDOG:
		controller->watchdog_ns = llround(value * 1e9);
		break;
	case WRITE_LOAD_TORQUE:
		model->load.command_nm = value;
		break;
	case WRITE_LOAD_CONTROL:
		load_control(&model->load, (int)value, model->now_ns);
		break;
	case WRITE_LOAD_WATCHDOG:
		model->load.watchdog_ns = llround(value * 1e9);
		break;
	case WRITE_RELAY:
		fault_box_set(&model->fault_box, (enum relay_name)PLACES[signal].offset, value != 0,
		              model->now_ns);
		break;
	case WRITE_NOTHING:
		return MODEL_BAD_ADDRESS;
	}
	return MODEL_ACCEPTED;
}
