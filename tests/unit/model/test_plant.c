/* SPDX-License-Identifier: Apache-2.0 */
/* Machine, converter, DC link and shaft against closed forms and conservation of energy. */
#include "bench.h"

/* A machine on a stiff DC link and a shaft that no torque can move. */
static struct plant plant_of(double p, double psi, double ld, double lq, double r, double dc_v)
{
	static struct load_machine none;
	struct plant plant = {
	    .pole_pairs = (int)p,
	    .flux_wb = psi,
	    .ld_h = ld,
	    .lq_h = lq,
	    .resistance_20_ohm = r,
	    .inertia_kgm2 = 1e9,
	    .load_inertia_kgm2 = 1,
	    .motor_friction_share = 0.2,
	    .capacitance_f = 1e6,
	    .source_resistance_ohm = 1,
	    .chopper_ohm = 1e9,
	    .bleeder_ohm = 1e9,
	    .chopper_on_v = 1e9,
	    .chopper_off_v = 1e8,
	    .thermal_resistance_kw = 1,
	    .thermal_capacitance_jk = 1e9,
	    .winding_c = 20,
	    .ambient_c = 20,
	    .supply_v = dc_v,
	    .dc_v = dc_v,
	    .pulses_on = true,
	    .load = &none,
	};
	plant_start(&plant);
	return plant;
}

/* Holds a voltage vector that turns with the rotor, in steps so small that it hardly stands. */
static void hold_dq(struct plant *plant, double ud, double uq, double time_s)
{
	double h = 1e-6;
	for (long i = 0; i < lround(time_s / h); i++) {
		double middle = plant->pole_pairs * (plant->angle_rad + 0.5 * h * plant->speed_rad_s);
		plant->duty_alpha = (ud * cos(middle) - uq * sin(middle)) / plant->dc_v;
		plant->duty_beta = (ud * sin(middle) + uq * cos(middle)) / plant->dc_v;
		plant_step(plant, h, 1);
	}
}

/* Steady state of the dq equations, and T = 1.5 p (psi + (Ld - Lq) id) iq. */
static void steady_currents_and_torque_follow_the_dq_equations(void **state)
{
	(void)state;
	static const double CASES[][4] = {/* id, iq, rad/s, Lq */
	                                  {0, 4, 100, 3.1e-3},
	                                  {-2, 3, 200, 3.1e-3},
	                                  {-2, -3, -150, 6e-3},
	                                  {1, 2, 0, 6e-3}};
	for (size_t i = 0; i < 4; i++) {
		double id = CASES[i][0], iq = CASES[i][1], we = 4 * CASES[i][2], lq = CASES[i][3];
		struct plant plant = plant_of(4, 0.085, 3.1e-3, lq, 0.9, 310);
		plant.speed_rad_s = CASES[i][2];
		hold_dq(&plant, 0.9 * id - we * lq * iq, 0.9 * iq + we * (3.1e-3 * id + 0.085), 0.12);
		assert_near(plant.current_d_a, id, 1e-4, "A");
		assert_near(plant.current_q_a, iq, 1e-4, "A");
		double torque = 1.5 * 4 * (0.085 + (3.1e-3 - lq) * id) * iq;
		assert_near(plant.torque_nm, torque, 1e-3, "Nm");
	}
}

/*
 * p = 4, psi = 0.1 Wb, Ld = 1 mH, Lq = 3 mH, 50 A at 120 deg, 300 V: torque 38.971143 Nm; base
 * speed 1154.700538 rad/s electrical, where the linear limit 300 V/sqrt(3) just holds this
 * current. Computed independently with SciPy.
 */
static void at_base_speed_the_linear_limit_just_holds_the_current(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.1, 1e-3, 3e-3, 1e-12, 300);
	double we = 1154.700538;
	plant.speed_rad_s = we / 4;
	plant.current_d_a = -25;
	plant.current_q_a = 43.301270;
	double ud = -we * 3e-3 * 43.301270, uq = we * (1e-3 * -25 + 0.1);
	assert_near(hypot(ud, uq), 173.205081, 1e-5, "V");
	hold_dq(&plant, ud, uq, 0.01);
	assert_near(plant.current_d_a, -25, 1e-3, "A");
	assert_near(plant.current_q_a, 43.301270, 1e-3, "A");
	assert_near(plant.torque_nm, 38.971143, 1e-3, "Nm");
}

/* First-order rise of the current at standstill: L di/dt + R i = u. */
static void at_standstill_a_current_rises_with_l_over_r(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 3.1e-3, 0.9, 310);
	double angle = plant.pole_pairs * plant.angle_rad;
	plant.duty_alpha = 9 * cos(angle) / 310;
	plant.duty_beta = 9 * sin(angle) / 310;
	for (int i = 0; i < 34; i++)
		plant_step(&plant, 1e-4, 1);
	double expected = 10 * -expm1(-34e-4 * 0.9 / 3.1e-3);
	assert_near(plant.current_d_a, expected, 1e-6, "A");
	assert_near(plant.current_q_a, 0, 1e-9, "A");
}

