/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Faults of the modelled drive: cause, code, torque off, latched, reset by an
 * edge after the cause is gone, a new enable; and the defects in each link of
 * that chain.
 */
#include "bench.h"

static const struct cause {
	const char *relay;
	int code;
	double most_ms; /* from the relay's command to the code: relay, filter, image */
	const char *missed;
} CAUSES[] = {
    {"fault_box.current_surge", 1, 14, "overcurrent-missed"},
    {"fault_box.supply_surge", 2, 15, "overvoltage-missed"},
    {"fault_box.encoder_open", 3, 14, "encoder-loss-missed"},
    {"fault_box.hot_sensor", 4, 34, "overtemperature-missed"},
    {"fault_box.supply_sag", 5, 160, "undervoltage-missed"},
    {"fault_box.phase_open", 6, 75, "phase-loss-missed"},
};
enum { CAUSE_COUNT = sizeof CAUSES / sizeof CAUSES[0] };
/* Of an open phase nothing is seen once the pulses are off: it is the last row. */
enum { SEEN_AT_REST = CAUSE_COUNT - 1 };

static int code(struct model *model)
{
	return (int)bench_read(model, "controller.fault_code");
}

static bool running(struct model *model)
{
	return bench_read(model, "controller.running") != 0;
}

static void control(struct model *model, int word)
{
	bench_write(model, "controller.control", word);
	bench_run(model, 5);
}

/* ms until the code appears, up to `most`; NaN: it did not. */
static double detect(struct model *model, const char *relay, double most)
{
	bench_write(model, relay, 1);
	for (int i = 1; i <= most; i++) {
		bench_run(model, 1);
		if (code(model) != 0)
			return i;
	}
	return (double)NAN;
}

static bool trips(struct model *model, const char *relay, double most)
{
	return !isnan(detect(model, relay, most));
}

static struct model *tripped(const char *defect, const struct cause *cause, double rpm)
{
	struct model *model = bench_new(defect);
	bench_drive(model, rpm, 1);
	assert_true(trips(model, cause->relay, 300));
	return model;
}

static void every_cause_trips_with_its_code_and_takes_the_torque_off(void **state)
{
	(void)state;
	static const double SPEEDS[] = {0, 600, 3000, -1500};
	for (int i = 0; i < CAUSE_COUNT; i++)
		for (size_t k = 0; k < 4; k++) {
			/* Where the motor takes no power, nothing draws the DC link down. */
			if (SPEEDS[k] <= 0 && CAUSES[i].code == 5)
				continue;
			struct model *model = bench_new(NULL);
			bench_drive(model, SPEEDS[k], 1);
			double before = bench_read(model, "shaft.torque");
			assert_true(before > 0.8);
			double ms = detect(model, CAUSES[i].relay, 200);
			assert_int_equal(code(model), CAUSES[i].code);
			assert_true(ms <= CAUSES[i].most_ms);
			assert_false(running(model));
			bench_run(model, 4);
			assert_near(model->plant.current_q_a, 0, 0, "A");
			assert_near(bench_read(model, "shaft.torque"), 0, 0.25, "Nm");
			model_release(model);
		}
}

static void a_fault_stays_until_an_edge_resets_it_after_its_cause(void **state)
{
	(void)state;
	for (int i = 0; i < SEEN_AT_REST; i++) {
		struct model *model = tripped(NULL, &CAUSES[i], 600);
		control(model, 0);
		control(model, 2); /* the cause lasts */
		assert_int_equal(code(model), CAUSES[i].code);
		bench_write(model, CAUSES[i].relay, 0);
		bench_run(model, 500);
		assert_int_equal(code(model), CAUSES[i].code); /* latched; the edge came too early */
		control(model, 1);
		assert_false(running(model));
		control(model, 0);
		control(model, 2);
		assert_int_equal(code(model), 0);
		assert_false(running(model));
		control(model, 0);
		control(model, 1);
		assert_true(running(model));
		bench_run(model, 400);
		assert_near(bench_read(model, "shaft.speed") / RPM, 600, 2, "rpm");
		model_release(model);
	}
}

