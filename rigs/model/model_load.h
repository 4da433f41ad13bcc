/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_LOAD_H
#define DRIVETRIAL_MODEL_LOAD_H
/*
 * The load machine: a torque source with a first-order lag on the same shaft.
 * Positive load torque brakes the positive direction of rotation.
 *
 * It shall never drive the shaft away:
 *  - it may brake at any time, but it drives only while the pulse-enable line
 *    from the controller under test, a wire and no bus, is there. Without it
 *    its torque fades to nothing below 2 rad/s, so it brakes to rest and lets go;
 *  - above 0.96 times the speed limit of the drive under test its driving torque fades, at 1.05
 *    times it is gone.
 * A fault, or enable taken away, takes its torque off through the same lag.
 */
#include <stdbool.h>
#include <stdint.h>

#define LOAD_LETS_GO_RAD_S 2.0

struct load_machine {
	/* built */
	double lag_share; /* of the way to the command that a control period goes */
	double fade_from_rad_s, fade_to_rad_s;
	/* commands, as written */
	double command_nm;
	int control;
	int64_t watchdog_ns;
	/* state */
	double torque_nm; /* behind the lag, before fading */
	bool may_drive;
	bool enabled;
	bool enable_edge, reset_edge; /* since the last period */
	int fault_code;
	int64_t heard_ns;
	/* the register image */
	double shown_torque_nm;
	int shown_fault_code;
	uint16_t life;
};

/* The torque on the shaft at a speed. */
static inline double load_at(const struct load_machine *load, double speed_rad_s)
{
	double torque = load->torque_nm;
	double braking = torque >= 0 ? speed_rad_s : -speed_rad_s; /* speed in the braked direction */
	if (!load->may_drive) {
		if (braking <= 0)
			return 0;
		return braking < LOAD_LETS_GO_RAD_S ? torque * braking / LOAD_LETS_GO_RAD_S : torque;
	}
	if (-braking <= load->fade_from_rad_s)
		return torque;
	if (-braking >= load->fade_to_rad_s)
		return 0;
	return torque * (load->fade_to_rad_s + braking) / (load->fade_to_rad_s - load->fade_from_rad_s);
}

void load_control(struct load_machine *load, int control, int64_t now_ns);
void load_step(struct load_machine *load, int64_t now_ns, bool pulses_on);
void load_latch(struct load_machine *load, double speed_rad_s, uint16_t life);

#endif
