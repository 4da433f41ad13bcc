/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_INNER_H
#define DRIVETRIAL_MODEL_INNER_H
/*
 * What the files of rigs/model share beyond their own headers: the defects by
 * identifier, small numbers, and struct model itself. Not for other folders,
 * but for the unit tests of this one.
 */
#include "model.h"
#include "model_controller.h"
#include "model_encoder.h"
#include "model_load.h"
#include "model_noise.h"
#include "model_plant.h"

struct relay {
	bool wanted; /* what was written, and is read back */
	bool closed; /* what the bench feels */
	int64_t due_ns;
};

enum relay_name {
	RELAY_ENCODER_OPEN = 0,
	RELAY_HOT_SENSOR,
	RELAY_SUPPLY_SURGE,
	RELAY_CURRENT_SURGE,
	RELAY_SUPPLY_SAG,
	RELAY_PHASE_OPEN,
	RELAY_STO_A,
	RELAY_STO_B,
	RELAYS,
};

struct fault_box {
	struct relay relays[RELAYS];
	int64_t delay_ns;
	struct noise noise;
};

struct transducer {
	/* how this one was built */
	double torque_gain, torque_offset_nm, speed_gain;
	double lag_share; /* of the way to the true torque that a control period goes */
	double torque_nm; /* behind the lag */
	double torque_noise_nm, speed_noise_rad_s;
	struct noise noise;
	/* the register image */
	double shown_torque_nm, shown_speed_rad_s;
	uint16_t life;
};

struct analyser {
	double current_gain, angle_offset_rad;
	double current_noise_a, angle_noise_rad;
	struct noise noise;
	double current_a[3], angle_elec_rad, dc_voltage_v;
	uint16_t life;
};

/* What the controller answers: copied from it as a whole, every refresh time. */
struct image {
	double speed_rad_s, dc_voltage_v, current_d_a, current_q_a, torque_nm, temperature_c;
	double current_d_command_a, current_q_command_a, duty[3];
	double voltage_alpha_v, voltage_beta_v, voltage_d_v, voltage_q_v, position_rad;
	int fault_code, state, torque_off_inputs;
	bool running, ready;
	int rotor_counts;
	uint16_t life;
};

enum { IMAGE_HISTORY = 256 };

struct model {
	struct model_config config; /* with every 0 filled from the nameplate */
	char firmware[64], serial_number[64];
	int64_t now_ns, step_ns, grid_ns; /* grid: the newest control instant that is done */
	int64_t millisecond_ns, refresh_ns, next_millisecond_ns, next_refresh_ns;
	double step_s;
	int parts; /* integration steps of a control period */

	struct plant plant;
	struct encoder encoder;
	struct controller controller;
	struct load_machine load;
	struct transducer transducer;
	struct analyser analyser;
	struct fault_box fault_box;

	struct image image;
	struct image past[IMAGE_HISTORY]; /* of the defect stale-image */
	size_t past_count;
	int64_t freeze_at_ns;
	struct noise sensor_noise;
	double sensor_noise_a, sensor_offset_a[2], sensor_gain[2];
};

/* devices.c: the bench around the drive. */
void devices_init(struct model *model);
void fault_box_set(struct fault_box *box, enum relay_name relay, bool on, int64_t now_ns);
void fault_box_step(struct fault_box *box, int64_t now_ns);
void transducer_step(struct transducer *transducer, const struct plant *plant);
void transducer_latch(struct transducer *transducer, const struct plant *plant, uint16_t life);
void analyser_latch(struct analyser *analyser, const struct plant *plant, uint16_t life);

#endif