static void after_a_reset_enable_must_be_given_anew(void **state)
{
	(void)state;
	struct model *model = tripped(NULL, &CAUSES[3], 600);
	bench_write(model, CAUSES[3].relay, 0);
	bench_run(model, 100);
	control(model, 3); /* reset while enable stands */
	assert_int_equal(code(model), 0);
	bench_run(model, 200);
	assert_false(running(model));
	assert_near(bench_read(model, "controller.ready"), 0, 0, "");
	control(model, 0);
	assert_near(bench_read(model, "controller.ready"), 1, 0, "");
	control(model, 1);
	assert_true(running(model));
	model_release(model);
}

static void enable_and_reset_count_by_edges_even_between_two_control_periods(void **state)
{
	(void)state;
	struct model *model = tripped(NULL, &CAUSES[3], 0);
	bench_write(model, CAUSES[3].relay, 0);
	bench_run(model, 100);
	bench_write(model, "controller.control", 0);
	bench_write(model, "controller.control", 2);
	bench_write(model, "controller.control", 0);
	bench_run(model, 2);
	assert_int_equal(code(model), 0);
	bench_write(model, "controller.control", 1);
	bench_write(model, "controller.control", 0);
	bench_run(model, 2);
	assert_false(running(model));
	model_release(model);
}

/* The controller's watchdog, with the load machine's own beside it. */
static void silence_trips_both_watchdogs_at_their_time(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	bench_write(model, "controller.watchdog_time", 0.2);
	bench_write(model, "load.watchdog_time", 0.3);
	bench_run(model, 1000);
	assert_int_equal(code(model), 0); /* not enabled */
	bench_write(model, "controller.control", 1);
	bench_write(model, "load.control", 1);
	bench_write(model, "load.torque_command", 1);
	for (int i = 0; i < 10; i++) {
		bench_run(model, 150);
		model_heard(model, MODEL_CONTROLLER);
		model_heard(model, MODEL_LOAD);
	}
	bench_run(model, 199);
	assert_int_equal(code(model), 0);
	bench_run(model, 2);
	assert_int_equal(code(model), 9);
	assert_false(running(model));
	bench_run(model, 98);
	assert_near(bench_read(model, "load.fault_code"), 0, 0, "");
	bench_run(model, 2);
	assert_near(bench_read(model, "load.fault_code"), 9, 0, "");
	bench_run(model, 30);
	assert_near(bench_read(model, "load.torque"), 0, 0.001, "Nm");
	/* Communication returns: still faulty, until reset. */
	model_heard(model, MODEL_CONTROLLER);
	bench_run(model, 100);
	assert_int_equal(code(model), 9);
	model_heard(model, MODEL_LOAD);
	control(model, 0);
	control(model, 2);
	bench_write(model, "load.control", 2);
	bench_run(model, 2);
	assert_int_equal(code(model), 0);
	assert_near(bench_read(model, "load.fault_code"), 0, 0, "");
	bench_run(model, 20);
	assert_near(bench_read(model, "load.torque"), 0, 0.001, "Nm"); /* enable must be given anew */
	model_release(model);
}

static void the_watchdog_defects_say_what_they_do(void **state)
{
	(void)state;
	static const struct {
		const char *defect;
		int code_250, code_900;
	} ROWS[] = {{NULL, 9, 9}, {"watchdog-missing", 0, 0}, {"watchdog-late", 0, 9}};
	for (size_t i = 0; i < 3; i++) {
		struct model *model = bench_new(ROWS[i].defect);
		bench_write(model, "controller.watchdog_time", 0.2);
		control(model, 1);
		bench_run(model, 245);
		assert_int_equal(code(model), ROWS[i].code_250);
		bench_run(model, 650);
		assert_int_equal(code(model), ROWS[i].code_900);
		model_release(model);
	}
	struct model *model = bench_new("watchdog-reenables");
	bench_write(model, "controller.watchdog_time", 0.2);
	control(model, 1);
	bench_run(model, 300);
	assert_int_equal(code(model), 9);
	for (int i = 0; i < 8; i++) {
		model_heard(model, MODEL_CONTROLLER);
		bench_run(model, 50);
	}
	assert_true(running(model));
	assert_int_equal(code(model), 0);
	model_release(model);
}

