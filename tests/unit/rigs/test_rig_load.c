/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A rig that is right is loaded with the values that its file says. Rigs that
 * are wrong are in tests/golden/rig-*.
 */
#include "near.h"

#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "rig.h"
#include "rig_loader.h"

#define MODEL_RIG SOURCE_DIR "/rigs/model-spm.yaml"

static struct arena arena;
static struct faults faults;

static const struct rig *load(const char *path)
{
	const struct rig *rig = NULL;
	struct err err = {0};
	memset(&faults, 0, sizeof faults);
	arena_release(&arena);
	arena_init(&arena, 0);
	assert_int_equal(rig_load(path, &arena, &faults, &rig, &err), 0);
	if (faults_total(&faults) > 0) {
		struct text out;
		text_init(&out, 0);
		faults_print(&faults, &out);
		print_error("%s", text_string(&out));
		text_release(&out);
	}
	return rig;
}

static int release(void **state)
{
	(void)state;
	arena_release(&arena);
	return 0;
}

static const struct rig *model_rig(void)
{
	const struct rig *rig = load(MODEL_RIG);
	assert_int_equal(faults_total(&faults), 0);
	assert_non_null(rig);
	return rig;
}

static const struct rig_channel *channel(const struct rig *rig, const char *name)
{
	int index = rig_channel_find(rig, name, strlen(name));
	if (index < 0)
		fail_msg("no channel %s", name);
	return &rig->channels[index];
}

static void loads_the_shipped_rig(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	assert_string_equal(rig->name, "model-spm");
	assert_true(rig->unattended);
	assert_int_equal(rig->link_count, 2);
	assert_int_equal(rig->device_count, 5);
	assert_int_equal(rig->rest_within_ns, 30 * NS_PER_S);
	assert_int_equal(rig->stale_after_ns, NS_PER_S);
	assert_true(rig->has_model);
	assert_non_null(rig->model_parameters);
	assert_int_equal(rig->interlock_count, 2);
	assert_int_equal(rig->before_count, 4);
	assert_int_equal(rig->safe_state_count, 7);
	assert_int_equal(rig->direction_count, 2);
	assert_int_equal(rig->attempt_count, 3);
	for (size_t i = 0; i < rig->channel_count; i++) {
		assert_non_null(rig->channels[i].info.unit);
		assert_non_null(rig->channels[i].info.device);
		assert_memory_equal(&rig->channels[i].info, &rig->infos[i], sizeof rig->infos[i]);
	}
}

static void the_shipped_rig_is_ready_for_unattended_runs(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	assert_true(rig_unattended_ready(rig, &faults));
	assert_int_equal(faults_total(&faults), 0);
}

static void takes_addresses_apart(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct link_config *config = &rig->links[rig_link_find(rig, "bench_wire", 10)].config;
	assert_string_equal(config->tcp_host, "127.0.0.1");
	assert_int_equal(config->tcp_port, 15021);
	assert_int_equal(config->reply_timeout_ns, 100 * NS_PER_MS);
	assert_null(config->serial_path);
}

static void knows_what_devices_are(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	int index = rig_device_find(rig, "controller", 10);
	const struct rig_device *device = &rig->devices[index];
	assert_int_equal(device->unit, 1);
	assert_true(device->under_test);
	assert_int_equal(device->identity_count, 2);
	assert_string_equal(device->identity[0].key, "firmware");
	assert_string_equal(rig->channels[device->identity[0].channel].info.name, "firmware_version");
	assert_string_equal(rig->channels[device->life].info.name, "life_counter");
	assert_int_equal(device->life_within_ns, NS_PER_S);
	assert_int_equal(device->max_registers, 125);
	assert_int_equal(device->in_flight, 1);
	assert_false(device->gaps_allowed);
	assert_true(device->watchdog.given);
	assert_int_equal(device->watchdog.timeout_ns, 200 * NS_PER_MS);
	assert_int_equal(device->watchdog.arm_count, 2);
	assert_int_equal(device->watchdog.clear_count, 3);
	assert_int_equal(device->watchdog.tripped.kind, CONDITION_IS);
	assert_near(device->watchdog.tripped.a, 9, 0, "");
	assert_near(device->watchdog.arm[0].assigns[0].value, 200, 0, "ms");
	int box = rig_device_find(rig, "fault_box", 9);
	assert_int_equal(rig->devices[box].life, -1);
	assert_false(rig->devices[box].watchdog.given);
}

