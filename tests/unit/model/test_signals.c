/* SPDX-License-Identifier: Apache-2.0 */
/* The model as its callers see it: signals, writes, images, life, seeds, parameters. */
#include "bench.h"

static void signals_have_unique_names_and_sound_rows(void **state)
{
	(void)state;
	size_t count;
	const struct model_signal *signals = model_signals(&count);
	assert_true(count >= 40);
	for (size_t i = 0; i < count; i++) {
		assert_int_equal(model_signal_find(signals[i].name, strlen(signals[i].name)), (int)i);
		assert_true(signals[i].text[0] != '\0');
		assert_true(signals[i].device < MODEL_DEVICES);
		if (signals[i].writable)
			assert_true(signals[i].least < signals[i].most);
	}
	assert_int_equal(model_signal_find("controller.spee", 15), -1);
	assert_int_equal(model_signal_find("", 0), -1);
}

static void every_signal_reads_as_a_number_or_a_text(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	size_t count;
	const struct model_signal *signals = model_signals(&count);
	for (size_t i = 0; i < count; i++) {
		double value = model_read(model, (int)i);
		if (signals[i].dimension)
			assert_true(isfinite(value));
		else
			assert_true(isnan(value) && model_read_text(model, (int)i)[0] != '\0');
	}
	assert_string_equal(model_read_text(model, bench_signal("controller.firmware")), "2.4.1");
	assert_string_equal(model_read_text(model, bench_signal("controller.speed")), "");
	assert_true(isnan(model_read(model, -1)));
	assert_true(isnan(model_read(model, (int)count)));
	model_release(model);
}

static void writes_beyond_the_range_are_refused_and_change_nothing(void **state)
{
	(void)state;
	static const struct {
		const char *signal;
		double value;
		enum model_answer answer;
	} ROWS[] = {
	    {"controller.speed_command", 3300 * RPM, MODEL_ACCEPTED},
	    {"controller.speed_command", -3300 * RPM, MODEL_ACCEPTED},
	    {"controller.speed_command", 3301 * RPM, MODEL_BAD_VALUE},
	    {"controller.speed_command", (double)NAN, MODEL_BAD_VALUE},
	    {"controller.control", 3, MODEL_ACCEPTED},
	    {"controller.control", 4, MODEL_BAD_VALUE},
	    {"controller.control", -1, MODEL_BAD_VALUE},
	    {"controller.control", 0.5, MODEL_BAD_VALUE},
	    {"controller.watchdog_time", 1, MODEL_ACCEPTED},
	    {"controller.watchdog_time", 11, MODEL_BAD_VALUE},
	    {"load.torque_command", 3.6, MODEL_ACCEPTED},
	    {"load.torque_command", -3.7, MODEL_BAD_VALUE},
	    {"fault_box.hot_sensor", 2, MODEL_BAD_VALUE},
	    {"controller.speed", 1, MODEL_BAD_ADDRESS},
	    {"controller.firmware", 1, MODEL_BAD_ADDRESS},
	};
	struct model *model = bench_new(NULL);
	for (size_t i = 0; i < sizeof ROWS / sizeof ROWS[0]; i++) {
		int signal = bench_signal(ROWS[i].signal);
		double before = model_read(model, signal);
		assert_int_equal(model_write_check(model, signal, ROWS[i].value), ROWS[i].answer);
		assert_int_equal(model_write(model, signal, ROWS[i].value), ROWS[i].answer);
		if (ROWS[i].answer != MODEL_ACCEPTED && !isnan(before))
			assert_near(model_read(model, signal), before, 0, "");
		if (ROWS[i].answer == MODEL_ACCEPTED)
			assert_near(model_read(model, signal), ROWS[i].value, 1e-9, "");
	}
	assert_int_equal(model_write(model, -1, 0), MODEL_BAD_ADDRESS);
	model_release(model);
}

