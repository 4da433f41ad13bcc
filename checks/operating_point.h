/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_OPERATING_POINT_H
#define DRIVETRIAL_OPERATING_POINT_H
/*
 * Where a current vector of a given magnitude belongs, by the nameplate: the
 * torque angle of maximum torque per ampere, and the one at which the voltage
 * limit binds. Tolerances of the nameplate and uncertainties of what was
 * measured make an interval of it. Angles in degrees electrical from the d
 * axis, for positive torque: 90 to 180 (below 90 where Ld > Lq). Pure.
 */
#include "machine.h"

struct interval {
	double value, low, high;
};

struct operating_point {
	struct interval current; /* A peak */
	struct interval speed;   /* rad/s mechanical, magnitude; for the voltage limit */
	struct interval voltage; /* V, largest amplitude of a phase; for the voltage limit */
};

/*
 * Morimoto, Takeda, Hirasa, Taniguchi: IEEE Trans. IA 26(5), 1990:
 * i_d = (psi - sqrt(psi^2 + 8 (Lq - Ld)^2 I^2)) / (4 (Lq - Ld)).
 */
double angle_of_most_torque(double psi, double l_d, double l_q, double current);
/*
 * The angle from that one on at which |u| falls to the limit, resistance and
 * all: u_d = R i_d - w Lq i_q, u_q = R i_q + w (Ld i_d + psi). NaN where even
 * 180 deg needs more.
 */
double angle_at_voltage_limit(double psi, double l_d, double l_q, double resistance,
                              double speed_elec, double voltage, double current);

/* The torque of a current vector at an angle: 3/2 p [psi + (Ld - Lq) i_d] i_q. */
double torque_of(const struct machine *machine, double psi, double current, double angle_deg);

/* value by the nameplate, low and high over all corners of the tolerances. NaN: no such angle. */
struct interval target_of_most_torque(const struct machine *machine,
                                      const struct operating_point *point);
struct interval target_at_voltage_limit(const struct machine *machine,
                                        const struct operating_point *point);

#endif