static void brings_the_nameplate_to_si(void **state)
{
	(void)state;
	const struct machine *machine = &model_rig()->machine;
	assert_int_equal(machine->pole_pairs, 4);
	assert_int_equal(machine->encoder_lines, 1024);
	assert_near(machine->flux_linkage.value, 0.085, 1e-17, "Wb");
	assert_near(machine->flux_linkage.tolerance, 0.05, 1e-17, "");
	assert_near(machine->inductance_d.value, 0.0031, 1e-17, "H");
	assert_near(machine->rated_speed.value, 314.1592653589793, 1e-12, "rad/s");
	assert_near(machine->rated_speed.tolerance, 0, 0, "");
	assert_near(machine->rated_current.value, 4.808326112068523, 1e-14, "A peak");
	assert_near(machine->dc_voltage.value, 310, 0, "V");
}

static void knows_where_and_how_channels_lie(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct rig_channel *speed = channel(rig, "speed");
	assert_int_equal(speed->place, PLACE_INPUT_REGISTER);
	assert_int_equal(speed->address, 0);
	assert_int_equal(speed->codec.type, CODEC_INT16);
	assert_near(speed->codec.scale, 0.2, 0, "rpm");
	assert_string_equal(speed->info.unit->name, "rpm");
	assert_near(speed->info.resolution, 0.2, 1e-15, "rpm");
	assert_int_equal(speed->info.refresh_ns, NS_PER_MS);
	assert_int_equal(speed->info.evidence, EVIDENCE_SELF_REPORTED);
	assert_false(speed->command);
	assert_int_equal(speed->read_back, -1);
	const struct rig_channel *torque = channel(rig, "shaft_torque");
	assert_int_equal(torque->codec.type, CODEC_FLOAT32);
	assert_false(torque->codec.low_word_first);
	assert_int_equal(torque->info.evidence, EVIDENCE_INDEPENDENT);
	assert_int_equal(torque->info.delay_least_ns, 0);
	assert_int_equal(torque->info.delay_most_ns, 2 * NS_PER_MS);
	assert_near(torque->info.accuracy.of_reading, 0.002, 1e-18, "");
	assert_near(torque->info.accuracy.of_range, 0.0005, 1e-18, "");
	assert_near(torque->info.accuracy.range, 5, 0, "Nm");
	/* 2027-06-30 is day 20999 since 1970-01-01: computed with date -u -d 2027-06-30 +%s. */
	assert_int_equal(torque->info.accuracy.calibrated_until_day, 20999);
	assert_near(torque->info.resolution, 0, 0, "Nm");
	const struct rig_channel *running = channel(rig, "running");
	assert_int_equal(running->codec.type, CODEC_BIT);
	assert_int_equal(running->codec.bit, 2);
	assert_near(running->info.resolution, 0, 0, "");
	assert_near(channel(rig, "rotor_counts")->info.wraps, 4096, 0, "counts");
	const struct rig_channel *text = channel(rig, "firmware_version");
	assert_int_equal(text->codec.type, CODEC_TEXT);
	assert_int_equal(text->codec.text_registers, 8);
}

static void knows_named_values(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct channel_info *info = &channel(rig, "fault_code")->info;
	assert_int_equal(info->name_count, 9);
	assert_near(info->named_values[8], 9, 0, "");
	assert_string_equal(info->value_names[8], "link_watchdog");
	/* Codes have no steps between them. */
	assert_near(info->resolution, 0, 0, "");
}

static void knows_the_limits_of_commands(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct rig_channel *speed = channel(rig, "speed_command");
	assert_true(speed->command);
	assert_near(speed->least, -3300, 0, "rpm");
	assert_near(speed->most, 3300, 0, "rpm");
	assert_near(speed->slew, 0, 0, "rpm/s");
	assert_ptr_equal(&rig->channels[speed->read_back], speed);
	const struct rig_channel *relay = channel(rig, "encoder_open");
	assert_int_equal(relay->place, PLACE_COIL);
	assert_int_equal(relay->effect_least_ns, 0);
	assert_int_equal(relay->effect_most_ns, 12 * NS_PER_MS);
	assert_true(isinf(channel(rig, "speed")->most));
}

