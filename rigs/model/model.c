/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The bench put together, and its time. model_advance() goes from one control
 * instant to the next: the plant is integrated under the duties that were
 * computed a period ago, then the controller works on what its sensors say
 * there, then register images are renewed where their time has come. Between
 * two instants nothing happens, so values are never older than an image's
 * refresh time plus one control period's rounding, which is none when the
 * refresh time is a multiple of the period.
 *
 * Steps of variable length were rejected: the same calls must give the same
 * bits, and a step that depended on when somebody reads would not.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "model_inner.h"
#include "model_modulation.h"

#define TWO_PI 6.28318530717958647692

static int fill_from_nameplate(struct model_config *c, struct err *reterr)
{
	if (c->pole_pairs < 1 || c->pole_pairs > 100)
		return err_set(reterr, ERR_FILE, "the model needs pole_pairs between 1 and 100");
	if (c->encoder_lines < 16 || c->encoder_lines > 100000)
		return err_set(reterr, ERR_FILE, "the model needs encoder_lines between 16 and 100000");
	if (!(c->flux_linkage_wb > 0) || !(c->inductance_d_h > 0) || !(c->inductance_q_h > 0))
		return err_set(reterr, ERR_FILE,
		               "the model needs flux_linkage, inductance_d and inductance_q of the "
		               "machine, all above 0");
	if (!(c->rated_speed_rad_s > 0) || !(c->rated_current_a > 0))
		return err_set(reterr, ERR_FILE,
		               "the model needs rated_speed and rated_current of the machine, above 0");
	if (c->load_inertia_kgm2 == 0)
		c->load_inertia_kgm2 = 0.9 * c->inertia_kgm2;
	if (c->load_inertia_kgm2 >= c->inertia_kgm2)
		return err_set(reterr, ERR_FILE,
		               "load_inertia is a part of inertia and must be smaller than it");
	if (c->current_limit_a == 0)
		c->current_limit_a = 1.6 * c->rated_current_a;
	if (c->speed_limit_rad_s == 0)
		c->speed_limit_rad_s = 1.1 * c->rated_speed_rad_s;
	if (c->overcurrent_a == 0)
		c->overcurrent_a = 3 * c->rated_current_a;
	if (c->overvoltage_v == 0)
		c->overvoltage_v = 1.3 * c->dc_voltage_v;
	if (c->current_limit_a >= c->overcurrent_a)
		return err_set(reterr, ERR_FILE, "current_limit must be below overcurrent");
	if (c->overvoltage_v <= 1.2 * c->dc_voltage_v)
		return err_set(reterr, ERR_FILE,
		               "overvoltage must be above 1.2 times dc_voltage, where the chopper works");
	return 0;
}

static int check_parameters(const struct model_config *config, struct err *reterr)
{
	const struct field_table *table = model_parameters();
	for (size_t i = 0; i < table->count; i++) {
		const struct field *field = &table->fields[i];
		if (field->kind != FIELD_QUANTITY)
			continue;
		double value;
		memcpy(&value, (const char *)config + field->offset, sizeof value);
		char bounds[128];
		/* A rounding of the unit's scale must not refuse the bound itself. */
		double slack = 1e-9 * fabs(field->most);
		if (!(value >= field->least - slack && value <= field->most + slack))
			return err_set(reterr, ERR_FILE, "%s of the model must be %s", field->key,
			               field_bounds_text(field, bounds, sizeof bounds));
	}
	return 0;
}

/* A step must resolve the quickest lags and the swinging of the shaft. */
static int check_step(const struct model_config *c, struct err *reterr)
{
	double step = c->control_period_s / ceil(c->control_period_s / c->integration_step_s - 1e-9);
	double winding = fmin(c->inductance_d_h, c->inductance_q_h) / c->resistance_ohm;
	double link = c->source_resistance_ohm * c->dc_capacitance_f;
	if (step > winding || step > link)
		return err_set(reterr, ERR_FILE,
		               "integration_step must be below L/R (%.3g ms) and source_resistance times "
		               "dc_capacitance (%.3g ms)",
		               winding * 1e3, link * 1e3);
	double motor_j = c->inertia_kgm2 - c->load_inertia_kgm2;
	double inverse = 1 / motor_j + 1 / c->load_inertia_kgm2;
	double swing = sqrt(c->shaft_stiffness_nm_rad * inverse);
	if (step * swing > 1 || step * c->shaft_damping_nms * inverse > 1)
		return err_set(
		    reterr, ERR_FILE,
		    "integration_step must be below 1/(natural frequency of the shaft) = %.3g us; "
		    "make it shorter, or shaft_stiffness and shaft_damping smaller",
		    1e6 / fmax(swing, c->shaft_damping_nms * inverse));
	return 0;
}