static void the_refusal_defects_say_what_they_do(void **state)
{
	(void)state;
	struct model *model = bench_new("out-of-range-accepted");
	bench_write(model, "controller.speed_command", 4000 * RPM);
	assert_near(bench_read(model, "controller.speed_command"), 4000 * RPM, 1e-9, "rad/s");
	model_release(model);
	model = bench_new("clips-silently");
	bench_write(model, "controller.speed_command", -4000 * RPM);
	assert_near(bench_read(model, "controller.speed_command"), -3300 * RPM, 1e-6, "rad/s");
	model_release(model);
}

static void life_counts_milliseconds_and_images_hold_between(void **state)
{
	(void)state;
	struct model_config config;
	model_config_init(&config);
	config.refresh_s = 5e-3;
	struct model *model = bench_of(&config);
	bench_drive(model, 0, 0);
	bench_write(model, "controller.speed_command", 1500 * RPM);
	bench_run(model, 20);
	double life = bench_read(model, "controller.life"),
	       speed = bench_read(model, "controller.speed");
	double load_life = bench_read(model, "load.life");
	bench_run(model, 4.9);
	assert_near(bench_read(model, "controller.life"), life, 0, "");
	assert_near(bench_read(model, "controller.speed"), speed, 0, "");
	assert_near(bench_read(model, "load.life"), load_life + 4, 0, "");
	bench_run(model, 0.1);
	assert_near(bench_read(model, "controller.life"), life + 5, 0, "");
	assert_true(bench_read(model, "controller.speed") > speed);
	bench_run(model, 65536);
	assert_near(bench_read(model, "controller.life"), life + 5, 1, ""); /* modulo 65536 */
	model_release(model);
}

static void frozen_and_stale_images(void **state)
{
	(void)state;
	struct model *model = bench_new("frozen-image");
	bench_drive(model, 1000, 0); /* 600 ms: it stands since 500 */
	double life = bench_read(model, "controller.life"),
	       speed = bench_read(model, "controller.speed");
	bench_write(model, "controller.speed_command", 0);
	bench_run(model, 300);
	assert_near(bench_read(model, "controller.life"), life, 0, "");
	assert_near(bench_read(model, "controller.speed"), speed, 0, "rad/s");
	assert_near(bench_read(model, "shaft.speed") / RPM, 0, 2, "rpm");
	model_release(model);

	model = bench_new("stale-image");
	bench_drive(model, 0, 0);
	bench_write(model, "controller.speed_command", 1000 * RPM);
	life = bench_read(model, "controller.life");
	bench_run(model, 80);
	assert_near(bench_read(model, "controller.life"), life + 80, 0, "");
	assert_near(bench_read(model, "controller.speed"), 0, 0.5, "rad/s");
	assert_near(bench_read(model, "shaft.speed") / RPM, 1000, 20, "rpm");
	bench_run(model, 90);
	assert_near(bench_read(model, "controller.speed") / RPM, 1000, 20, "rpm");
	model_release(model);
}

static uint64_t fingerprint(uint64_t seed, int reads)
{
	struct model_config config;
	model_config_init(&config);
	config.seed = seed;
	struct model *model = bench_of(&config);
	bench_write(model, "controller.control", 1);
	bench_write(model, "controller.speed_command", 100);
	bench_write(model, "fault_box.hot_sensor", 1);
	size_t count;
	(void)model_signals(&count);
	uint64_t hash = 1;
	for (int i = 0; i < 100; i++) {
		bench_run(model, 3.3);
		for (int k = 0; k < reads; k++)
			for (size_t s = 0; s < count; s++)
				(void)model_read(model, (int)s);
		for (size_t s = 0; s < count; s++) {
			double value = model_read(model, (int)s);
			uint64_t bits;
			memcpy(&bits, &value, sizeof bits);
			hash = (hash ^ bits) * UINT64_C(0x100000001B3);
		}
	}
	model_release(model);
	return hash;
}

static void the_same_seed_gives_the_same_bits_however_often_it_is_read(void **state)
{
	(void)state;
	assert_true(fingerprint(7, 0) == fingerprint(7, 0));
	assert_true(fingerprint(7, 0) == fingerprint(7, 3));
	assert_true(fingerprint(7, 0) != fingerprint(8, 0));
}