static void derives_from_the_worst_of_its_inputs(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct rig_channel *own = channel(rig, "own_angle"), *bench = channel(rig, "bench_angle");
	assert_int_equal(own->place, PLACE_DERIVED);
	assert_int_equal(own->device, -1);
	assert_string_equal(own->derivation.kind->name, "angle_of");
	assert_ptr_equal(&rig->channels[own->derivation.inputs[0]], channel(rig, "current_d"));
	assert_int_equal(own->info.evidence, EVIDENCE_SELF_REPORTED);
	assert_int_equal(own->info.refresh_ns, NS_PER_MS);
	assert_near(own->info.wraps, 360, 0, "deg");
	assert_string_equal(own->info.device, "controller");
	assert_int_equal(bench->info.evidence, EVIDENCE_INDEPENDENT);
	assert_int_equal(rig_channel_device(rig, (int)(bench - rig->channels)),
	                 rig_device_find(rig, "analyser", 8));
	unsigned char set[200] = {0};
	assert_true(rig->channel_count < sizeof set);
	rig_channel_needs(rig, (int)(bench - rig->channels), set);
	size_t needed = 0;
	for (size_t i = 0; i < rig->channel_count; i++)
		needed += set[i] && rig->channels[i].place != PLACE_DERIVED;
	assert_int_equal(needed, 4); /* three phases and the rotor angle */
}

static void knows_its_conditions(void **state)
{
	(void)state;
	const struct rig *rig = model_rig();
	const struct condition *lock = &rig->interlocks[0].condition;
	assert_string_equal(rig->channels[lock->channel].info.name, "bench_speed");
	assert_int_equal(lock->kind, CONDITION_BETWEEN);
	assert_near(lock->a, -3600, 0, "rpm");
	assert_near(lock->b, 3600, 0, "rpm");
	assert_int_equal(lock->for_ns, 4 * NS_PER_MS);
	assert_int_equal(rig->before[1].condition.kind, CONDITION_IS);
	assert_near(rig->before[1].condition.a, 0, 0, "");
	assert_near(rig->directions[1].at_value, 0.4, 0, "Nm");
	assert_int_equal(rig->directions[1].agree_count, 2);
	assert_int_equal(rig->directions[1].prepare[0].assign_count, 2);
	assert_int_equal(rig->attempts[2].channel, -1);
	assert_true(rig->attempts[2].any_function);
	assert_true(rig->attempts[0].moving);
	assert_false(rig->attempts[1].moving);
}

/* Loads a text through a file that lives in memory only. */
static const struct rig *load_text(const char *text)
{
	char path[64];
	int fd = memfd_create("rig", 0);
	assert_true(fd >= 0);
	assert_int_equal(write(fd, text, strlen(text)), (ssize_t)strlen(text));
	(void)snprintf(path, sizeof path, "/proc/self/fd/%d", fd);
	const struct rig *rig = load(path);
	close(fd);
	return rig;
}

