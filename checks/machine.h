/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MACHINE_H
#define DRIVETRIAL_MACHINE_H
/*
 * Nameplate of the motor under test. SI: currents and fluxes are amplitudes
 * (peak) of phase quantities, speeds are mechanical. A tolerance is a share
 * (0.05 for 5 %); 0 where none was given. A value that the rig file does not
 * give is NaN (counts: 0), and a check that needs it says which.
 */
struct nameplate_value {
	double value, tolerance;
};

struct machine {
	int pole_pairs;
	int encoder_lines;                    /* pulses per revolution of A or B; 4 counts per pulse */
	struct nameplate_value flux_linkage;  /* Wb peak */
	struct nameplate_value inductance_d;  /* H */
	struct nameplate_value inductance_q;  /* H */
	struct nameplate_value resistance;    /* ohm per phase */
	struct nameplate_value rated_speed;   /* rad/s mechanical */
	struct nameplate_value rated_torque;  /* N m */
	struct nameplate_value rated_current; /* A peak */
	struct nameplate_value dc_voltage;    /* V */
};

#endif