static void relays_take_their_drawn_delay(void **state)
{
	(void)state;
	double least = 1e9, most = 0;
	for (uint64_t seed = 1; seed <= 40; seed++) {
		struct model_config config;
		model_config_init(&config);
		config.seed = seed;
		struct model *model = bench_of(&config);
		bench_run(model, 10);
		bench_write(model, "fault_box.supply_surge", 1);
		assert_near(bench_read(model, "fault_box.supply_surge"), 1, 0, ""); /* as written */
		double ms = 0;
		while (!model->fault_box.relays[RELAY_SUPPLY_SURGE].closed && ms < 20) {
			bench_run(model, 0.1);
			ms += 0.1;
		}
		least = fmin(least, ms);
		most = fmax(most, ms);
		model_release(model);
	}
	assert_true(least < 2 && most > 10 && most <= 12.2);
}

static void analyser_angle_and_counts_agree_and_stay_in_their_range(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	bench_drive(model, 900, 0);
	for (int i = 0; i < 300; i++) {
		bench_run(model, 1);
		double angle = bench_read(model, "analyser.rotor_angle");
		assert_true(angle >= 0 && angle < 360 * DEG);
		double counts = bench_read(model, "controller.rotor_counts");
		assert_true(counts >= 0 && counts < 4096);
		double by_counts = 4 * (counts + 0.5) / 4096 * 360 * DEG;
		assert_near(remainder(by_counts - angle, 360 * DEG) / DEG, 0, 0.5, "deg");
	}
	model_release(model);
}

static void defects_are_a_sound_table(void **state)
{
	(void)state;
	size_t count;
	const struct model_defect *defects = model_defects(&count);
	assert_true(count >= 36 && count <= 64);
	for (size_t i = 0; i < count; i++) {
		assert_int_equal(model_defect_find(defects[i].name), (int)i);
		assert_true(defects[i].text[0] && defects[i].caught_by[0]);
		assert_null(strpbrk(defects[i].text, "\t\n"));
	}
	assert_int_equal(model_defect_find("none-such"), -1);
	struct model *model = bench_new("wrong-exception");
	assert_true(model_has_defect(model, "wrong-exception"));
	assert_false(model_has_defect(model, "writes-neighbour"));
	assert_false(model_has_defect(model, "none-such"));
	model_release(model);
}

/* Whatever is wrong with the controller, the bench stays a bench: finite numbers, no overspeed. */
static void every_defect_runs_on_every_machine(void **state)
{
	(void)state;
	static const char *const RELAY_NAMES[] = {"fault_box.encoder_open", "fault_box.phase_open",
	                                          "fault_box.supply_surge"};
	size_t count, signals;
	(void)model_defects(&count);
	const struct model_signal *table = model_signals(&signals);
	for (size_t defect = 0; defect < count; defect++)
		for (int machine = 0; machine < 3; machine++) {
			struct model_config config;
			model_config_init(&config);
			config.defects = UINT64_C(1) << defect;
			config.seed = defect;
			config.inductance_q_h *= machine == 1 ? 2.5 : 1;
			config.commutation = machine == 2 ? MODEL_BLOCK : MODEL_SINUSOIDAL;
			struct model *model = bench_of(&config);
			bench_drive(model, 1500, 1.2);
			bench_drive(model, -1500, 1.2);
			size_t relay = (defect + (size_t)machine) % 3;
			bench_write(model, RELAY_NAMES[relay], 1);
			bench_run(model, 300);
			for (size_t i = 0; i < signals; i++)
				if (table[i].dimension)
					assert_true(isfinite(model_read(model, (int)i)));
			/* Commutated by Hall sensors, it runs away when nobody notices the lost encoder. */
			if (machine < 2 || relay > 0)
				assert_true(fabs(model->plant.speed_rad_s) < 1.2 * config.rated_speed_rad_s);
			model_release(model);
		}
}

