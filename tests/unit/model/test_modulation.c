/* SPDX-License-Identifier: Apache-2.0 */
/* Space vector modulation against published and independently computed values. */
#include "model_modulation.h"
#include "near.h"

#define PI    3.14159265358979323846
#define SQRT3 1.73205080756887729353

/*
 * Dwell times of 300 V DC and 100 us: from the formulas of van der Broeck, Skudelny and Stanke,
 * IEEE Trans. IA 24(1) 1988, computed independently with SciPy and confirmed by putting the
 * vectors together again.
 */
static void dwell_times_are_the_published_ones(void **state)
{
	(void)state;
	static const struct {
		double volt, deg;
		int sector;
		double t1, t2, t0;
	} ROWS[] = {
	    {100, 20, 0, 37.1114, 19.7465, 43.1421}, {100, 30, 0, 28.8675, 28.8675, 42.2650},
	    {150, 45, 0, 22.4144, 61.2372, 16.3484}, {173.2050808, 30, 0, 50, 50, 0},
	    {120, 80, 1, 44.5336, 23.6959, 31.7705},
	};
	for (size_t i = 0; i < sizeof ROWS / sizeof ROWS[0]; i++) {
		double angle = ROWS[i].deg * PI / 180;
		struct dwell dwell =
		    modulation_dwell(ROWS[i].volt * cos(angle), ROWS[i].volt * sin(angle), 300, 100);
		assert_int_equal(dwell.sector, ROWS[i].sector);
		assert_near(dwell.t1, ROWS[i].t1, 6e-5, "us");
		assert_near(dwell.t2, ROWS[i].t2, 6e-5, "us");
		assert_near(dwell.t0, ROWS[i].t0, 6e-5, "us");
	}
}

/* Common practice: an active state puts +-1/3 and +-2/3 of the DC voltage on the windings. */
static void the_six_active_states_put_thirds_on_the_windings(void **state)
{
	(void)state;
	static const double ON[6][3] = {{1, 0, 0}, {1, 1, 0}, {0, 1, 0},
	                                {0, 1, 1}, {0, 0, 1}, {1, 0, 1}};
	static const double WINDINGS[6][3] = {{2, -1, -1}, {1, 1, -2},  {-1, 2, -1},
	                                      {-2, 1, 1},  {-1, -1, 2}, {1, -2, 1}};
	for (int i = 0; i < 6; i++) {
		double alpha, beta;
		modulation_vector(ON[i], &alpha, &beta);
		assert_near(alpha, WINDINGS[i][0] / 3, 1e-15, "Vdc");
		assert_near(-alpha / 2 + beta * SQRT3 / 2, WINDINGS[i][1] / 3, 1e-15, "Vdc");
		assert_near(-alpha / 2 - beta * SQRT3 / 2, WINDINGS[i][2] / 3, 1e-15, "Vdc");
		assert_near(hypot(alpha, beta), 2.0 / 3, 1e-15, "Vdc");
		double angle = atan2(beta, alpha) * 180 / PI;
		assert_near(remainder(angle - 60 * i, 360), 0, 1e-9, "deg");
	}
}

static void duties_make_the_vector_wherever_it_points(void **state)
{
	(void)state;
	for (int deg = 0; deg < 360; deg++) {
		double alpha = 170 * cos(deg * PI / 180), beta = 170 * sin(deg * PI / 180);
		struct dwell dwell = modulation_dwell(alpha, beta, 300, 1e-4);
		double duty[3], got_alpha, got_beta;
		modulation_duties(&dwell, 1e-4, 0.5, duty);
		for (int i = 0; i < 3; i++)
			assert_true(duty[i] >= 0 && duty[i] <= 1);
		modulation_vector(duty, &got_alpha, &got_beta);
		assert_near(got_alpha * 300, alpha, 1e-10, "V");
		assert_near(got_beta * 300, beta, 1e-10, "V");
		assert_near(dwell.t1 + dwell.t2 + dwell.t0, 1e-4, 1e-18, "s");
	}
}

static void beyond_the_hexagon_the_angle_is_kept_and_no_time_is_negative(void **state)
{
	(void)state;
	for (int deg = 0; deg < 360; deg += 7) {
		struct dwell dwell =
		    modulation_dwell(400 * cos(deg * PI / 180), 400 * sin(deg * PI / 180), 300, 1);
		double duty[3], alpha, beta;
		modulation_duties(&dwell, 1, 0.5, duty);
		modulation_vector(duty, &alpha, &beta);
		assert_near(dwell.t0, 0, 0, "of the period");
		assert_near(remainder(atan2(beta, alpha) * 180 / PI - deg, 360), 0, 1e-9, "deg");
		assert_true(hypot(alpha, beta) <= 2.0 / 3 + 1e-12);
		assert_true(hypot(alpha, beta) >= 1 / SQRT3 - 1e-12);
	}
}

static void unequal_null_states_change_the_duties_and_not_the_vector(void **state)
{
	(void)state;
	struct dwell dwell = modulation_dwell(80, 30, 300, 1);
	double even[3], lower[3], alpha[2], beta[2];
	modulation_duties(&dwell, 1, 0.5, even);
	modulation_duties(&dwell, 1, 0, lower);
	modulation_vector(even, &alpha[0], &beta[0]);
	modulation_vector(lower, &alpha[1], &beta[1]);
	assert_near(alpha[0], alpha[1], 1e-15, "Vdc");
	assert_near(beta[0], beta[1], 1e-15, "Vdc");
	assert_near(even[0] - lower[0], dwell.t0 / 2, 1e-15, "of the period");
	assert_near(lower[2], 0, 0, "of the period");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(dwell_times_are_the_published_ones),
	    cmocka_unit_test(the_six_active_states_put_thirds_on_the_windings),
	    cmocka_unit_test(duties_make_the_vector_wherever_it_points),
	    cmocka_unit_test(beyond_the_hexagon_the_angle_is_kept_and_no_time_is_negative),
	    cmocka_unit_test(unequal_null_states_change_the_duties_and_not_the_vector),
	};
	return RUN_GROUP(tests);
}