static void init_plant(struct model *model)
{
	const struct model_config *c = &model->config;
	struct plant *plant = &model->plant;
	plant->pole_pairs = c->pole_pairs;
	plant->flux_wb = c->flux_linkage_wb;
	plant->ld_h = c->inductance_d_h;
	plant->lq_h = c->inductance_q_h;
	plant->resistance_20_ohm = c->resistance_ohm;
	plant->inertia_kgm2 = c->inertia_kgm2;
	plant->load_inertia_kgm2 = c->load_inertia_kgm2;
	plant->viscous_nms = c->viscous_nms;
	plant->coulomb_nm = c->coulomb_nm;
	plant->motor_friction_share = 0.2;
	plant->stiffness_nm_rad = c->shaft_stiffness_nm_rad;
	plant->damping_nms = c->shaft_damping_nms;
	plant->capacitance_f = c->dc_capacitance_f;
	plant->source_resistance_ohm = c->source_resistance_ohm;
	plant->chopper_ohm = c->chopper_resistance_ohm;
	plant->bleeder_ohm = 1e4;
	plant->chopper_on_v = 1.2 * c->dc_voltage_v;
	plant->chopper_off_v = 1.16 * c->dc_voltage_v;
	plant->thermal_resistance_kw = c->thermal_resistance_kw;
	plant->thermal_capacitance_jk = c->thermal_capacitance_jk;
	plant->ambient_c = plant->winding_c = c->ambient_c;
	plant->supply_v = plant->dc_v = c->dc_voltage_v;
	plant->load = &model->load;
	plant_start(plant);
}

static void init_controller(struct model *model)
{
	const struct model_config *c = &model->config;
	struct controller *controller = &model->controller;
	controller->defects = c->defects;
	controller->pole_pairs = c->pole_pairs;
	controller->counts_per_turn = 4 * c->encoder_lines;
	controller->flux_wb = c->flux_linkage_wb;
	controller->ld_h = c->inductance_d_h;
	controller->lq_h = c->inductance_q_h;
	controller->period_s = model->step_s;
	controller->switching_period_s = c->switching_period_s;
	controller->current_most_a = c->current_limit_a;
	controller->overcurrent_a = c->overcurrent_a;
	controller->overvoltage_v = c->overvoltage_v;
	controller->undervoltage_v = 0.75 * c->dc_voltage_v;
	controller->rated_current_a = c->rated_current_a;
	controller->block = c->commutation == MODEL_BLOCK;
	controller->ramp_rad_s2 = c->speed_ramp_rad_s2;
	controller->overtemperature_c = c->overtemperature_c;
	controller->rated_speed_rad_s = c->rated_speed_rad_s;
	/* The allowance keeps a limit written in rpm from being refused for its rounding. */
	controller->speed_most_rad_s = c->speed_limit_rad_s * (1 + 1e-9);
	if (defect_in(c->defects, DEFECT_MAGNETISING_CURRENT))
		controller->magnetising_a = -0.3 * c->rated_current_a;
	controller->started_ns = -NS_PER_S;
	struct controller_tuning tuning = {
	    .resistance_ohm = c->resistance_ohm,
	    .inertia_kgm2 = c->inertia_kgm2,
	    .current_bandwidth_rad_s = c->current_bandwidth_rad_s,
	    .speed_bandwidth_rad_s = c->speed_bandwidth_rad_s,
	};
	controller_start(controller, &tuning);
}

static void init_load(struct model *model)
{
	struct load_machine *load = &model->load;
	load->lag_share = -expm1(-model->step_s / 2e-3);
	load->fade_from_rad_s = 0.96 * model->config.speed_limit_rad_s;
	load->fade_to_rad_s = 1.05 * model->config.speed_limit_rad_s;
}

