/* SPDX-License-Identifier: Apache-2.0 */
/*
 * From a torque command to duties: current commands, PI control of both
 * currents with decoupling, voltage limit, turn into the stator, modulation.
 *
 * Magnitude optimum: the zero cancels L/R, Kp = L/(2 T), with T = 1.5 control
 * periods (one of computing, half of the held voltage). Where the voltage
 * vector is limited, the integrals take only the part of the error that the
 * limited vector can serve (back-calculation); the d axis keeps its voltage.
 */
#include "model_controller.h"

#include <math.h>

#include "model_modulation.h"

#define INV_SQRT3 0.57735026918962576451

void current_loops_tune(struct controller *controller, const struct controller_tuning *tuning)
{
	struct current_loops *loops = &controller->current_loops;
	double bandwidth = tuning->current_bandwidth_rad_s;
	if (bandwidth <= 0)
		bandwidth = 1 / (2 * 1.5 * controller->period_s);
	loops->gain_d = controller->ld_h * bandwidth;
	loops->gain_q = controller->lq_h * bandwidth;
	loops->integral_share_d = controller->period_s * tuning->resistance_ohm / controller->ld_h;
	loops->integral_share_q = controller->period_s * tuning->resistance_ohm / controller->lq_h;
}

void current_commands(struct controller *controller, double torque_nm)
{
	struct controller *c = controller;
	double d = c->magnetising_a;
	double q = torque_nm / (1.5 * c->pole_pairs * (c->flux_wb + (c->ld_h - c->lq_h) * d));
	double most = sqrt(c->current_most_a * c->current_most_a - d * d);
	c->current_d_command_a = d;
	c->current_q_command_a = q > most ? most : q < -most ? -most : q;
}

static void turn_and_modulate(struct controller *c, double speed_elec)
{
	/* The voltage takes effect from one to two periods after this instant. */
	double sine, cosine;
	sincos(c->angle_elec_rad + 1.5 * speed_elec * c->period_s, &sine, &cosine);
	c->voltage_alpha_v = c->voltage_d_v * cosine - c->voltage_q_v * sine;
	c->voltage_beta_v = c->voltage_d_v * sine + c->voltage_q_v * cosine;
	double dc_v = c->dc_v > 1 ? c->dc_v : 1;
	struct dwell dwell =
	    modulation_dwell(c->voltage_alpha_v, c->voltage_beta_v, dc_v, c->switching_period_s);
	modulation_duties(&dwell, c->switching_period_s, c->null_share, c->duty);
	if (defect_in(c->defects, DEFECT_PHASE_DUTY_WRONG))
		c->duty[1] *= 0.92;
}

void current_loops_step(struct controller *controller)
{
	struct controller *c = controller;
	struct current_loops *loops = &c->current_loops;
	double speed_elec = c->pole_pairs * c->speed_rad_s;
	double most = c->dc_v * INV_SQRT3;

	double p_d = loops->gain_d * (c->current_d_command_a - c->current_d_a);
	double wanted_d = p_d + loops->integral_d - speed_elec * c->lq_h * c->current_q_a;
	double d = wanted_d > most ? most : wanted_d < -most ? -most : wanted_d;
	double most_q = sqrt(most * most - d * d);
	double p_q = loops->gain_q * (c->current_q_command_a - c->current_q_a);
	double wanted_q =
	    p_q + loops->integral_q + speed_elec * (c->ld_h * c->current_d_a + c->flux_wb);
	double q = wanted_q > most_q ? most_q : wanted_q < -most_q ? -most_q : wanted_q;

	loops->integral_d += loops->integral_share_d * (p_d + d - wanted_d);
	loops->integral_q += loops->integral_share_q * (p_q + q - wanted_q);
	c->voltage_d_v = d;
	c->voltage_q_v = q;
	turn_and_modulate(c, speed_elec);
}