static double end_current(int parts)
{
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 4.5e-3, 0.9, 310);
	plant.inertia_kgm2 = 0.0011;
	plant.capacitance_f = 470e-6;
	plant.speed_rad_s = 300;
	for (int i = 0; i < 40; i++) {
		double angle = 4 * 300 * 1e-4 * (i + 1.5) + 1.7;
		plant.duty_alpha = 0.42 * cos(angle);
		plant.duty_beta = 0.42 * sin(angle);
		plant_step(&plant, 1e-4, parts);
	}
	return plant.current_q_a;
}

/*
 * A salient machine on a soft DC link: stator coordinates and phase quantities, integrated with
 * SciPy's DOP853 to 1e-12 (tests/outside/model_plant.py prints this line).
 */
static void machine_link_and_shaft_agree_with_an_independent_integration(void **state)
{
	(void)state;
	for (int parts = 1; parts <= 4; parts *= 4) {
		struct plant plant = plant_of(4, 0.085, 3.1e-3, 4.5e-3, 0.9, 310);
		plant.inertia_kgm2 = 0.0011;
		plant.viscous_nms = 0.0005;
		plant.coulomb_nm = 0.05;
		plant.capacitance_f = 470e-6;
		plant.source_resistance_ohm = 0.8;
		plant.bleeder_ohm = 1e4;
		plant.angle_rad = 0.3;
		plant.speed_rad_s = 50;
		plant_start(&plant);
		for (int k = 0; k < 60; k++) {
			plant.duty_alpha = 0.22 * cos(4 * 50 * 1e-4 * k + 3);
			plant.duty_beta = 0.22 * sin(4 * 50 * 1e-4 * k + 3);
			plant_step(&plant, 1e-4, parts);
		}
		double share = parts == 1 ? 1 : 1.0 / 128; /* fourth order: 1/256 in theory */
		assert_near(plant.phase_a[0], -34.088830873, 3e-6 * share, "A");
		assert_near(plant.phase_a[1], 4.423798325, 3e-6 * share, "A");
		assert_near(plant.phase_a[2], 29.665032547, 3e-6 * share, "A");
		assert_near(plant.speed_rad_s, 95.784287165, 1e-6 * share, "rad/s");
		assert_near(plant.angle_rad, 0.721637015, 1e-8, "rad");
		assert_near(plant.dc_v, 302.30647188, 5e-5 * share, "V");
	}
}

/* The method is of fourth order: half the step, a sixteenth of the error. */
static void halving_the_integration_step_cuts_the_error(void **state)
{
	(void)state;
	double exact = end_current(64);
	double coarse = fabs(end_current(1) - exact), fine = fabs(end_current(2) - exact);
	assert_true(coarse < 0.01);
	assert_true(coarse > 1e-9);
	assert_true(fine < coarse / 8);
}

/* With pulses off the diodes feed the windings' energy into the DC link, and nothing flows then. */
static void pulses_off_takes_the_current_off_within_a_millisecond(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 3.1e-3, 0.9, 310);
	plant.speed_rad_s = 157;
	plant.current_q_a = 7;
	plant.capacitance_f = 470e-6;
	plant.blocked = false;
	plant.pulses_on = false;
	double before = plant.dc_v;
	for (int i = 0; i < 10; i++)
		plant_step(&plant, 1e-4, 1);
	assert_true(plant.blocked);
	assert_near(plant.current_q_a, 0, 0, "A");
	assert_near(plant.torque_nm, 0, 0, "Nm");
	assert_true(plant.dc_v > before + 0.1);
}

static void above_the_dc_voltage_the_diodes_rectify_the_back_emf(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 3.1e-3, 0.9, 310);
	plant.supply_v = 0;
	plant.speed_rad_s = 800; /* 272 V of amplitude against 2/pi of 310 V */
	plant.pulses_on = false;
	for (int i = 0; i < 200; i++)
		plant_step(&plant, 1e-4, 1);
	assert_false(plant.blocked);
	assert_true(plant.torque_nm < -0.5);
}

/* From rest over load, regeneration and reversal: what goes in is lost, delivered or stored. */
static void energy_is_conserved_over_a_cycle(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	double stored = plant_stored(&model->plant);
	static const double SPEEDS[] = {2000, -1500, 800, 3000, 100};
	double turned_over = 0;
	for (size_t i = 0; i < 5; i++) {
		bench_drive(model, SPEEDS[i], i % 2 ? -1.2 : 1.2);
		const struct plant_energies *e = &model->plant.energies;
		double spent = e->copper + e->friction + e->load + e->resistors;
		double gained = plant_stored(&model->plant) - stored;
		turned_over = e->supply;
		assert_near(spent + gained, e->supply, 1e-3 * e->supply, "J");
	}
	assert_true(turned_over > 300);
	model_release(model);
}