static void takes_every_form_of_a_channel(void **state)
{
	(void)state;
	const struct rig *rig = load_text(
	    "rig: forms\n"
	    "links:\n"
	    "  a: {tcp: \"[::1]:502\"}\n"
	    "  b: {rtu: /dev/ttyS9, baud: 9600, parity: none}\n"
	    "  c: {tcp: bench-7.example}\n"
	    "devices:\n"
	    "  d: {link: a, unit: 255, under_test: yes, gaps: allowed, max_registers: 60,\n"
	    "      minimum_pause: 2 ms, in_flight: 4}\n"
	    "  e: {link: b, unit: 7}\n"
	    "channels:\n"
	    "  masked: {device: d, input_register: 9, type: uint16, mask: 240}\n"
	    "  swapped: {device: d, input_register: 10, type: int32, words: low_first,\n"
	    "            bytes: low_first, scale: 0.5, zero: -40 degC, unit: degC}\n"
	    "  turned: {device: e, holding_register: 3, type: int16, unit: Nm, reversed: yes,\n"
	    "           command: yes, slew: 5 Nm/s, takes_effect: 20 ms, read_back: none}\n"
	    "  shown: {device: e, input_register: 3, type: int16, unit: mNm, delay: 3 ms,\n"
	    "          calibration: required, calibrated_until: 2000-02-29}\n"
	    "  by_other: {device: e, holding_register: 4, type: int16, unit: Nm, command: yes,\n"
	    "             read_back: shown}\n"
	    "  dry: {device: e, discrete_input: 65535}\n"
	    "  revision: {device: e, identification: 2}\n"
	    "safe_state:\n"
	    "  - set: {turned: 0}\n"
	    "  - await: {channel: shown, between: [-10, 10], timeout: 1 s}\n");
	assert_non_null(rig);
	assert_string_equal(rig->links[0].config.tcp_host, "::1");
	assert_int_equal(rig->links[0].config.tcp_port, 502);
	assert_int_equal(rig->links[0].reply_timeout_ns, 200 * NS_PER_MS);
	assert_int_equal(rig->links[1].config.baud, 9600);
	assert_int_equal(rig->links[1].config.parity, PARITY_NONE);
	assert_int_equal(rig->links[1].config.stop_bits, 2);
	assert_string_equal(rig->links[2].config.tcp_host, "bench-7.example");
	assert_int_equal(rig->links[2].config.tcp_port, 502);
	assert_int_equal(rig->devices[0].unit, 255);
	assert_true(rig->devices[0].gaps_allowed);
	assert_int_equal(rig->devices[0].max_registers, 60);
	assert_int_equal(rig->devices[0].minimum_pause_ns, 2 * NS_PER_MS);
	assert_int_equal(rig->devices[0].in_flight, 4);
	assert_int_equal(channel(rig, "masked")->codec.mask, 240);
	const struct rig_channel *swapped = channel(rig, "swapped");
	assert_true(swapped->codec.low_word_first && swapped->codec.low_byte_first);
	assert_near(swapped->codec.zero, -40, 0, "degC");
	const struct rig_channel *turned = channel(rig, "turned");
	assert_true(turned->codec.reversed);
	assert_near(turned->slew, 5, 0, "Nm/s");
	assert_int_equal(turned->effect_most_ns, 20 * NS_PER_MS);
	assert_int_equal(turned->read_back, -1);
	assert_true(isinf(turned->least) && turned->least < 0);
	const struct rig_channel *shown = channel(rig, "shown");
	assert_int_equal(shown->info.delay_least_ns, 0);
	assert_int_equal(shown->info.delay_most_ns, 3 * NS_PER_MS);
	assert_true(shown->info.accuracy.calibration_required);
	assert_int_equal(shown->info.accuracy.calibrated_until_day, 11016); /* date -u -d 2000-02-29 */
	assert_ptr_equal(&rig->channels[channel(rig, "by_other")->read_back], shown);
	assert_int_equal(channel(rig, "dry")->codec.type, CODEC_BIT);
	assert_int_equal(channel(rig, "revision")->codec.type, CODEC_TEXT);
	assert_true(isnan(rig->machine.flux_linkage.value));
	assert_int_equal(rig->machine.pole_pairs, 0);
	assert_false(rig->unattended);
	assert_false(rig->has_model);
}

static void says_what_an_unattended_run_lacks(void **state)
{
	(void)state;
	const struct rig *rig =
	    load_text("rig: bare\n"
	              "links: {a: {tcp: host}}\n"
	              "devices:\n"
	              "  d: {link: a, unit: 1, under_test: yes}\n"
	              "  relays: {link: a, unit: 2}\n"
	              "channels:\n"
	              "  c: {device: d, holding_register: 3, type: int16, command: yes}\n"
	              "  relay: {device: relays, coil: 3, command: yes}\n"
	              "safe_state:\n"
	              "  - set: {c: 0, relay: 0}\n"
	              "  - await: {channel: c, between: [-10, 10], timeout: 1 s}\n");
	assert_non_null(rig);
	assert_false(rig_unattended_ready(rig, &faults));
	/* Limits of c, the watchdog of d (not of relays), interlocks, an independent await, direction.
	 */
	assert_int_equal(faults_total(&faults), 5);
}