static void renew_image(struct model *model)
{
	const struct controller *c = &model->controller;
	struct image image = {
	    .speed_rad_s = c->speed_rad_s,
	    .dc_voltage_v = c->dc_v,
	    .current_d_a = c->current_d_a,
	    .current_q_a = c->current_q_a,
	    .torque_nm = c->torque_nm,
	    .temperature_c = c->winding_c,
	    .current_d_command_a = c->current_d_command_a,
	    .current_q_command_a = c->current_q_command_a,
	    .duty = {c->duty[0], c->duty[1], c->duty[2]},
	    .voltage_alpha_v = c->voltage_alpha_v,
	    .voltage_beta_v = c->voltage_beta_v,
	    .voltage_d_v = c->voltage_d_v,
	    .voltage_q_v = c->voltage_q_v,
	    .position_rad = (double)c->position_counts * TWO_PI / c->counts_per_turn,
	    .fault_code = c->fault_code,
	    .state = (int)c->state,
	    .torque_off_inputs = model->fault_box.relays[RELAY_STO_A].closed |
	                         model->fault_box.relays[RELAY_STO_B].closed << 1,
	    .running = c->state == STATE_RUNNING,
	    .ready = c->state == STATE_READY || c->state == STATE_RUNNING,
	    .rotor_counts = c->counts,
	    .life = (uint16_t)(model->grid_ns / NS_PER_MS),
	};
	if (defect_in(model->config.defects, DEFECT_STALE_IMAGE)) {
		size_t behind = (size_t)(90 * NS_PER_MS / model->refresh_ns);
		behind = behind < 1 ? 1 : behind > IMAGE_HISTORY - 1 ? IMAGE_HISTORY - 1 : behind;
		size_t count = model->past_count++;
		model->past[count % IMAGE_HISTORY] = image;
		uint16_t life = image.life;
		image = model->past[count < behind ? 0 : (count - behind) % IMAGE_HISTORY];
		image.life = life;
	}
	if (defect_in(model->config.defects, DEFECT_FROZEN_IMAGE)) {
		if (model->freeze_at_ns == 0 && image.running)
			model->freeze_at_ns = model->grid_ns + 500 * NS_PER_MS;
		if (model->freeze_at_ns != 0 && model->grid_ns >= model->freeze_at_ns)
			return;
	}
	model->image = image;
}

/* Offset, gain error, noise and quantisation of one of the two current sensors. */
static double current_sensor(struct model *model, int phase)
{
	double value = model->sensor_gain[phase] * model->plant.phase_a[phase] +
	               model->sensor_offset_a[phase] +
	               model->sensor_noise_a * noise_normal(&model->sensor_noise);
	double step = model->config.current_step_a;
	return step > 0 ? step * rint(value / step) : value;
}

/* The sector that the Hall sensors show; the defect encoder-offset has turned them on the shaft. */
static int hall(const struct model *model)
{
	double turned = defect_in(model->config.defects, DEFECT_ENCODER_OFFSET) ? 12.0 / 60 : 0;
	double sixths = model->plant.pole_pairs * model->plant.angle_rad * (3 / 3.14159265358979323846);
	return (int)floor(sixths + 0.5 + turned) % 6;
}

static void control(struct model *model)
{
	struct plant *plant = &model->plant;
	const struct fault_box *box = &model->fault_box;
	double now_s = (double)model->grid_ns * 1e-9;
	encoder_step(&model->encoder, plant->angle_rad, plant->turns, plant->speed_rad_s,
	             box->relays[RELAY_ENCODER_OPEN].closed, now_s, model->step_s);
	double comparator =
	    fmax(fabs(plant->phase_a[0]), fmax(fabs(plant->phase_a[1]), fabs(plant->phase_a[2])));
	/* A test winding through the comparator's own sensor carries twice the limit. */
	if (box->relays[RELAY_CURRENT_SURGE].closed)
		comparator += 2 * model->config.overcurrent_a;
	int hall_sector = hall(model);
	struct sensed sensed = {
	    .now_ns = model->grid_ns,
	    .now_s = now_s,
	    .phase_a = current_sensor(model, 0),
	    .phase_b = current_sensor(model, 1),
	    .comparator_a = comparator,
	    .dc_v = plant->dc_v,
	    .winding_c = plant->winding_c,
	    .encoder = &model->encoder,
	    .hall_sector = hall_sector,
	    .torque_off = {box->relays[RELAY_STO_A].closed, box->relays[RELAY_STO_B].closed},
	};
	/* A resistor in the place of the winding's sensor. */
	if (box->relays[RELAY_HOT_SENSOR].closed)
		sensed.winding_c = model->config.overtemperature_c + 20;
	controller_step(&model->controller, &sensed);
}

static void latch(struct model *model)
{
	uint16_t life = (uint16_t)(model->grid_ns / NS_PER_MS);
	transducer_latch(&model->transducer, &model->plant, life);
	analyser_latch(&model->analyser, &model->plant, life);
	load_latch(&model->load, model->plant.load_speed_rad_s, life);
	model->next_millisecond_ns += model->millisecond_ns;
}

