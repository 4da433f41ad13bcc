/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_CONTROLLER_H
#define DRIVETRIAL_MODEL_CONTROLLER_H
/*
 * The controller under test, called once a control period. It knows what its
 * sensors tell it and nothing else: its rotor frame is the one that it
 * believes, from encoder counts and a stored offset.
 *
 * Order of a period: measure, watch for faults, state machine, speed loop,
 * current loops, modulation. The duties take effect one period later (the
 * caller keeps them); pulses off takes effect at once.
 *
 * Cascade: current loops by the magnitude optimum, speed loop by the
 * symmetric optimum (a = 2) with a prefilter on the command.
 */
#include <stdbool.h>
#include <stdint.h>

#include "model_encoder.h"

enum defect {
#define DEFECT(identifier, name, caught_by, text) DEFECT_##identifier,
#include "model_defect_list.h"
#undef DEFECT
	DEFECTS,
};

static inline bool defect_in(uint64_t defects, enum defect defect)
{
	return defects >> (unsigned)defect & 1;
}

enum fault {
	FAULT_OVERCURRENT = 0,
	FAULT_OVERVOLTAGE,
	FAULT_ENCODER_LOSS,
	FAULT_OVERTEMPERATURE,
	FAULT_UNDERVOLTAGE,
	FAULT_PHASE_LOSS,
	FAULT_TORQUE_OFF_DIFFERS, /* the two channels of safe torque off */
	FAULT_LINK_WATCHDOG,
	FAULTS,
};

/* states.c documents the transitions. */
enum drive_state {
	STATE_STARTING = 0, /* self-test */
	STATE_READY,        /* no fault, not enabled */
	STATE_RUNNING,      /* pulses on */
	STATE_FAULT,        /* pulses off, code latched */
	STATE_INHIBITED,    /* fault reset while enable stood: enable must be taken away first */
	DRIVE_STATES,
};

struct sensed {
	int64_t now_ns;
	double now_s;
	double phase_a, phase_b; /* from the current sensors */
	double comparator_a;     /* largest phase current that the overcurrent comparator sees */
	double dc_v, winding_c;  /* from their sensors */
	int hall_sector;         /* 0 to 5: the rotor within 30 deg electrical of that many times 60 */
	bool torque_off[2];      /* the channels of safe torque off that are open */
	struct encoder *encoder; /* the controller may set its counter */
};

enum { SPEED_WINDOW_MOST = 64 };

/* Edges over a window: how speed is measured (speed_loop.c). */
struct speed_meter {
	int window;
	int at;
	int64_t place[SPEED_WINDOW_MOST];
	double when_s[SPEED_WINDOW_MOST];
	double filter_share, raw_rad_s, speed_rad_s;
};

struct speed_loop {
	double gain, integral_share; /* N m per rad/s; share of it that a period adds */
	double prefilter_share;
	double torque_most_nm;
	double windup_share;  /* how far the integral may wind up at the limit; 0 in a healthy one */
	double command_rad_s; /* behind the prefilter */
	double integral_nm;
};

struct current_loops {
	double gain_d, gain_q, integral_share_d, integral_share_q;
	double integral_d, integral_q; /* V */
};

struct controller {
	/* built */
	uint64_t defects;
	int pole_pairs, counts_per_turn;
	double flux_wb, ld_h, lq_h;
	double period_s, switching_period_s;
	double current_most_a, magnetising_a;
	double overcurrent_a, overvoltage_v, undervoltage_v, overtemperature_c;
	double rated_current_a, rated_speed_rad_s, speed_most_rad_s;
	double offset_elec_rad; /* of the encoder; what is stored, not what is true */
	bool block;             /* two phases on, by Hall sensors, instead of sinusoidal currents */
	double null_share;
	double weakening_share; /* of the linear voltage limit, above which the field is weakened */
	struct speed_loop speed_loop;
	struct current_loops current_loops;

	/* commands, as written */
	double speed_command_rad_s, ramp_rad_s2; /* of the command's ramp generator; 0: none */
	int control;
	int64_t watchdog_ns, heard_ns;
	bool enable_given, enable_taken, reset_edge; /* edges since the last period */

	/* measured, in the frame that it believes */
	struct speed_meter meter;
	int counts;
	int64_t position_counts; /* since the last enable, begun with counts */
	double speed_rad_s, angle_elec_rad, current_d_a, current_q_a, dc_v, winding_c, torque_nm;

	/* states and faults */
	double ramped_rad_s;      /* speed command behind the ramp generator */
	double missing_current_a; /* commanded minus flowing, smoothed */
	double phase_use_a[3];    /* magnitude that each phase carries, smoothed */
	enum drive_state state;
	int fault_code;
	enum fault fault; /* what is latched, valid while fault_code != 0 */
	int64_t started_ns, fault_ns, gone_ns;
	int64_t since_ns[FAULTS]; /* the condition stands since; -1: it does not */
	bool ignored[FAULTS];     /* by the defect reset-while-cause */

	/* commanded */
	bool pulses_on;
	double current_d_command_a, current_q_command_a;
	double torque_q_a;              /* last answer of maximum torque per ampere */
	double weakening_d_a, wanted_v; /* field weakening; voltage wanted before its limit */
	double voltage_d_v, voltage_q_v, voltage_alpha_v, voltage_beta_v;
	double duty[3];
	int floating; /* block commutation: 1 to 3, the phase that is off; 0: none */
};

struct controller_tuning {
	double resistance_ohm, inertia_kgm2;
	double current_bandwidth_rad_s, speed_bandwidth_rad_s; /* 0: by the optima */
};

/* After the built values are filled in. */
void controller_start(struct controller *controller, const struct controller_tuning *tuning);
void controller_step(struct controller *controller, const struct sensed *sensed);
/* A new control word: bit 0 enable, bit 1 reset. Edges are kept until the next period. */
void controller_control(struct controller *controller, int control, int64_t now_ns);

/* speed_loop.c */
void speed_meter_start(struct speed_meter *meter, double period_s);
double speed_meter_step(struct speed_meter *meter, const struct encoder *encoder,
                        double counts_per_turn, double now_s);
void speed_loop_tune(struct speed_loop *loop, double inertia_kgm2, double lag_s, double period_s,
                     uint64_t defects);
/* The torque command, within the limit. gain_share: of the gain schedule, 1 in a healthy one. */
double speed_loop_step(struct speed_loop *loop, double command_rad_s, double speed_rad_s,
                       double gain_share);

/* current_loop.c: from current commands to duties. */
void current_loops_tune(struct controller *controller, const struct controller_tuning *tuning);
double drive_torque_of(const struct controller *controller, double current_d_a, double current_q_a);
/* io_q: a first guess, then the answer. Only for machines with saliency. */
void current_for_torque(const struct controller *controller, double torque_nm, double *io_q,
                        double *ret_d);
void current_commands(struct controller *controller, double torque_nm);
void current_loops_step(struct controller *controller);

/* faults.c */
void faults_start(struct controller *controller);
/* A fault that has stood for its filter time, or -1. */
int faults_watch(struct controller *controller, const struct sensed *sensed);
bool fault_gone(const struct controller *controller, enum fault fault, const struct sensed *sensed);
int fault_code_of(const struct controller *controller, enum fault fault);

/* states.c */
void states_step(struct controller *controller, const struct sensed *sensed, int fault);

#endif