static void ends_cleanly_when_memory_runs_out(void **state)
{
	(void)state;
	int failures = 0;
	for (long n = 1; n < 100000; n += n < 200 ? 1 : 23) {
		const struct rig *rig = NULL;
		struct err err = {0};
		memset(&faults, 0, sizeof faults);
		arena_release(&arena);
		arena_init(&arena, 0);
		arena_fail_at(n);
		int rc = rig_load(MODEL_RIG, &arena, &faults, &rig, &err);
		arena_fail_at(0);
		assert_int_equal(faults_total(&faults), 0);
		if (rc == 0) {
			assert_non_null(rig);
			assert_true(failures > 200);
			return;
		}
		assert_null(rig);
		assert_int_equal(err.code, ERR_NOMEM);
		failures++;
	}
	fail_msg("never enough memory");
}

static void says_which_file_cannot_be_read(void **state)
{
	(void)state;
	const struct rig *rig = NULL;
	struct err err = {0};
	arena_release(&arena);
	arena_init(&arena, 0);
	assert_int_equal(rig_load("/nowhere/rig.yaml", &arena, &faults, &rig, &err), -1);
	assert_int_equal(err.code, ERR_FILE);
	assert_string_equal(err.file, "/nowhere/rig.yaml");
}

/* The table of fields cannot call codec_type_names(): it must not differ from it. */
static void names_types_as_the_codec_does(void **state)
{
	(void)state;
	const struct field *type = field_find(&RIG_CHANNEL_FIELDS, "type", 4);
	const char *const *names = codec_type_names();
	for (size_t i = 0; names[i] || type->choices[i]; i++)
		assert_string_equal(type->choices[i], names[i]);
}

/* A default that its own field refuses would blame the user for it. */
static void has_defaults_that_fit_their_fields(void **state)
{
	(void)state;
	static const struct field_table *const tables[] = {
	    &RIG_FIELDS,         &RIG_LINK_FIELDS,         &RIG_DEVICE_FIELDS,    &RIG_WATCHDOG_FIELDS,
	    &RIG_MACHINE_FIELDS, &RIG_CHANNEL_FIELDS,      &RIG_DERIVED_FIELDS,   &RIG_ACCURACY_FIELDS,
	    &RIG_MODEL_FIELDS,   &RIG_PRECONDITION_FIELDS, &RIG_DIRECTION_FIELDS, &RIG_ATTEMPT_FIELDS,
	};
	for (size_t i = 0; i < FIELD_COUNT(tables); i++)
		for (size_t j = 0; j < tables[i]->count; j++) {
			const struct field *field = &tables[i]->fields[j];
			assert_true(field->text && field->text[0]);
			if (!field->fallback)
				continue;
			struct field single = *field;
			single.offset = 0;
			single.flags = 0;
			const struct field_table table = {tables[i]->name, "", &single, 1};
			struct yaml_node empty = {.kind = YAML_MAPPING};
			unsigned char target[64] = {0};
			memset(&faults, 0, sizeof faults);
			struct binder binder = {.faults = &faults};
			assert_true(bind_mapping(&binder, &table, &empty, target));
		}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(loads_the_shipped_rig),
	    cmocka_unit_test(the_shipped_rig_is_ready_for_unattended_runs),
	    cmocka_unit_test(takes_addresses_apart),
	    cmocka_unit_test(knows_what_devices_are),
	    cmocka_unit_test(brings_the_nameplate_to_si),
	    cmocka_unit_test(knows_where_and_how_channels_lie),
	    cmocka_unit_test(knows_named_values),
	    cmocka_unit_test(knows_the_limits_of_commands),
	    cmocka_unit_test(derives_from_the_worst_of_its_inputs),
	    cmocka_unit_test(knows_its_conditions),
	    cmocka_unit_test(takes_every_form_of_a_channel),
	    cmocka_unit_test(says_what_an_unattended_run_lacks),
	    cmocka_unit_test(ends_cleanly_when_memory_runs_out),
	    cmocka_unit_test(says_which_file_cannot_be_read),
	    cmocka_unit_test(names_types_as_the_codec_does),
	    cmocka_unit_test(has_defaults_that_fit_their_fields),
	};
	return cmocka_run_group_tests(tests, NULL, release) != 0;
}
