/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Instruments and fault box. Each instrument has errors of its own that stay
 * for the whole run (drawn once from the seed) and noise that is drawn when
 * its register image is refreshed, once a millisecond: reading disturbs
 * nothing. The fixed errors lie within half of what the shipped rig claims as
 * accuracy. Drawing noise in model_read() was rejected: two readers would
 * change each other's values.
 */
#include <math.h>

#include "model_inner.h"

#define TWO_PI 6.28318530717958647692

static double between(struct noise *noise, double half_width)
{
	return half_width * (2 * noise_uniform(noise) - 1);
}

void devices_init(struct model *model)
{
	const struct model_config *config = &model->config;
	struct noise build;
	noise_init(&build, config->seed, NOISE_BUILD);
	model->plant.angle_rad = TWO_PI * noise_uniform(&build);

	struct transducer *transducer = &model->transducer;
	transducer->torque_gain = 1 + between(&build, 0.0008);
	transducer->torque_offset_nm = between(&build, 0.001);
	transducer->speed_gain = 1 + between(&build, 2e-5);
	transducer->lag_share = -expm1(-model->step_s / 0.4e-3);
	transducer->torque_noise_nm = config->torque_noise_nm;
	transducer->speed_noise_rad_s = config->speed_noise_rad_s;
	noise_init(&transducer->noise, config->seed, NOISE_TRANSDUCER);

	struct analyser *analyser = &model->analyser;
	analyser->current_gain = 1 + between(&build, 0.0004);
	analyser->angle_offset_rad = between(&build, 0.05 * TWO_PI / 360);
	analyser->current_noise_a = 0.1 * config->current_noise_a;
	analyser->angle_noise_rad = 0.02 * TWO_PI / 360;
	noise_init(&analyser->noise, config->seed, NOISE_ANALYSER);

	model->fault_box.delay_ns = llround(config->relay_delay_s * 1e9);
	noise_init(&model->fault_box.noise, config->seed, NOISE_RELAYS);
	noise_init(&model->sensor_noise, config->seed, NOISE_SENSORS);
	model->sensor_noise_a = config->current_noise_a;
	for (int i = 0; i < 2; i++) {
		model->sensor_offset_a[i] = between(&build, config->current_offset_a);
		model->sensor_gain[i] = 1 + between(&build, config->current_gain_error);
	}
}

void fault_box_set(struct fault_box *box, enum relay_name relay, bool on, int64_t now_ns)
{
	struct relay *switched = &box->relays[relay];
	if (switched->wanted == on)
		return;
	switched->wanted = on;
	switched->due_ns = now_ns + (int64_t)(noise_uniform(&box->noise) * (double)box->delay_ns);
}

void fault_box_step(struct fault_box *box, int64_t now_ns)
{
	for (int i = 0; i < RELAYS; i++)
		if (box->relays[i].closed != box->relays[i].wanted && now_ns >= box->relays[i].due_ns)
			box->relays[i].closed = box->relays[i].wanted;
}

void transducer_step(struct transducer *transducer, const struct plant *plant)
{
	transducer->torque_nm +=
	    transducer->lag_share * (plant->shaft_torque_nm - transducer->torque_nm);
}

void transducer_latch(struct transducer *transducer, const struct plant *plant, uint16_t life)
{
	transducer->shown_torque_nm = transducer->torque_gain * transducer->torque_nm +
	                              transducer->torque_offset_nm +
	                              transducer->torque_noise_nm * noise_normal(&transducer->noise);
	transducer->shown_speed_rad_s =
	    transducer->speed_gain * plant->load_speed_rad_s +
	    transducer->speed_noise_rad_s * noise_normal(&transducer->noise);
	transducer->life = life;
}

void analyser_latch(struct analyser *analyser, const struct plant *plant, uint16_t life)
{
	for (int i = 0; i < 3; i++)
		analyser->current_a[i] = analyser->current_gain * plant->phase_a[i] +
		                         analyser->current_noise_a * noise_normal(&analyser->noise);
	double angle = plant->angle_rad * plant->pole_pairs + analyser->angle_offset_rad +
	               analyser->angle_noise_rad * noise_normal(&analyser->noise);
	angle = fmod(angle, TWO_PI);
	if (angle < 0)
		angle += TWO_PI;
	analyser->angle_elec_rad = angle >= TWO_PI ? 0 : angle;
	analyser->dc_voltage_v = plant->dc_v;
	analyser->life = life;
}
