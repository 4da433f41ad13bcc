/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The parameters of a rig's `model:` section: one table, whose defaults are
 * written as a user would write them and parsed by the same code as his. A
 * second list of defaults in C was rejected: it would differ from what the
 * reference page says.
 */
#include <math.h>
#include <string.h>

#include "model_inner.h"

#define QUANTITY(name, dim, low, high, standard, member, line)                                     \
	{                                                                                              \
		.key = (name), .kind = FIELD_QUANTITY, .dimension = &(dim), .least = (low),                \
		.most = (high), .fallback = (standard), .offset = offsetof(struct model_config, member),   \
		.text = (line)                                                                             \
	}
#define TEXT(name, standard, member, line)                                                         \
	{                                                                                              \
		.key = (name), .kind = FIELD_TEXT, .fallback = (standard),                                 \
		.offset = offsetof(struct model_config, member), .text = (line)                            \
	}

static const char *const COMMUTATIONS[] = {"sinusoidal", "block", NULL};

/* clang-format off */
static const struct field FIELDS[] = {
	QUANTITY("resistance", DIM_RESISTANCE, 1e-4, 1e3, "0.9 ohm", resistance_ohm,
	         "stator resistance of a phase at 20 degC; it rises with the winding's temperature"),
	QUANTITY("inertia", DIM_INERTIA, 1e-7, 1e3, "0.0011 kgm2", inertia_kgm2,
	         "inertia of the whole shaft: motor, couplings and load machine"),
	QUANTITY("load_inertia", DIM_INERTIA, 0, 1e3, "0 kgm2", load_inertia_kgm2,
	         "part of it behind the torque transducer, at the load machine; 0: 90 %"),
	QUANTITY("viscous_friction", DIM_VISCOUS, 0, 10, "0.0005 Nms", viscous_nms,
	         "viscous friction of the whole shaft, a fifth of it at the motor"),
	QUANTITY("coulomb_friction", DIM_TORQUE, 0, 1e3, "0.05 Nm", coulomb_nm,
	         "dry friction of the whole shaft, a fifth of it at the motor"),
	QUANTITY("shaft_stiffness", DIM_STIFFNESS, 0, 1e7, "0 Nm/rad", shaft_stiffness_nm_rad,
	         "torsional stiffness between motor and load machine; 0: rigid"),
	QUANTITY("shaft_damping", DIM_VISCOUS, 0, 100, "0.005 Nms", shaft_damping_nms,
	         "of a shaft that is not rigid"),
	QUANTITY("dc_voltage", DIM_VOLTAGE, 10, 2000, "310 V", dc_voltage_v,
	         "voltage of the supply of the DC link"),
	QUANTITY("dc_capacitance", DIM_CAPACITANCE, 1e-6, 1, "470 uF", dc_capacitance_f,
	         "capacitance of the DC link"),
	QUANTITY("source_resistance", DIM_RESISTANCE, 1e-3, 100, "0.8 ohm", source_resistance_ohm,
	         "resistance of the supply; it feeds nothing back"),
	QUANTITY("chopper_resistance", DIM_RESISTANCE, 1e-1, 1e5, "60 ohm", chopper_resistance_ohm,
	         "brake chopper: on above 1.2 times the supply voltage, off below 1.16 times"),
	QUANTITY("thermal_resistance", DIM_THERMAL_RESISTANCE, 1e-3, 1e3, "1.8 K/W",
	         thermal_resistance_kw, "winding to ambient"),
	QUANTITY("thermal_capacitance", DIM_THERMAL_CAPACITANCE, 1e-2, 1e6, "300 J/K",
	         thermal_capacitance_jk, "of the winding"),
	QUANTITY("control_period", DIM_TIME, 1e-5, 1e-3, "100 us", control_period_s,
	         "of current and speed control"),
	QUANTITY("switching_period", DIM_TIME, 1e-5, 1e-3, "100 us", switching_period_s,
	         "of the converter, which is averaged over it"),
	QUANTITY("integration_step", DIM_TIME, 1e-6, 1e-3, "100 us", integration_step_s,
	         "longest step of integration; a control period is divided into equal steps"),
	QUANTITY("speed_bandwidth", DIM_SPEED, 0, 1e4, "0 rad/s", speed_bandwidth_rad_s,
	         "of the speed loop, 1/(2 T) in the symmetric optimum; 0: by its lags"),
	QUANTITY("current_bandwidth", DIM_SPEED, 0, 1e5, "0 rad/s", current_bandwidth_rad_s,
	         "of the current loops, 1/(2 T) in the magnitude optimum; 0: by the control period"),
	{.key = "commutation", .kind = FIELD_CHOICE, .choices = COMMUTATIONS, .fallback = "sinusoidal",
	 .offset = offsetof(struct model_config, commutation),
	 .text = "sinusoidal: field-oriented control; block: two phases on, switched by Hall sensors"},
	QUANTITY("current_limit", DIM_CURRENT_AMPLITUDE, 0, 1e4, "0 A_peak", current_limit_a,
	         "of the controller; 0: 1.6 times the rated current"),
	QUANTITY("speed_ramp", DIM_ACCELERATION, 0, 1e7, "0 rad/s2", speed_ramp_rad_s2,
	         "of the controller's ramp generator; 0: commands are taken as they come"),
	QUANTITY("speed_limit", DIM_SPEED_MECH, 0, 1e5, "0 rpm", speed_limit_rad_s,
	         "largest speed command that the controller takes; 0: 1.1 times the rated speed"),
	QUANTITY("overcurrent", DIM_CURRENT_AMPLITUDE, 0, 1e4, "0 A_peak", overcurrent_a,
	         "a phase current above it trips; 0: 3 times the rated current"),
	QUANTITY("overvoltage", DIM_VOLTAGE, 0, 4000, "0 V", overvoltage_v,
	         "a DC link voltage above it trips; 0: 1.3 times the supply voltage"),
	QUANTITY("overtemperature", DIM_TEMPERATURE, 0, 400, "130 degC", overtemperature_c,
	         "a winding temperature above it trips"),
	QUANTITY("refresh", DIM_TIME, 1e-4, 10, "1 ms", refresh_s,
	         "how often the controller renews its register image"),
	QUANTITY("relay_delay", DIM_TIME, 0, 1, "12 ms", relay_delay_s,
	         "longest delay of the fault box's relays; each switching draws its own"),
	QUANTITY("dead_time", DIM_TIME, 0, 2e-5, "0 s", dead_time_s,
	         "of the converter's half bridges; takes voltage against the sign of each current"),
	QUANTITY("current_noise", DIM_CURRENT_AMPLITUDE, 0, 100, "0.02 A_peak", current_noise_a,
	         "standard deviation of the controller's current sensors; the analyser has a tenth"),
	QUANTITY("current_offset", DIM_CURRENT_AMPLITUDE, 0, 100, "0.01 A_peak", current_offset_a,
	         "largest offset of a current sensor; each bench draws its own"),
	QUANTITY("current_gain_error", DIM_NUMBER, 0, 0.5, "0.3 %", current_gain_error,
	         "largest gain error of a current sensor; each bench draws its own"),
	QUANTITY("current_step", DIM_CURRENT_AMPLITUDE, 0, 10, "0.01 A_peak", current_step_a,
	         "quantisation of the current sensors"),
	QUANTITY("torque_noise", DIM_TORQUE, 0, 100, "0.004 Nm", torque_noise_nm,
	         "standard deviation of the torque transducer"),
	QUANTITY("speed_noise", DIM_SPEED, 0, 100, "0.01 rad/s", speed_noise_rad_s,
	         "standard deviation of the transducer's speed"),
	QUANTITY("ambient", DIM_TEMPERATURE, -40, 100, "25 degC", ambient_c,
	         "temperature around the motor; the winding starts with it"),
	TEXT("firmware", "2.4.1", firmware, "version that the controller answers"),
	TEXT("serial_number", "MODEL-000001", serial_number, "that the controller answers"),
};
/* clang-format on */

