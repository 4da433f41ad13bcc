/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The control loops in linear configurations: the current loop against its own
 * discrete transfer function, the speed loop with one lag against the closed
 * forms of the symmetric optimum. The reference numbers come from SciPy
 * (tests/outside/model_loops.py); the closed forms are those of Kessler's
 * symmetric optimum, computed independently with SciPy and Octave.
 */
#include "bench.h"
#include "model_modulation.h"

static struct plant locked_machine(void)
{
	static struct load_machine none;
	struct plant plant = {
	    .pole_pairs = 4,
	    .flux_wb = 0.085,
	    .ld_h = 3.1e-3,
	    .lq_h = 3.1e-3,
	    .resistance_20_ohm = 0.9,
	    .inertia_kgm2 = 1e12,
	    .load_inertia_kgm2 = 1,
	    .capacitance_f = 1e9,
	    .source_resistance_ohm = 1,
	    .chopper_ohm = 1e9,
	    .bleeder_ohm = 1e9,
	    .chopper_on_v = 1e9,
	    .thermal_resistance_kw = 1,
	    .thermal_capacitance_jk = 1e9,
	    .winding_c = 20,
	    .supply_v = 310,
	    .dc_v = 310,
	    .angle_rad = 0.7,
	    .pulses_on = true,
	    .load = &none,
	};
	plant_start(&plant);
	return plant;
}

static void the_current_loop_follows_its_discrete_transfer_function(void **state)
{
	(void)state;
	static const struct {
		int at;
		double value;
	} ROWS[] = {
	    {0, 0},           {1, 0},           {2, 0.328541112},  {3, 0.657219353},  {4, 0.878091536},
	    {5, 0.991063746}, {8, 1.024875681}, {10, 1.005984187}, {15, 1.000487023}, {20, 1.000848310},
	    {40, 1.000454229}};
	struct plant plant = locked_machine();
	struct controller controller = {
	    .pole_pairs = 4,
	    .flux_wb = 0.085,
	    .ld_h = 3.1e-3,
	    .lq_h = 3.1e-3,
	    .period_s = 1e-4,
	    .switching_period_s = 1e-4,
	    .null_share = 0.5,
	    .dc_v = 310,
	    .angle_elec_rad = 4 * 0.7,
	    .current_q_command_a = 1,
	};
	struct controller_tuning tuning = {.resistance_ohm = 0.9};
	current_loops_tune(&controller, &tuning);
	double computed[2] = {0, 0}, most = 0;
	size_t row = 0;
	for (int k = 0; k <= 40; k++) {
		if (row < sizeof ROWS / sizeof ROWS[0] && k == ROWS[row].at)
			assert_near(plant.current_q_a, ROWS[row++].value, 2e-6, "A");
		most = fmax(most, plant.current_q_a);
		controller.current_d_a = plant.current_d_a;
		controller.current_q_a = plant.current_q_a;
		current_loops_step(&controller);
		plant.duty_alpha = computed[0]; /* what was computed a period ago holds now */
		plant.duty_beta = computed[1];
		modulation_vector(controller.duty, &computed[0], &computed[1]);
		plant_step(&plant, 1e-4, 1);
		assert_near(plant.current_d_a, 0, 1e-9, "A");
	}
	assert_int_equal(row, sizeof ROWS / sizeof ROWS[0]);
	assert_near(100 * (most - 1), 3.484019, 3e-4, "%"); /* 4.32 % without sampling */
}

struct peak {
	double value, at; /* at: in lags */
};

/* One lag of 2 ms behind the speed controller, then an inertia; steps of a thousandth of the lag.
 */
static struct peak speed_peak(bool prefilter, double command, double load_nm)
{
	const double lag = 2e-3, h = 2e-6, inertia = 0.01;
	struct speed_loop loop = {.torque_most_nm = 1e9};
	speed_loop_tune(&loop, inertia, lag, h, 0);
	if (!prefilter)
		loop.prefilter_share = 1;
	double torque = 0, speed = 0;
	struct peak peak = {.value = 0};
	for (int i = 1; i <= 20000; i++) {
		double wanted = speed_loop_step(&loop, command, speed, 1);
		double before = torque;
		torque += (wanted - torque) * -expm1(-h / lag);
		speed += h * (0.5 * (before + torque) - load_nm) / inertia;
		double height = load_nm != 0 ? -speed : speed;
		if (height > peak.value)
			peak = (struct peak){.value = height, .at = i * h / lag};
	}
	return peak;
}

static void the_speed_loop_is_the_symmetric_optimum(void **state)
{
	(void)state;
	struct peak bare = speed_peak(false, 1, 0);
	assert_near(100 * (bare.value - 1), 43.410408, 0.15, "%");
	assert_near(bare.at, 5.77264, 0.02, "lags");
	struct peak filtered = speed_peak(true, 1, 0);
	assert_near(100 * (filtered.value - 1), 8.146544, 0.1, "%");
	assert_near(filtered.at, 9.84443, 0.03, "lags");
}

/* J = 0.01 kgm2, 2 Nm, 2 ms: 0.708119 rad/s at 6.17868 ms. */
static void a_load_step_dips_by_the_closed_form(void **state)
{
	(void)state;
	struct peak dip = speed_peak(true, 0, 2);
	assert_near(dip.value, 0.708119, 1e-3, "rad/s");
	assert_near(dip.at * 2, 6.17868, 0.02, "ms");
}

static void the_integral_stands_still_at_the_torque_limit(void **state)
{
	(void)state;
	struct speed_loop loop = {.torque_most_nm = 1};
	speed_loop_tune(&loop, 0.01, 2e-3, 1e-4, 0);
	loop.prefilter_share = 1;
	for (int i = 0; i < 1000; i++)
		assert_near(speed_loop_step(&loop, 100, 0, 1), 1, 0, "Nm");
	assert_near(loop.integral_nm, 0, 0, "Nm");
	assert_true(speed_loop_step(&loop, 100, 101, 1) < 0); /* and lets go at once */
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_current_loop_follows_its_discrete_transfer_function),
	    cmocka_unit_test(the_speed_loop_is_the_symmetric_optimum),
	    cmocka_unit_test(a_load_step_dips_by_the_closed_form),
	    cmocka_unit_test(the_integral_stands_still_at_the_torque_limit),
	};
	return RUN_GROUP(tests);
}
