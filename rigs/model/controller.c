/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The controller as a whole: believed angle, measured currents, and the order
 * of a period. The healthy parts and the defects stand side by side on
 * purpose: a defect that lived in another file would drift away from what it
 * is a defect of.
 */
#include "model_controller.h"

#include <math.h>

#define TWO_PI        6.28318530717958647692
#define PHASE_WATCH_S 3e-3 /* smoothing of what the phase loss is judged by */

void controller_control(struct controller *controller, int control, int64_t now_ns)
{
	int rising = control & ~controller->control, falling = controller->control & ~control;
	if (rising & 1) {
		controller->enable_given = true;
		controller->heard_ns = now_ns; /* the silence is counted from the enable on */
	}
	if (falling & 1) {
		controller->enable_taken = true;
		controller->enable_given = false;
	}
	if (rising & 2)
		controller->reset_edge = true;
	controller->control = control;
}

/* Torque at the current limit, with the best angle. */
static double most_torque(const struct controller *c)
{
	double dl = c->lq_h - c->ld_h, most = c->current_most_a, psi = c->flux_wb;
	if (dl == 0 || defect_in(c->defects, DEFECT_MTPA_OFF))
		return drive_torque_of(c, 0, most);
	double d = (psi - sqrt(psi * psi + 8 * dl * dl * most * most)) / (4 * dl);
	return drive_torque_of(c, d, sqrt(most * most - d * d));
}

void controller_start(struct controller *controller, const struct controller_tuning *tuning)
{
	struct controller *c = controller;
	if (defect_in(c->defects, DEFECT_ENCODER_OFFSET))
		c->offset_elec_rad += 12 * TWO_PI / 360;
	if (defect_in(c->defects, DEFECT_ENCODER_LINES_WRONG))
		c->counts_per_turn = c->counts_per_turn * 1000 / 1024;
	c->weakening_share = defect_in(c->defects, DEFECT_FIELD_WEAKENING_LATE) ? 1.15 : 0.93;
	c->null_share = defect_in(c->defects, DEFECT_NULL_STATES_UNEQUAL) ? 0 : 0.5;
	speed_meter_start(&c->meter, c->period_s);
	current_loops_tune(c, tuning);
	/* What lies between torque command and measured speed: the current loop (twice its own
	 * delay of 1.5 periods), the window, the filter behind it, and the wait for the next period. */
	double lag = (3 + 1 + 0.5 * c->meter.window) * c->period_s + 0.5e-3 + 0.5e-3;
	if (tuning->speed_bandwidth_rad_s > 0)
		lag = 1 / (2 * tuning->speed_bandwidth_rad_s);
	speed_loop_tune(&c->speed_loop, tuning->inertia_kgm2, lag, c->period_s, c->defects);
	c->speed_loop.torque_most_nm = most_torque(c);
	c->duty[0] = c->duty[1] = c->duty[2] = 0.5;
	faults_start(c);
}

/* Counts over many turns. A correction at the index is no more than half a turn. */
static void follow_position(struct controller *c, const struct encoder *encoder)
{
	int turn = encoder->counts_per_turn, moved = encoder->counter - c->counts;
	if (moved > turn / 2)
		moved -= turn;
	else if (moved < -turn / 2)
		moved += turn;
	c->position_counts += moved;
}

static void believed_angle(struct controller *c, const struct encoder *encoder, int hall_sector)
{
	follow_position(c, encoder);
	c->counts = encoder->counter;
	/* The middle of the count. */
	double mech = (c->counts + 0.5) * TWO_PI / c->counts_per_turn;
	double elec = c->pole_pairs * mech + c->offset_elec_rad;
	if (c->block)
		elec = hall_sector * TWO_PI / 6;
	if (defect_in(c->defects, DEFECT_SINE_ERROR))
		elec += 10 * TWO_PI / 360 * sin(mech);
	if (defect_in(c->defects, DEFECT_DIRECTION_SWAPPED))
		elec = -elec;
	c->angle_elec_rad = elec;
}

/* How much current each phase carries, smoothed. */
static void watch_phases(struct controller *c, double a, double b)
{
	double phases[3] = {fabs(a), fabs(b), fabs(a + b)};
	for (int i = 0; i < 3; i++)
		c->phase_use_a[i] += c->period_s / PHASE_WATCH_S * (phases[i] - c->phase_use_a[i]);
}

static void measure(struct controller *c, const struct sensed *sensed)
{
	believed_angle(c, sensed->encoder, sensed->hall_sector);
	double speed = speed_meter_step(&c->meter, sensed->encoder, c->counts_per_turn, sensed->now_s);
	double a = sensed->phase_a, b = sensed->phase_b;
	if (defect_in(c->defects, DEFECT_DIRECTION_SWAPPED)) {
		speed = -speed;
		b = -a - b;
	}
	c->speed_rad_s = speed;
	double alpha = a, beta = (a + 2 * b) * 0.57735026918962576451;
	double sine, cosine;
	sincos(c->angle_elec_rad, &sine, &cosine);
	c->current_d_a = alpha * cosine + beta * sine;
	c->current_q_a = beta * cosine - alpha * sine;
	c->torque_nm =
	    1.5 * c->pole_pairs * (c->flux_wb + (c->ld_h - c->lq_h) * c->current_d_a) * c->current_q_a;
	watch_phases(c, a, b);
	double missing = c->pulses_on ? hypot(c->current_d_command_a - c->current_d_a,
	                                      c->current_q_command_a - c->current_q_a)
	                              : 0;
	c->missing_current_a += c->period_s / PHASE_WATCH_S * (missing - c->missing_current_a);
	c->dc_v = sensed->dc_v;
	c->winding_c = sensed->winding_c;
}

static double ramped_command(struct controller *c)
{
	double left = c->speed_command_rad_s - c->ramped_rad_s;
	double most = c->ramp_rad_s2 > 0 ? c->ramp_rad_s2 * c->period_s : HUGE_VAL;
	c->ramped_rad_s += left > most ? most : left < -most ? -most : left;
	return c->ramped_rad_s;
}

static double torque_command(struct controller *c, int64_t now_ns)
{
	if (c->state == STATE_FAULT) {
		/* Only the defect torque-off-slow comes here: the last torque, ramped out. */
		double left = 1 - (double)(now_ns - c->fault_ns) / 600e6;
		return c->speed_loop.integral_nm * (left > 0 ? left : 0);
	}
	double gain_share = 1;
	if (defect_in(c->defects, DEFECT_GAIN_SCHEDULED_WRONG) &&
	    fabs(c->speed_rad_s) > 0.4 * c->rated_speed_rad_s)
		gain_share = 0.08;
	return speed_loop_step(&c->speed_loop, ramped_command(c), c->speed_rad_s, gain_share);
}

void controller_step(struct controller *controller, const struct sensed *sensed)
{
	struct controller *c = controller;
	measure(c, sensed);
	states_step(c, sensed, faults_watch(c, sensed));
	if (!c->pulses_on) {
		c->current_d_command_a = c->current_q_command_a = 0;
		c->voltage_d_v = c->voltage_q_v = c->voltage_alpha_v = c->voltage_beta_v = 0;
		c->duty[0] = c->duty[1] = c->duty[2] = 0.5;
		c->floating = 0;
		return;
	}
	current_commands(c, torque_command(c, sensed->now_ns));
	current_loops_step(c);
	if (defect_in(c->defects, DEFECT_DIRECTION_SWAPPED)) {
		double b = c->duty[1];
		c->duty[1] = c->duty[2];
		c->duty[2] = b;
		if (c->floating > 1)
			c->floating = 5 - c->floating;
	}
}