static void parameters_that_make_no_sense_are_refused(void **state)
{
	(void)state;
	struct model_config good;
	model_config_init(&good);
	for (int i = 0; i < 8; i++) {
		struct model_config config = good;
		struct model *model = NULL;
		struct err err = {0};
		*(i == 0   ? &config.inertia_kgm2
		  : i == 1 ? &config.flux_linkage_wb
		  : i == 2 ? &config.control_period_s
		  : i == 3 ? &config.rated_speed_rad_s
		  : i == 4 ? &config.dc_voltage_v
		  : i == 5 ? &config.refresh_s
		  : i == 6 ? &config.load_inertia_kgm2
		           : &config.current_limit_a) = i < 6 ? (double)NAN : 1000;
		assert_int_equal(model_new(&config, &model, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
		assert_null(model);
	}
	struct model_config config = good;
	config.inductance_d_h = config.inductance_q_h = 5e-5; /* L/R = 56 us, step 100 us */
	struct model *model = NULL;
	struct err err = {0};
	assert_int_equal(model_new(&config, &model, &err), -1);
	assert_non_null(strstr(err.message, "integration_step"));
	model_release(NULL);
}

static void the_table_of_parameters_has_a_default_for_every_row(void **state)
{
	(void)state;
	const struct field_table *table = model_parameters();
	struct model_config config;
	model_config_init(&config);
	for (size_t i = 0; i < table->count; i++) {
		const struct field *field = &table->fields[i];
		assert_non_null(field->fallback);
		if (field->kind != FIELD_QUANTITY)
			continue;
		double value;
		memcpy(&value, (const char *)&config + field->offset, sizeof value);
		assert_true(value >= field->least && value <= field->most * (1 + 1e-9));
	}
	assert_near(config.inertia_kgm2, 0.0011, 1e-12, "kgm2");
	assert_near(config.control_period_s, 1e-4, 1e-15, "s");
}

static void time_moves_only_forward(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	model_advance(model, 123456789);
	assert_true(model_now(model) == 123456789);
	double life = bench_read(model, "shaft.life");
	model_advance(model, 1000);
	assert_true(model_now(model) == 123456789);
	assert_near(bench_read(model, "shaft.life"), life, 0, "");
	assert_near(life, 123, 0, "ms");
	model_release(model);
}

/* It is the angle of the counts, and goes on where they begin again. */
static void position_counts_whole_turns(void **state)
{
	(void)state;
	struct model *model = bench_new(NULL);
	bench_run(model, 10);
	bench_drive(model, 1500, 0);
	bench_run(model, 500);
	double begin = bench_read(model, "controller.rotor_position");
	bench_run(model, 1000);
	double end = bench_read(model, "controller.rotor_position");
	assert_near((end - begin) / (360 * DEG), 25, 0.05, "turns");
	double counted = bench_read(model, "controller.rotor_counts") * 360 * DEG / 4096;
	assert_near(remainder(end - counted, 360 * DEG), 0, 1e-9, "rad");
	bench_write(model, "controller.control", 0);
	bench_run(model, 1000);
	bench_write(model, "controller.control", 1);
	bench_run(model, 2);
	assert_near(bench_read(model, "controller.rotor_position"), 180 * DEG, 181 * DEG, "rad");
	model_release(model);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(position_counts_whole_turns),
	    cmocka_unit_test(signals_have_unique_names_and_sound_rows),
	    cmocka_unit_test(every_signal_reads_as_a_number_or_a_text),
	    cmocka_unit_test(writes_beyond_the_range_are_refused_and_change_nothing),
	    cmocka_unit_test(the_refusal_defects_say_what_they_do),
	    cmocka_unit_test(life_counts_milliseconds_and_images_hold_between),
	    cmocka_unit_test(frozen_and_stale_images),
	    cmocka_unit_test(the_same_seed_gives_the_same_bits_however_often_it_is_read),
	    cmocka_unit_test(relays_take_their_drawn_delay),
	    cmocka_unit_test(analyser_angle_and_counts_agree_and_stay_in_their_range),
	    cmocka_unit_test(defects_are_a_sound_table),
	    cmocka_unit_test(every_defect_runs_on_every_machine),
	    cmocka_unit_test(parameters_that_make_no_sense_are_refused),
	    cmocka_unit_test(the_table_of_parameters_has_a_default_for_every_row),
	    cmocka_unit_test(time_moves_only_forward),
	};
	return RUN_GROUP(tests);
}
