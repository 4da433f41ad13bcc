/* SPDX-License-Identifier: Apache-2.0 */
/* Counts, index, a cable that opens, and speed from edges. */
#include "model_controller.h"
#include "near.h"

#define TWO_PI 6.28318530717958647692

static struct encoder encoder_at(double angle_rad)
{
	struct encoder encoder = {.counts_per_turn = 4096};
	encoder_start(&encoder, angle_rad, 0);
	return encoder;
}

/* 1024 lines: count 1000 is 87.890625 deg, count 512 is 45 deg; arithmetic. */
static void counts_are_four_per_line(void **state)
{
	(void)state;
	struct encoder encoder = encoder_at(87.890625 * TWO_PI / 360 + 1e-9);
	assert_int_equal(encoder.counter, 1000);
	encoder = encoder_at(TWO_PI / 8 + 1e-9);
	assert_int_equal(encoder.counter, 512);
	encoder = encoder_at(TWO_PI - 1e-9);
	assert_int_equal(encoder.counter, 4095);
}

/* Turns at a constant speed; returns the angle at the end. */
static double turn(struct encoder *encoder, double angle, double rad_s, double from_s, double to_s,
                   bool open)
{
	for (long k = lround(from_s * 1e4) + 1; k <= lround(to_s * 1e4); k++) {
		double unwrapped = angle + rad_s * ((double)k * 1e-4 - from_s);
		double turns = floor(unwrapped / TWO_PI);
		encoder_step(encoder, unwrapped - turns * TWO_PI, (int64_t)turns, rad_s, open,
		             (double)k * 1e-4, 1e-4);
	}
	return angle + rad_s * (to_s - from_s);
}

static void the_counter_wraps_at_the_index_both_ways(void **state)
{
	(void)state;
	struct encoder encoder = encoder_at(0.001);
	double angle = turn(&encoder, 0.001, 100, 0, 0.1, false);
	assert_int_equal(encoder.counter, (int)(fmod(angle, TWO_PI) * 4096 / TWO_PI));
	angle = turn(&encoder, angle, -250, 0.1, 0.2, false);
	assert_int_equal(encoder.counter, (int)((angle + 3 * TWO_PI) * 4096 / TWO_PI) % 4096);
}

static void an_open_cable_stops_the_counter_and_the_next_index_sets_it_right(void **state)
{
	(void)state;
	struct encoder encoder = encoder_at(0.5);
	double angle = turn(&encoder, 0.5, 100, 0, 0.01, false);
	int before = encoder.counter;
	angle = turn(&encoder, angle, 100, 0.01, 0.02, true);
	assert_int_equal(encoder.counter, before);
	assert_false(encoder.level_good);
	angle = turn(&encoder, angle, 100, 0.02, 0.03, false);
	assert_true(encoder.level_good);
	int right = (int)(fmod(angle, TWO_PI) * 4096 / TWO_PI);
	assert_near(right - encoder.counter, 1.0 * 4096 / TWO_PI, 2, "counts"); /* 1 rad was missed */
	angle = turn(&encoder, angle, 100, 0.03, 0.09, false);
	assert_int_equal(encoder.counter, (int)(fmod(angle, TWO_PI) * 4096 / TWO_PI));
}

static void referencing_sets_the_counter_from_the_commutation_tracks(void **state)
{
	(void)state;
	struct encoder encoder = encoder_at(0.5);
	double angle = turn(&encoder, 0.5, 50, 0, 0.02, true);
	encoder_reference(&encoder);
	assert_int_equal(encoder.counter, (int)(angle * 4096 / TWO_PI));
}

static double measured(double rad_s, double time_s, double *ret_spread)
{
	struct encoder encoder = encoder_at(0.1);
	struct speed_meter meter = {0};
	speed_meter_start(&meter, 1e-4);
	double least = 1e9, most = -1e9, speed = 0;
	for (long k = 1; k <= lround(time_s * 1e4); k++) {
		double unwrapped = 0.1 + rad_s * (double)k * 1e-4, turns = floor(unwrapped / TWO_PI);
		encoder_step(&encoder, unwrapped - turns * TWO_PI, (int64_t)turns, rad_s, false,
		             (double)k * 1e-4, 1e-4);
		speed = speed_meter_step(&meter, &encoder, 4096, (double)k * 1e-4);
		if ((double)k * 1e-4 > 0.8 * time_s) {
			least = fmin(least, speed);
			most = fmax(most, speed);
		}
	}
	*ret_spread = most - least;
	return speed;
}

/* 3000 rpm are 204.8 counts a millisecond; counting alone would resolve 15 rpm. */
static void speed_from_edges_is_far_finer_than_counting(void **state)
{
	(void)state;
	static const double SPEEDS[] = {1, -5, 20, -157, 314};
	for (size_t i = 0; i < sizeof SPEEDS / sizeof SPEEDS[0]; i++) {
		double spread, speed = measured(SPEEDS[i], 0.2, &spread);
		assert_near(speed, SPEEDS[i], 1e-3 * fabs(SPEEDS[i]) + 1e-6, "rad/s");
		assert_true(spread < 2e-3 * fabs(SPEEDS[i]) + 1e-6);
	}
}

static void a_standing_shaft_reads_zero_speed(void **state)
{
	(void)state;
	struct encoder encoder = encoder_at(0.1);
	struct speed_meter meter = {0};
	speed_meter_start(&meter, 1e-4);
	double angle = turn(&encoder, 0.1, 100, 0, 0.01, false);
	(void)speed_meter_step(&meter, &encoder, 4096, 0.01);
	double speed = 1;
	for (int k = 101; k < 1101; k++) {
		encoder_step(&encoder, angle, 0, 0, false, k * 1e-4, 1e-4);
		speed = speed_meter_step(&meter, &encoder, 4096, k * 1e-4);
	}
	assert_near(speed, 0, 0.02, "rad/s"); /* less than a count in the time that it stood */
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(counts_are_four_per_line),
	    cmocka_unit_test(the_counter_wraps_at_the_index_both_ways),
	    cmocka_unit_test(an_open_cable_stops_the_counter_and_the_next_index_sets_it_right),
	    cmocka_unit_test(referencing_sets_the_counter_from_the_commutation_tracks),
	    cmocka_unit_test(speed_from_edges_is_far_finer_than_counting),
	    cmocka_unit_test(a_standing_shaft_reads_zero_speed),
	};
	return RUN_GROUP(tests);
}
