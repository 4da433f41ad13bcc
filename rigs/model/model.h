/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_H
#define DRIVETRIAL_MODEL_H
/*
 * The modelled bench: motor under test, its controller, load machine, torque
 * transducer, power analyser, fault box. It knows signals by name
 * ("controller.speed", "shaft.torque") and nothing of registers, channels or
 * Modbus. It shares no formula with checks/, so that a mistake in one cannot
 * hide the same mistake in the other.
 *
 * Time is int64 nanoseconds since model_new(), moved on by model_advance()
 * only; the same seed and the same calls give the same values, bit for bit.
 * A model belongs to one thread. Nothing blocks, nothing prints.
 *
 *     struct model_config config;
 *     model_config_init(&config);
 *     model_new(&config, &model, &err);
 *     model_advance(model, 5 * NS_PER_MS);
 *     double rad_s = model_read(model, model_signal_find("controller.speed", 16));
 */
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "err.h"
#include "field.h"

struct model;

enum model_device {
	MODEL_CONTROLLER = 0,
	MODEL_LOAD,
	MODEL_TRANSDUCER,
	MODEL_ANALYSER,
	MODEL_FAULT_BOX,
	MODEL_DEVICES,
};

struct model_signal {
	const char *name;                  /* "controller.current_q" */
	enum model_device device;          /* whose communication watchdog its requests feed */
	const struct dimension *dimension; /* values are SI; NULL: text */
	bool writable;
	double least, most; /* what a write may be; the device refuses others */
	const char *text;   /* one line */
};

enum model_commutation { MODEL_SINUSOIDAL = 0, MODEL_BLOCK };

/* What may be set in `model: parameters:`; the table gives keys, dimensions, defaults. */
struct model_config {
	/* nameplate, filled from the rig's machine section by the caller */
	int pole_pairs, encoder_lines;
	double flux_linkage_wb, inductance_d_h, inductance_q_h;
	double rated_speed_rad_s, rated_torque_nm, rated_current_a;
	/* parameters, by model_parameters() */
	double resistance_ohm, inertia_kgm2, load_inertia_kgm2, viscous_nms, coulomb_nm;
	double shaft_stiffness_nm_rad, shaft_damping_nms; /* stiffness 0: rigid */
	double dc_voltage_v, dc_capacitance_f, source_resistance_ohm, chopper_resistance_ohm;
	double thermal_resistance_kw, thermal_capacitance_jk;
	double control_period_s, switching_period_s, integration_step_s, dead_time_s;
	double speed_bandwidth_rad_s, current_bandwidth_rad_s; /* 0: tuned from the nameplate */
	double speed_ramp_rad_s2, speed_limit_rad_s, current_limit_a, overcurrent_a, overvoltage_v,
	    overtemperature_c;
	double refresh_s;     /* of the controller's register image */
	double relay_delay_s; /* of the fault box, largest; each is drawn in [0, it] */
	double current_offset_a, current_gain_error, current_step_a;
	double current_noise_a, torque_noise_nm, speed_noise_rad_s;
	double ambient_c;
	int commutation;                      /* enum model_commutation */
	const char *firmware, *serial_number; /* texts that it answers */
	uint64_t seed;
	uint64_t defects; /* bit i: row i of model_defects() */
};

/* Defaults of every parameter, and a nameplate of an invented 0.75 kW machine. */
void model_config_init(struct model_config *config);
/* Field table of `model: parameters:`; offsets are into struct model_config. */
const struct field_table *model_parameters(void);

struct model_defect {
	const char *name;      /* "encoder-offset" */
	const char *text;      /* one line */
	const char *caught_by; /* the check meant for it: "alignment", "bench/watchdog" */
};
const struct model_defect *model_defects(size_t *ret_count); /* at most 64 */
int model_defect_find(const char *name);                     /* row, or -1 */

/* *ret_model is owned by the caller. Errors: ERR_FILE (a parameter that makes no sense), ERR_NOMEM.
 */
int model_new(const struct model_config *config, struct model **ret_model, struct err *reterr);
void model_release(struct model *model); /* takes NULL */

/* Moves time on; an earlier time changes nothing. Costs about 0.25 us a control period. */
void model_advance(struct model *model, int64_t until_ns);
int64_t model_now(const struct model *model);

const struct model_signal *model_signals(size_t *ret_count);
int model_signal_find(const char *name, size_t length); /* row, or -1 */

/*
 * The value that the device would answer now, in SI. Of the controller: what
 * stands in its register image, refreshed every refresh_s; yes/no signals are
 * 0 or 1. Of the analyser: phase currents and rotor angle latched together.
 */
double model_read(struct model *model, int signal);
/* Text signals (firmware, serial number). Borrowed. "" for others. */
const char *model_read_text(const struct model *model, int signal);

enum model_answer {
	MODEL_ACCEPTED = 0,
	MODEL_BAD_FUNCTION = 1, /* the Modbus exception codes that a device gives */
	MODEL_BAD_ADDRESS = 2,
	MODEL_BAD_VALUE = 3,
	MODEL_DEVICE_FAILURE = 4,
	MODEL_BUSY = 6,
};
/* A write as the device takes it, in SI. */
enum model_answer model_write(struct model *model, int signal, double value);
/* Whether a write would be taken; changes nothing. A device checks a whole request first. */
enum model_answer model_write_check(const struct model *model, int signal, double value);

/* A valid request has reached a device: feeds its communication watchdog. */
void model_heard(struct model *model, enum model_device device);

/*
 * True where the defect `wrong-exception` or another that lies in the request
 * handling, not in the model, is set; for rigs/served.c.
 */
bool model_has_defect(const struct model *model, const char *name);

#endif
