/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_MODEL_ENCODER_H
#define DRIVETRIAL_MODEL_ENCODER_H
/*
 * The incremental encoder and the counter behind it: A, B with four counts a
 * line, an index once a turn that sets the counter, and commutation tracks
 * from which the counter is set when the drive is enabled. The capture unit
 * keeps place and time of the newest edge.
 *
 * With the cable open the counter stands; closed again it goes on from there,
 * wrong by what it missed, until the next index or enable. The receiver sees
 * the missing signal level at any speed, at standstill too.
 */
#include <stdbool.h>
#include <stdint.h>

struct encoder {
	/* built */
	int counts_per_turn;
	double counts_per_rad;
	bool index_drifts; /* the defect */
	/* state */
	int64_t true_count; /* of the disc, unwrapped */
	int64_t turns;
	int counter;        /* hardware register, [0, counts_per_turn) */
	int64_t seen;       /* counts seen by the counter, unwrapped, never set */
	int64_t edge_place; /* of the newest edge, in counts as `seen` counts */
	double edge_s;      /* when it came */
	bool level_good;    /* differential signal level */
};

void encoder_start(struct encoder *encoder, double angle_rad, int64_t turns);
/* angle_rad in [0, 2 pi), at time now_s; the step before was period_s ago. */
void encoder_step(struct encoder *encoder, double angle_rad, int64_t turns, double speed_rad_s,
                  bool open, double now_s, double period_s);
/* Sets the counter from the commutation tracks. */
void encoder_reference(struct encoder *encoder);

#endif