static void a_missed_fault_goes_on_running(void **state)
{
	(void)state;
	for (int i = 0; i < CAUSE_COUNT; i++) {
		struct model *model = bench_new(CAUSES[i].missed);
		bench_drive(model, 600, 1);
		assert_false(trips(model, CAUSES[i].relay, 300));
		assert_true(running(model));
		model_release(model);
		model = bench_new(CAUSES[i].missed); /* and the others are seen */
		bench_drive(model, 600, 1);
		assert_true(trips(model, CAUSES[(i + 1) % CAUSE_COUNT].relay, 300));
		model_release(model);
	}
}

static void wrong_and_late_faults(void **state)
{
	(void)state;
	static const int WRONG[] = {2, 1, 4, 3, 5, 6}; /* the first four have each other's */
	for (int i = 0; i < CAUSE_COUNT; i++) {
		struct model *model = tripped("wrong-fault-code", &CAUSES[i], 600);
		assert_int_equal(code(model), WRONG[i]);
		model_release(model);
		model = bench_new("fault-late");
		bench_drive(model, 600, 1);
		double ms = detect(model, CAUSES[i].relay, 400);
		assert_true(ms >= 150 && ms < 150 + CAUSES[i].most_ms + 6);
		assert_int_equal(code(model), CAUSES[i].code);
		model_release(model);
	}
}

static void slow_torque_off_shows_the_code_but_keeps_the_torque(void **state)
{
	(void)state;
	struct model *model = tripped("torque-off-slow", &CAUSES[3], 1500);
	assert_int_equal(code(model), 4);
	assert_false(running(model));
	bench_run(model, 200);
	assert_true(bench_read(model, "shaft.torque") > 0.5);
	bench_run(model, 500);
	assert_near(model->plant.current_q_a, 0, 0, "A");
	model_release(model);
}

static void latching_and_reset_defects_say_what_they_do(void **state)
{
	(void)state;
	for (int i = 0; i < SEEN_AT_REST; i++) {
		struct model *model = tripped("fault-not-latched", &CAUSES[i], 600);
		bench_write(model, CAUSES[i].relay, 0);
		bench_run(model, 200);
		assert_int_equal(code(model), 0);
		assert_false(running(model));
		model_release(model);

		model = tripped("restarts-by-itself", &CAUSES[i], 600);
		bench_run(model, 200);
		assert_int_equal(code(model), CAUSES[i].code);
		bench_write(model, CAUSES[i].relay, 0);
		bench_run(model, 300);
		assert_true(running(model));
		model_release(model);

		model = tripped("reset-while-cause", &CAUSES[i], 600);
		control(model, 0);
		control(model, 2);
		assert_int_equal(code(model), 0);
		control(model, 1);
		assert_true(running(model));
		model_release(model);

		model = tripped("restarts-on-reset", &CAUSES[i], 600);
		bench_write(model, CAUSES[i].relay, 0);
		bench_run(model, 200);
		assert_int_equal(code(model), CAUSES[i].code);
		control(model, 3);
		assert_true(running(model));
		model_release(model);
	}
}

static void a_standing_reset_bit_resets_only_with_its_defect(void **state)
{
	(void)state;
	for (int wrong = 0; wrong < 2; wrong++) {
		struct model *model = bench_new(wrong ? "reset-without-edge" : NULL);
		bench_drive(model, 600, 1);
		control(model, 3); /* the bit stands before the fault */
		assert_true(running(model));
		assert_true(trips(model, CAUSES[3].relay, 60));
		bench_run(model, 50);
		assert_int_equal(code(model), 4); /* while the cause lasts */
		bench_write(model, CAUSES[3].relay, 0);
		bench_run(model, 100);
		assert_int_equal(code(model), wrong ? 0 : 4);
		model_release(model);
	}
}