/* What the dead time of the half bridges takes from each phase, as a share of the DC voltage. */
static void apply_dead_time(const struct model *model, double duty[3])
{
	double share = model->config.dead_time_s / model->config.switching_period_s;
	for (int i = 0; i < 3; i++) {
		double sign = model->plant.phase_a[i] / 0.1;
		duty[i] -= share * (sign > 1 ? 1 : sign < -1 ? -1 : sign);
	}
}

static void step(struct model *model)
{
	struct plant *plant = &model->plant;
	struct fault_box *box = &model->fault_box;
	struct controller *controller = &model->controller;
	double duty[3] = {controller->duty[0], controller->duty[1], controller->duty[2]};
	int floating = controller->floating;

	fault_box_step(box, model->grid_ns);
	double surge = box->relays[RELAY_SUPPLY_SURGE].closed ? 1.4 : 1;
	double sag = box->relays[RELAY_SUPPLY_SAG].closed ? 0.6 : 1;
	plant->supply_v = model->config.dc_voltage_v * surge * sag;
	bool a_open = box->relays[RELAY_PHASE_OPEN].closed;
	plant->open_phase = a_open ? 1 : floating;
	plant->no_path = a_open && floating > 1;
	load_step(&model->load, model->grid_ns, controller->pulses_on);
	plant->pulses_on = controller->pulses_on;
	double copper_before = plant->energies.copper;
	plant_step(plant, model->step_s, model->parts);
	plant_heat(plant, model->step_s, plant->energies.copper - copper_before);
	transducer_step(&model->transducer, plant);

	/* These duties hold during the next period; they were computed at its begin minus one. */
	if (model->config.dead_time_s > 0)
		apply_dead_time(model, duty);
	modulation_vector(duty, &plant->duty_alpha, &plant->duty_beta);

	model->grid_ns += model->step_ns;
	control(model);
	if (model->grid_ns >= model->next_millisecond_ns)
		latch(model);
	if (model->grid_ns >= model->next_refresh_ns) {
		renew_image(model);
		model->next_refresh_ns += model->refresh_ns;
	}
}

int model_new(const struct model_config *config, struct model **ret_model, struct err *reterr)
{
	*ret_model = NULL;
	struct model_config filled = *config;
	if (check_parameters(&filled, reterr) < 0 || fill_from_nameplate(&filled, reterr) < 0 ||
	    check_step(&filled, reterr) < 0)
		return -1;
	struct model *model = calloc(1, sizeof *model);
	if (!model)
		return err_set(reterr, ERR_NOMEM, "no memory for the modelled bench");
	model->config = filled;
	(void)snprintf(model->firmware, sizeof model->firmware, "%s", filled.firmware);
	(void)snprintf(model->serial_number, sizeof model->serial_number, "%s", filled.serial_number);
	model->config.firmware = model->firmware;
	model->config.serial_number = model->serial_number;
	model->step_ns = llround(filled.control_period_s * 1e9);
	model->step_s = (double)model->step_ns * 1e-9;
	model->parts = (int)ceil(filled.control_period_s / filled.integration_step_s - 1e-9);
	model->refresh_ns = llround(filled.refresh_s * 1e9);
	model->millisecond_ns = NS_PER_MS;
	model->next_millisecond_ns = NS_PER_MS;
	model->next_refresh_ns = model->refresh_ns;

	devices_init(model);
	init_load(model);
	init_plant(model);
	model->encoder.counts_per_turn = 4 * filled.encoder_lines;
	model->encoder.index_drifts = defect_in(filled.defects, DEFECT_INDEX_DRIFTING);
	encoder_start(&model->encoder, model->plant.angle_rad, model->plant.turns);
	init_controller(model);
	control(model);
	latch(model);
	renew_image(model);
	model->next_millisecond_ns = NS_PER_MS;
	*ret_model = model;
	return 0;
}

void model_release(struct model *model)
{
	free(model);
}

void model_advance(struct model *model, int64_t until_ns)
{
	if (until_ns <= model->now_ns)
		return;
	while (model->grid_ns + model->step_ns <= until_ns)
		step(model);
	model->now_ns = until_ns;
}

int64_t model_now(const struct model *model)
{
	return model->now_ns;
}

void model_heard(struct model *model, enum model_device device)
{
	if (device == MODEL_CONTROLLER)
		model->controller.heard_ns = model->now_ns;
	else if (device == MODEL_LOAD)
		model->load.heard_ns = model->now_ns;
}
