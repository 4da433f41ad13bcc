/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_MODULATION_H
#define DRIVETRIAL_MODEL_MODULATION_H
/*
 * Space vector modulation: a voltage vector becomes dwell times of the two
 * neighbouring active states and the null states of one switching period
 * (van der Broeck, Skudelny, Stanke, IEEE Trans. IA 24(1) 1988):
 *   t1 = sqrt(3) Ts V/Vdc sin(60 deg - angle in the sector),
 *   t2 = sqrt(3) Ts V/Vdc sin(angle in the sector), t0 = the rest.
 * Linear up to V = Vdc/sqrt(3). Past it the active times are shortened in
 * proportion, so the vector ends on the hexagon with its angle kept.
 */
#include <stdbool.h>

struct dwell {
	int sector;        /* 0 to 5; sector k lies between active states k + 1 and k + 2 */
	double t1, t2, t0; /* in the unit of the period */
};

/* dc_v > 0; period in any unit. */
struct dwell modulation_dwell(double alpha_v, double beta_v, double dc_v, double period);
/*
 * On-time shares of the upper switches. null_share: part of the null time
 * that the upper null state (111) takes, 0.5 in a healthy controller.
 */
void modulation_duties(const struct dwell *dwell, double period, double null_share,
                       double ret_duty[3]);
/* The vector, as a share of the DC voltage, that three duties put on the windings. */
void modulation_vector(const double duty[3], double *ret_alpha, double *ret_beta);

#endif