/* Torque off on either channel is no fault; channels that differ for long are one. */
static void safe_torque_off_takes_the_pulses_off_and_inhibits(void **state)
{
	(void)state;
	for (int first = 0; first < 2; first++) {
		struct model *model = bench_new(NULL);
		bench_drive(model, 1500, 1);
		bench_write(model, first ? "fault_box.sto_b" : "fault_box.sto_a", 1);
		bench_run(model, 14);
		assert_false(running(model));
		assert_near(model->plant.current_q_a, 0, 0, "A");
		assert_int_equal(code(model), 0);
		bench_write(model, first ? "fault_box.sto_a" : "fault_box.sto_b", 1);
		bench_run(model, 500);
		assert_int_equal(code(model), 0);
		assert_near(bench_read(model, "controller.torque_off_inputs"), 3, 0, "");
		bench_write(model, "fault_box.sto_a", 0);
		bench_write(model, "fault_box.sto_b", 0);
		bench_run(model, 50);
		assert_false(running(model)); /* enable still stands, and does not count */
		control(model, 0);
		control(model, 1);
		assert_true(running(model));
		model_release(model);
	}
}

static void channels_of_safe_torque_off_that_differ_are_a_fault(void **state)
{
	(void)state;
	for (int wrong = 0; wrong < 2; wrong++) {
		struct model *model = bench_new(wrong ? "torque-off-channel-ignored" : NULL);
		bench_drive(model, 600, 1);
		bench_write(model, "fault_box.sto_b", 1);
		bench_run(model, 50);
		assert_int_equal(running(model), wrong);
		bench_run(model, 80);
		assert_int_equal(code(model), wrong ? 0 : 7);
		model_release(model);
	}
}

/* The load machine brakes to rest and lets go; it never drives the shaft away. */
static void the_load_never_drives_the_shaft_away_after_a_trip(void **state)
{
	(void)state;
	static const double CASES[][2] = {{1500, 2.4}, {1500, -2.4}, {-3000, 2.4}, {0, 2.4}};
	for (size_t i = 0; i < 4; i++) {
		struct model *model = bench_new(NULL);
		bench_drive(model, CASES[i][0], CASES[i][1]);
		double fastest = 0;
		(void)detect(model, "fault_box.hot_sensor", 60);
		for (int k = 0; k < 5000; k++) {
			bench_run(model, 1);
			fastest = fmax(fastest, fabs(model->plant.speed_rad_s) / RPM);
		}
		assert_true(fastest < fabs(CASES[i][0]) + 60);
		assert_near(bench_read(model, "shaft.speed") / RPM, 0, 1, "rpm");
		model_release(model);
	}
}

static void a_load_that_outruns_the_drive_folds_back_below_overspeed(void **state)
{
	(void)state;
	struct model *model = bench_new("encoder-loss-missed");
	bench_drive(model, -1500, 3.5);
	bench_write(model, "fault_box.encoder_open", 1);
	double fastest = 0;
	for (int k = 0; k < 3000; k++) {
		bench_run(model, 1);
		fastest = fmax(fastest, fabs(model->plant.speed_rad_s) / RPM);
	}
	assert_true(fastest < 3600);
	model_release(model);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_cause_trips_with_its_code_and_takes_the_torque_off),
	    cmocka_unit_test(a_fault_stays_until_an_edge_resets_it_after_its_cause),
	    cmocka_unit_test(after_a_reset_enable_must_be_given_anew),
	    cmocka_unit_test(enable_and_reset_count_by_edges_even_between_two_control_periods),
	    cmocka_unit_test(silence_trips_both_watchdogs_at_their_time),
	    cmocka_unit_test(the_watchdog_defects_say_what_they_do),
	    cmocka_unit_test(a_missed_fault_goes_on_running),
	    cmocka_unit_test(wrong_and_late_faults),
	    cmocka_unit_test(slow_torque_off_shows_the_code_but_keeps_the_torque),
	    cmocka_unit_test(latching_and_reset_defects_say_what_they_do),
	    cmocka_unit_test(a_standing_reset_bit_resets_only_with_its_defect),
	    cmocka_unit_test(safe_torque_off_takes_the_pulses_off_and_inhibits),
	    cmocka_unit_test(channels_of_safe_torque_off_that_differ_are_a_fault),
	    cmocka_unit_test(the_load_never_drives_the_shaft_away_after_a_trip),
	    cmocka_unit_test(a_load_that_outruns_the_drive_folds_back_below_overspeed),
	};
	return RUN_GROUP(tests);
}
