/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Quantised angle and edges. Edges within a control period are not simulated
 * one by one: only the newest matters to the capture unit, and its time
 * follows from the speed at the end of the period.
 */
#include "model_encoder.h"

#include <math.h>

void encoder_start(struct encoder *encoder, double angle_rad, int64_t turns)
{
	encoder->counts_per_rad = encoder->counts_per_turn / 6.28318530717958647692;
	encoder->turns = turns;
	encoder->true_count =
	    turns * encoder->counts_per_turn + (int64_t)(angle_rad * encoder->counts_per_rad);
	encoder->level_good = true;
	encoder_reference(encoder);
}

void encoder_reference(struct encoder *encoder)
{
	encoder->counter =
	    (int)(encoder->true_count - encoder->turns * (int64_t)encoder->counts_per_turn);
}

/* Place of the newest edge and when it came, by the speed at the end of the period. */
static void capture(struct encoder *encoder, int64_t delta, double place_counts, double speed_rad_s,
                    double now_s, double period_s)
{
	/* Upwards the newest edge is the lower border of the present count, downwards the upper. */
	double beyond = delta > 0 ? place_counts : 1 - place_counts;
	encoder->edge_place = encoder->seen + (delta > 0 ? 0 : 1);
	double rate = fabs(speed_rad_s) * encoder->counts_per_rad;
	double ago = rate * period_s > beyond ? beyond / rate : 0.5 * period_s;
	encoder->edge_s = now_s - ago;
}

void encoder_step(struct encoder *encoder, double angle_rad, int64_t turns, double speed_rad_s,
                  bool open, double now_s, double period_s)
{
	double in_turn = angle_rad * encoder->counts_per_rad;
	int whole = (int)in_turn;
	if (whole >= encoder->counts_per_turn)
		whole = encoder->counts_per_turn - 1;
	int64_t count = turns * encoder->counts_per_turn + whole;
	int64_t delta = count - encoder->true_count;
	encoder->true_count = count;
	encoder->level_good = !open;
	int64_t passed = turns - encoder->turns;
	encoder->turns = turns;
	if (open || delta == 0)
		return;
	encoder->seen += delta;
	capture(encoder, delta, in_turn - whole, speed_rad_s, now_s, period_s);
	if (passed && !encoder->index_drifts) {
		encoder->counter = whole;
		return;
	}
	int64_t counter = encoder->counter + delta + passed;
	counter %= encoder->counts_per_turn;
	encoder->counter = (int)(counter < 0 ? counter + encoder->counts_per_turn : counter);
}
