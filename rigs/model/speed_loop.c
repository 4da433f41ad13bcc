/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Speed from the encoder, and the speed controller.
 *
 * Measuring. Counting over a fixed time alone was rejected: 1024 lines give
 * steps of 15 rpm in 1 ms. The counts between the newest edge now and the
 * newest edge a window (1 ms) ago are divided by the captured time between
 * these two edges. Without a new edge in the window the speed can be no more
 * than one count in the time since the last edge. A lag of 0.5 ms follows.
 *
 * Control. PI by the symmetric optimum with a = 2: Kp = J/(2 T), Ti = 4 T,
 * where T sums the small lags. The command goes through a lag of Ti, which
 * takes out the overshoot that the optimum has against steps of the command
 * (8 % are left in theory). The integral stands still while the torque is at
 * its limit and would be driven further; back-calculation was rejected: it
 * fills the integral up to the limit during a long run-up, and the speed then
 * overshoots by the dip of a full load step.
 */
#include "model_controller.h"

#include <math.h>

#define TWO_PI 6.28318530717958647692
/* How far the defect overshoot lets the integral wind up, in torque limits. */
#define WINDUP 6

void speed_meter_start(struct speed_meter *meter, double period_s)
{
	double window = round(1e-3 / period_s);
	meter->window = window < 1                       ? 1
	                : window > SPEED_WINDOW_MOST - 1 ? SPEED_WINDOW_MOST - 1
	                                                 : (int)window;
	meter->filter_share = -expm1(-period_s / 0.5e-3);
}

double speed_meter_step(struct speed_meter *meter, const struct encoder *encoder,
                        double counts_per_turn, double now_s)
{
	double rad_per_count = TWO_PI / counts_per_turn;
	int before = (meter->at + SPEED_WINDOW_MOST - meter->window) % SPEED_WINDOW_MOST;
	double then_s = meter->when_s[before];
	if (encoder->edge_s > then_s) {
		meter->raw_rad_s = (double)(encoder->edge_place - meter->place[before]) * rad_per_count /
		                   (encoder->edge_s - then_s);
	} else {
		double since = now_s - encoder->edge_s;
		double most = since > 0 ? rad_per_count / since : HUGE_VAL;
		if (fabs(meter->raw_rad_s) > most)
			meter->raw_rad_s = copysign(most, meter->raw_rad_s);
	}
	meter->place[meter->at] = encoder->edge_place;
	meter->when_s[meter->at] = encoder->edge_s;
	meter->at = (meter->at + 1) % SPEED_WINDOW_MOST;
	meter->speed_rad_s += meter->filter_share * (meter->raw_rad_s - meter->speed_rad_s);
	return meter->speed_rad_s;
}

void speed_loop_tune(struct speed_loop *loop, double inertia_kgm2, double lag_s, double period_s,
                     uint64_t defects)
{
	if (defect_in(defects, DEFECT_SLUGGISH))
		lag_s *= 15;
	double integral_s = 4 * lag_s;
	loop->gain = inertia_kgm2 / (2 * lag_s);
	loop->prefilter_share = -expm1(-period_s / integral_s);
	loop->integral_share = period_s / integral_s;
	loop->windup_share = defect_in(defects, DEFECT_OVERSHOOT) ? WINDUP : 0;
	if (defect_in(defects, DEFECT_INTEGRATOR_MISSING))
		loop->integral_share = 0;
}

double speed_loop_step(struct speed_loop *loop, double command_rad_s, double speed_rad_s,
                       double gain_share)
{
	loop->command_rad_s += loop->prefilter_share * (command_rad_s - loop->command_rad_s);
	double proportional = loop->gain * gain_share * (loop->command_rad_s - speed_rad_s);
	double torque = proportional + loop->integral_nm;
	double most = loop->torque_most_nm;
	bool pushes_further =
	    (torque > most && proportional > 0) || (torque < -most && proportional < 0);
	if (!pushes_further || fabs(loop->integral_nm) < loop->windup_share * most)
		loop->integral_nm += loop->integral_share * proportional;
	return torque > most ? most : torque < -most ? -most : torque;
}
