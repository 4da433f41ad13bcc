/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The load machine's own little controller: enable, communication watchdog,
 * latched fault. Its inner loops are a lag of 2 ms and nothing more: they are
 * not under test. A load machine in speed mode was put off; the drive under
 * test holds the speed here.
 */
#include "model_load.h"

enum { LOAD_LINK_WATCHDOG = 9 };

void load_control(struct load_machine *load, int control, int64_t now_ns)
{
	int rising = control & ~load->control;
	if (!(control & 1))
		load->enabled = load->enable_edge = false;
	if (rising & 1) {
		load->enable_edge = true;
		load->heard_ns = now_ns; /* the silence is counted from the enable on */
	}
	if (rising & 2)
		load->reset_edge = true;
	load->control = control;
}

void load_step(struct load_machine *load, int64_t now_ns, bool pulses_on)
{
	bool silent = load->watchdog_ns > 0 && now_ns - load->heard_ns > load->watchdog_ns;
	if (load->enabled && silent) {
		load->fault_code = LOAD_LINK_WATCHDOG;
		load->enabled = false;
	}
	if (load->reset_edge && !silent)
		load->fault_code = 0;
	if (load->enable_edge && load->fault_code == 0)
		load->enabled = true;
	load->reset_edge = load->enable_edge = false;
	load->may_drive = pulses_on;
	double wanted = load->enabled ? load->command_nm : 0;
	load->torque_nm += load->lag_share * (wanted - load->torque_nm);
}

void load_latch(struct load_machine *load, double speed_rad_s, uint16_t life)
{
	load->shown_torque_nm = load_at(load, speed_rad_s);
	load->shown_fault_code = load->fault_code;
	load->life = life;
}
