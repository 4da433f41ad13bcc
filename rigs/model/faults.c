/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What is watched, for how long a condition must stand, and when its cause
 * counts as gone. All conditions but the watchdog's are watched whether the
 * drive runs or not. The first fault wins; its code stays until it is reset.
 *
 *   fault            code  stands for  condition; gone when
 *   overcurrent       1    at once     comparator above the limit; below it
 *   overvoltage       2    0.3 ms      DC link above the limit; below 97 % of it
 *   encoder loss      3    0.3 ms      no differential signal level; level back
 *   overtemperature   4    20 ms       winding sensor above the limit; 5 K below it
 *   undervoltage      5    5 ms        DC link below the limit; above 103 % of it
 *   phase loss        6    10 ms       current missing, one phase without; pulses off
 *   torque off        7    100 ms      its two channels differ; they agree again
 *   link watchdog     9    at once     enabled and silent for its time; heard again,
 *                                      or enable taken away
 *
 * Encoder loss by missing edges alone was rejected: at standstill there are
 * none, and that is where a lost encoder shakes the shaft at the next command.
 */
#include "model_controller.h"

struct watch {
	int code, code_of_other; /* the second: by the defect wrong-fault-code */
	int64_t filter_ns;
	int missed_by; /* enum defect */
};

static const struct watch WATCHES[FAULTS] = {
    [FAULT_OVERCURRENT] = {1, 2, 0, DEFECT_OVERCURRENT_MISSED},
    [FAULT_OVERVOLTAGE] = {2, 1, 300000, DEFECT_OVERVOLTAGE_MISSED},
    [FAULT_ENCODER_LOSS] = {3, 4, 300000, DEFECT_ENCODER_LOSS_MISSED},
    [FAULT_OVERTEMPERATURE] = {4, 3, 20000000, DEFECT_OVERTEMPERATURE_MISSED},
    [FAULT_UNDERVOLTAGE] = {5, 5, 5000000, DEFECT_UNDERVOLTAGE_MISSED},
    [FAULT_PHASE_LOSS] = {6, 6, 10000000, DEFECT_PHASE_LOSS_MISSED},
    [FAULT_TORQUE_OFF_DIFFERS] = {7, 7, 100000000, DEFECT_TORQUE_OFF_CHANNEL_IGNORED},
    [FAULT_LINK_WATCHDOG] = {9, 9, 0, DEFECT_WATCHDOG_MISSING},
};

enum { LATE_NS = 150000000 }; /* of the defect fault-late */

void faults_start(struct controller *controller)
{
	for (int i = 0; i < FAULTS; i++)
		controller->since_ns[i] = -1;
}

static bool silent(const struct controller *c, int64_t now_ns)
{
	int64_t time_ns = c->watchdog_ns;
	if (defect_in(c->defects, DEFECT_WATCHDOG_LATE))
		time_ns *= 4;
	return time_ns > 0 && (c->control & 1) && now_ns - c->heard_ns > time_ns;
}

/* Current is missing, and one phase carries next to none of what the largest carries. */
static bool phase_lost(const struct controller *c)
{
	if (c->missing_current_a < 0.15 * c->rated_current_a)
		return false;
	const double *use = c->phase_use_a;
	double most = use[0] > use[1] ? use[0] : use[1];
	double least = use[0] < use[1] ? use[0] : use[1];
	most = use[2] > most ? use[2] : most;
	least = use[2] < least ? use[2] : least;
	return least < 0.05 * most;
}

static bool stands(const struct controller *c, enum fault fault, const struct sensed *sensed)
{
	switch (fault) {
	case FAULT_OVERCURRENT:
		return sensed->comparator_a > c->overcurrent_a;
	case FAULT_OVERVOLTAGE:
		return sensed->dc_v > c->overvoltage_v;
	case FAULT_ENCODER_LOSS:
		return !sensed->encoder->level_good;
	case FAULT_OVERTEMPERATURE:
		return sensed->winding_c > c->overtemperature_c;
	case FAULT_UNDERVOLTAGE:
		return sensed->dc_v < c->undervoltage_v;
	case FAULT_PHASE_LOSS:
		return phase_lost(c);
	case FAULT_TORQUE_OFF_DIFFERS:
		return sensed->torque_off[0] != sensed->torque_off[1];
	case FAULT_LINK_WATCHDOG:
	case FAULTS:
		break;
	}
	return silent(c, sensed->now_ns);
}

bool fault_gone(const struct controller *controller, enum fault fault, const struct sensed *sensed)
{
	if (fault == FAULT_OVERVOLTAGE)
		return sensed->dc_v < 0.97 * controller->overvoltage_v;
	if (fault == FAULT_UNDERVOLTAGE)
		return sensed->dc_v > 1.03 * controller->undervoltage_v;
	if (fault == FAULT_OVERTEMPERATURE)
		return sensed->winding_c < controller->overtemperature_c - 5;
	return !stands(controller, fault, sensed);
}

int fault_code_of(const struct controller *controller, enum fault fault)
{
	return defect_in(controller->defects, DEFECT_WRONG_FAULT_CODE) ? WATCHES[fault].code_of_other
	                                                               : WATCHES[fault].code;
}

int faults_watch(struct controller *controller, const struct sensed *sensed)
{
	struct controller *c = controller;
	int found = -1;
	for (int i = 0; i < FAULTS; i++) {
		if (defect_in(c->defects, (enum defect)WATCHES[i].missed_by))
			continue;
		if (!stands(c, (enum fault)i, sensed)) {
			c->since_ns[i] = -1;
			c->ignored[i] = false;
			continue;
		}
		if (c->since_ns[i] < 0)
			c->since_ns[i] = sensed->now_ns;
		int64_t filter_ns = WATCHES[i].filter_ns;
		if (i != FAULT_LINK_WATCHDOG && defect_in(c->defects, DEFECT_FAULT_LATE))
			filter_ns += LATE_NS;
		if (found < 0 && !c->ignored[i] && sensed->now_ns - c->since_ns[i] >= filter_ns)
			found = i;
	}
	return found;
}