static void braking_raises_the_dc_link_until_the_chopper_holds_it(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	bench_drive(model, 3000, 0);
	bench_write(model, "controller.speed_command", -3000 * RPM);
	double most = 0;
	for (int i = 0; i < 100; i++) {
		bench_run(model, 1);
		most = fmax(most, bench_read(model, "controller.dc_voltage"));
	}
	assert_true(most > 1.18 * 310 && most < 1.25 * 310);
	assert_near(bench_read(model, "controller.fault_code"), 0, 0, "");
	model_release(model);
}

/* Two masses on a spring: f = sqrt(k (1/J1 + 1/J2)) / 2 pi, and the twist under a steady torque. */
static void a_shaft_with_stiffness_swings_at_its_natural_frequency(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 3.1e-3, 0.9, 310);
	plant.inertia_kgm2 = 0.0011;
	plant.load_inertia_kgm2 = 0.0009;
	plant.stiffness_nm_rad = 200;
	plant.pulses_on = false;
	plant.twist_rad = 0.01;
	double energy = plant_stored(&plant), last = plant.twist_rad, first_s = 0, last_s = 0;
	int crossings = 0;
	for (int i = 1; i <= 10000; i++) {
		plant_step(&plant, 1e-5, 1);
		if (last < 0 && plant.twist_rad >= 0) {
			last_s = (i - plant.twist_rad / (plant.twist_rad - last)) * 1e-5;
			if (crossings++ == 0)
				first_s = last_s;
		}
		last = plant.twist_rad;
	}
	double expected = sqrt(200 * (1 / 0.0002 + 1 / 0.0009)) / 6.28318530717958647692;
	assert_near((crossings - 1) / (last_s - first_s), expected, 1e-3, "Hz");
	assert_near(plant_stored(&plant), energy, 1e-8 * energy, "J"); /* no damping, no friction */
	assert_near(plant.shaft_torque_nm, 200 * plant.twist_rad, 1e-12, "Nm");
}

static void an_open_phase_carries_no_current_and_the_others_are_opposite(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 4.5e-3, 0.9, 310);
	plant.speed_rad_s = 30;
	hold_dq(&plant, 2, 14, 0.02);
	assert_true(fabs(plant.phase_a[0]) > 0.1);
	plant.open_phase = 1;
	hold_dq(&plant, 2, 14, 0.005);
	assert_near(plant.phase_a[0], 0, 1e-3, "A");
	assert_true(fabs(plant.phase_a[1]) > 0.1);
	assert_near(plant.phase_a[1] + plant.phase_a[2], 0, 1e-3, "A");
}

/* One thermal body: after a time equal to R C the rise is 1 - 1/e of P R. */
static void the_winding_warms_with_its_thermal_time_constant(void **state)
{
	(void)state;
	struct plant plant = plant_of(4, 0.085, 3.1e-3, 3.1e-3, 0.9, 310);
	plant.thermal_resistance_kw = 2;
	plant.thermal_capacitance_jk = 5;
	for (int i = 0; i < 10000; i++)
		plant_heat(&plant, 1e-3, 30e-3);
	assert_near(plant.winding_c, 20 + 60 * -expm1(-1), 0.01, "degC");
	/* Copper at 20 degC: 0.393 % per kelvin, common practice. */
	assert_near(plant.resistance_ohm, 0.9 * (1 + 0.00393 * (plant.winding_c - 20)), 1e-12, "ohm");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(steady_currents_and_torque_follow_the_dq_equations),
	    cmocka_unit_test(at_base_speed_the_linear_limit_just_holds_the_current),
	    cmocka_unit_test(at_standstill_a_current_rises_with_l_over_r),
	    cmocka_unit_test(machine_link_and_shaft_agree_with_an_independent_integration),
	    cmocka_unit_test(halving_the_integration_step_cuts_the_error),
	    cmocka_unit_test(pulses_off_takes_the_current_off_within_a_millisecond),
	    cmocka_unit_test(above_the_dc_voltage_the_diodes_rectify_the_back_emf),
	    cmocka_unit_test(energy_is_conserved_over_a_cycle),
	    cmocka_unit_test(braking_raises_the_dc_link_until_the_chopper_holds_it),
	    cmocka_unit_test(a_shaft_with_stiffness_swings_at_its_natural_frequency),
	    cmocka_unit_test(an_open_phase_carries_no_current_and_the_others_are_opposite),
	    cmocka_unit_test(the_winding_warms_with_its_thermal_time_constant),
	};
	return RUN_GROUP(tests);
}