static const struct field_table TABLE = {
    .name = "parameters",
    .text = "numbers of the modelled bench",
    .fields = FIELDS,
    .count = FIELD_COUNT(FIELDS),
};

const struct field_table *model_parameters(void)
{
	return &TABLE;
}

void model_config_init(struct model_config *config)
{
	memset(config, 0, sizeof *config);
	/* An invented 0.75 kW servo motor. */
	config->pole_pairs = 4;
	config->encoder_lines = 1024;
	config->flux_linkage_wb = 0.085;
	config->inductance_d_h = config->inductance_q_h = 3.1e-3;
	config->rated_speed_rad_s = 3000 * 6.28318530717958647692 / 60;
	config->rated_torque_nm = 2.4;
	config->rated_current_a = 3.4 * 1.41421356237309504880;
	config->seed = 1;
	for (size_t i = 0; i < TABLE.count; i++) {
		const struct field *field = &FIELDS[i];
		void *at = (char *)config + field->offset;
		struct quantity quantity;
		if (field->kind == FIELD_TEXT)
			*(const char **)at = field->fallback;
		else if (field->kind == FIELD_CHOICE)
			*(int *)at = MODEL_SINUSOIDAL;
		else if (quantity_parse(field->fallback, strlen(field->fallback), NULL, field->dimension,
		                        &quantity, NULL) == 0)
			*(double *)at = quantity_si(quantity);
		else
			*(double *)at = nan(""); /* a mistake of the table; model_new() refuses it */
	}
}
