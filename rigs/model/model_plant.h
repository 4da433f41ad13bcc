/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_PLANT_H
#define DRIVETRIAL_MODEL_PLANT_H
/*
 * The power path: supply, DC link, converter, machine, shaft. SI; currents,
 * fluxes and voltages in dq are amplitudes (amplitude-invariant). Angles and
 * speeds are mechanical unless they say elec.
 *
 *   Ld did/dt = ud - R id + we Lq iq
 *   Lq diq/dt = uq - R iq - we (Ld id + psi)
 *   T = 1.5 p (psi + (Ld - Lq) id) iq
 *   J dw/dt = T - load - viscous w - coulomb sign(w)
 *   C dv/dt = supply current - converter current - chopper current - bleeder current
 *
 * With a stiffness the shaft is two masses on a spring with damping, motor and load machine; the
 * friction is shared between them by motor_friction_share. An open phase carries no current: its
 * terminal then takes whatever voltage keeps it at zero.
 *
 * The converter is averaged over its switching period: in a step it puts
 * duty vector times DC voltage on the windings, standing in the stator frame.
 * With the pulses off the windings feed back through the diodes until they
 * carry no current.
 */
#include <stdbool.h>

#include "model_load.h"

struct plant_energies { /* J since the start, all from the one quadrature of the steps */
	double supply, copper, friction, load, resistors;
};

struct plant {
	/* built */
	int pole_pairs;
	double flux_wb, ld_h, lq_h, resistance_20_ohm; /* resistance at 20 degC */
	double inertia_kgm2, load_inertia_kgm2;        /* total, and the load machine's part of it */
	double viscous_nms, coulomb_nm, motor_friction_share;
	double stiffness_nm_rad, damping_nms; /* of the shaft; stiffness 0: rigid */
	double capacitance_f, source_resistance_ohm, chopper_ohm, bleeder_ohm;
	double chopper_on_v, chopper_off_v;
	double thermal_resistance_kw, thermal_capacitance_jk, ambient_c;

	/* what holds during a step */
	double supply_v;
	double duty_alpha, duty_beta; /* voltage vector / DC voltage */
	bool pulses_on, chopper_closed, no_path;
	int open_phase; /* 1 to 3: phase a, b or c carries no current; 0: none */
	const struct load_machine *load;

	/* state */
	double current_d_a, current_q_a, speed_rad_s, angle_rad, dc_v; /* angle in [0, 2 pi) */
	double load_speed_rad_s, twist_rad; /* equal to speed_rad_s and 0 where the shaft is rigid */
	int64_t turns;
	double winding_c, resistance_ohm;
	bool blocked; /* pulses off and no current flows */
	struct plant_energies energies;

	/* derived at the end of a step */
	double cos_elec, sin_elec;
	double phase_a[3];
	double torque_nm, shaft_torque_nm; /* air gap; through the transducer */
};

/* Fills what is derived from the state. */
void plant_start(struct plant *plant);
/* One step of the whole; h_s is divided into `parts` steps of integration. */
void plant_step(struct plant *plant, double h_s, int parts);
/* Winding temperature over h_s, from the copper heat of that time. */
void plant_heat(struct plant *plant, double h_s, double copper_j);
/* Energy stored in capacitor, inertia and windings, J. */
double plant_stored(const struct plant *plant);
double plant_friction(const struct plant *plant, double speed_rad_s);

#endif
