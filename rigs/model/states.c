/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The state machine of the controller, as a table. An event that is not in a
 * state's rows does nothing there.
 *
 *   from       event                                 to         what happens
 *   starting   self-test over (5 ms)                 ready
 *   ready      enable given (rising edge)            running    loops cleared, encoder
 *                                                               counter set, pulses on
 *   running    enable taken                          ready      pulses off: coasting
 *   running    safe torque off demanded              inhibited  pulses off, no fault
 *   any        a fault stood for its filter time     fault      pulses off, code latched
 *   fault      reset edge, cause gone, enable away   ready      code cleared
 *   fault      reset edge, cause gone, enable there  inhibited  code cleared
 *   inhibited  enable taken                          ready
 *
 * A reset while the cause lasts is lost: it does not take effect later.
 * A fault in the state inhibited leads to fault again. While safe torque off is demanded,
 * by either of its channels, an enable is lost.
 */
#include "model_controller.h"

#include <string.h>

enum event {
	EVENT_STARTED = 0,
	EVENT_ENABLE_GIVEN,
	EVENT_ENABLE_TAKEN,
	EVENT_FAULT,
	EVENT_TORQUE_OFF,
	EVENT_RESET_AWAY,   /* reset is good, enable is away */
	EVENT_RESET_STANDS, /* reset is good, enable stands */
};

static const struct transition {
	enum drive_state from;
	enum event event;
	enum drive_state to;
} TRANSITIONS[] = {
    {STATE_STARTING, EVENT_STARTED, STATE_READY},
    {STATE_STARTING, EVENT_FAULT, STATE_FAULT},
    {STATE_READY, EVENT_ENABLE_GIVEN, STATE_RUNNING},
    {STATE_READY, EVENT_FAULT, STATE_FAULT},
    {STATE_RUNNING, EVENT_ENABLE_TAKEN, STATE_READY},
    {STATE_RUNNING, EVENT_FAULT, STATE_FAULT},
    {STATE_RUNNING, EVENT_TORQUE_OFF, STATE_INHIBITED},
    {STATE_FAULT, EVENT_RESET_AWAY, STATE_READY},
    {STATE_FAULT, EVENT_RESET_STANDS, STATE_INHIBITED},
    {STATE_INHIBITED, EVENT_ENABLE_TAKEN, STATE_READY},
    {STATE_INHIBITED, EVENT_FAULT, STATE_FAULT},
};

enum { SELF_TEST_NS = 5000000, RESTART_NS = 50000000, REENABLE_NS = 300000000 };

static void enter_running(struct controller *c, const struct sensed *sensed)
{
	encoder_reference(sensed->encoder);
	c->counts = sensed->encoder->counter;
	c->position_counts = c->counts;
	c->current_loops.integral_d = c->current_loops.integral_q = 0;
	c->speed_loop.integral_nm = 0;
	c->torque_q_a = c->weakening_d_a = c->wanted_v = 0;
	c->speed_loop.command_rad_s = c->ramped_rad_s = c->speed_rad_s;
	c->pulses_on = true;
}

static void enter(struct controller *c, enum drive_state state, const struct sensed *sensed)
{
	enum drive_state from = c->state;
	c->state = state;
	if (from == STATE_FAULT)
		c->fault_code = 0;
	if (state == STATE_RUNNING) {
		enter_running(c, sensed);
		return;
	}
	bool slow = state == STATE_FAULT && from == STATE_RUNNING &&
	            defect_in(c->defects, DEFECT_TORQUE_OFF_SLOW);
	c->pulses_on = slow;
	if (slow) /* the ramp starts from the torque that there was */
		c->speed_loop.integral_nm = c->torque_nm;
}

static void happen(struct controller *c, enum event event, const struct sensed *sensed)
{
	for (size_t i = 0; i < sizeof TRANSITIONS / sizeof TRANSITIONS[0]; i++)
		if (TRANSITIONS[i].from == c->state && TRANSITIONS[i].event == event) {
			enter(c, TRANSITIONS[i].to, sensed);
			return;
		}
}

/* What a fault does on its own, without anybody asking: nothing in a healthy controller. */
static void leave_unasked(struct controller *c, const struct sensed *sensed, bool gone)
{
	int64_t gone_for = sensed->now_ns - c->gone_ns;
	bool silence = c->fault == FAULT_LINK_WATCHDOG;
	bool enabled = c->control & 1;
	if (!gone)
		return;
	if (!silence && defect_in(c->defects, DEFECT_FAULT_NOT_LATCHED))
		happen(c, enabled ? EVENT_RESET_STANDS : EVENT_RESET_AWAY, sensed);
	bool restarts =
	    !silence && gone_for >= RESTART_NS && defect_in(c->defects, DEFECT_RESTARTS_BY_ITSELF);
	bool reenables =
	    silence && gone_for >= REENABLE_NS && defect_in(c->defects, DEFECT_WATCHDOG_REENABLES);
	if (enabled && (restarts || reenables))
		enter(c, STATE_RUNNING, sensed);
}

static void answer_reset(struct controller *c, const struct sensed *sensed, bool gone)
{
	bool level = (c->control & 2) && defect_in(c->defects, DEFECT_RESET_WITHOUT_EDGE);
	if (!c->reset_edge && !level)
		return;
	if (!gone && !defect_in(c->defects, DEFECT_RESET_WHILE_CAUSE))
		return;
	c->ignored[c->fault] = !gone;
	bool enabled = c->control & 1;
	happen(c, enabled ? EVENT_RESET_STANDS : EVENT_RESET_AWAY, sensed);
	if (enabled && defect_in(c->defects, DEFECT_RESTARTS_ON_RESET))
		enter(c, STATE_RUNNING, sensed);
}

/* Either channel cuts the pulses. */
static bool torque_off_demanded(const struct controller *c, const struct sensed *sensed)
{
	bool second =
	    sensed->torque_off[1] && !defect_in(c->defects, DEFECT_TORQUE_OFF_CHANNEL_IGNORED);
	return sensed->torque_off[0] || second;
}

void states_step(struct controller *controller, const struct sensed *sensed, int fault)
{
	struct controller *c = controller;
	if (c->state == STATE_STARTING && sensed->now_ns - c->started_ns >= SELF_TEST_NS)
		happen(c, EVENT_STARTED, sensed);
	if (c->state == STATE_FAULT) {
		bool gone = fault_gone(c, c->fault, sensed);
		if (!gone)
			c->gone_ns = sensed->now_ns;
		answer_reset(c, sensed, gone);
		if (c->state == STATE_FAULT)
			leave_unasked(c, sensed, gone);
		/* A ramp that is over, or enable taken away, ends the defect's slow way off. */
		if (c->state == STATE_FAULT && c->pulses_on &&
		    (!(c->control & 1) || sensed->now_ns - c->fault_ns > 600000000))
			c->pulses_on = false;
	}
	if (c->enable_taken)
		happen(c, EVENT_ENABLE_TAKEN, sensed);
	if (torque_off_demanded(c, sensed)) {
		c->enable_given = false;
		c->pulses_on = false;
		happen(c, EVENT_TORQUE_OFF, sensed);
	}
	if (c->enable_given && fault < 0)
		happen(c, EVENT_ENABLE_GIVEN, sensed);
	c->enable_given = c->enable_taken = c->reset_edge = false;
	if (fault >= 0 && !c->ignored[fault] && c->state != STATE_FAULT) {
		c->fault = (enum fault)fault;
		c->fault_code = fault_code_of(c, c->fault);
		c->fault_ns = c->gone_ns = sensed->now_ns;
		happen(c, EVENT_FAULT, sensed);
	}
}
