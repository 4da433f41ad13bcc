/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Steps that are right become what they say. Steps that are wrong are in
 * tests/golden/step-*.
 */
#include "near.h"

#include <stdio.h>
#include <string.h>

#include "rig.h"

static struct arena arena;
static struct faults faults;
static const struct rig *rig;
static struct mark_names marks;

static int load_rig(void **state)
{
	(void)state;
	struct err err = {0};
	arena_init(&arena, 0);
	memset(&faults, 0, sizeof faults);
	return rig_load(SOURCE_DIR "/rigs/model-spm.yaml", &arena, &faults, &rig, &err) == 0 && rig
	           ? 0
	           : -1;
}

static int release(void **state)
{
	(void)state;
	arena_release(&arena);
	return 0;
}

static const struct yaml_node *tree(const char *text)
{
	const struct yaml_file *file;
	struct yaml_node *root = NULL;
	struct err err = {0};
	assert_int_equal(
	    yaml_load_bytes("s.yaml", text, strlen(text), &arena, &faults, &file, &root, &err), 0);
	assert_non_null(root);
	return root;
}

static const struct step_context everything = {
    .arena = &arena, .faults = &faults, .marks = &marks, .allowed = 0xFF};

static struct step *load(const char *text, size_t count)
{
	struct step_context context = everything;
	struct step *steps = NULL;
	size_t loaded = 0;
	struct err err = {0};
	context.rig = rig;
	memset(&faults, 0, sizeof faults);
	marks.count = 0;
	assert_int_equal(steps_load(&context, tree(text), &steps, &loaded, &err), 0);
	if (faults_total(&faults) > 0)
		fail_msg("%s", faults.items[0].message);
	assert_int_equal(loaded, count);
	return steps;
}

static const char *channel_of(const struct assignment *assign)
{
	return rig->channels[assign->channel].info.name;
}

static void sets_in_the_order_of_the_file(void **state)
{
	(void)state;
	struct step *step = load("- set: {control: 1, speed_command: -1.5e3, encoder_open: 1}\n"
	                         "  mark: go\n",
	                         1);
	assert_int_equal(step->kind, STEP_SET);
	assert_int_equal(step->assign_count, 3);
	assert_string_equal(channel_of(&step->assigns[0]), "control");
	assert_string_equal(channel_of(&step->assigns[1]), "speed_command");
	assert_near(step->assigns[1].value, -1500, 0, "rpm");
	assert_near(step->assigns[2].value, 1, 0, "");
	assert_int_equal(step->assigns[1].at.column, 36);
	assert_int_equal(step->mark, 0);
	assert_string_equal(marks.names[0], "go");
}

static void converts_values_to_the_unit_of_the_channel(void **state)
{
	(void)state;
	struct step *step = load("- set: {load_command: 1200 mNm, watchdog_time: 0.2 s}\n", 1);
	assert_near(step->assigns[0].value, 1.2, 1e-15, "Nm");
	assert_near(step->assigns[1].value, 200, 1e-12, "ms");
}

static void ramps_and_waits_unless_told(void **state)
{
	(void)state;
	struct step *steps = load("- ramp: {speed_command: 1500 rpm, over: 2 s}\n"
	                          "- ramp: {over: 500 ms, load_command: 1, wait: no}\n",
	                          2);
	assert_int_equal(steps[0].kind, STEP_RAMP);
	assert_int_equal(steps[0].duration_ns, 2 * NS_PER_S);
	assert_true(steps[0].wait);
	assert_int_equal(steps[0].assign_count, 1);
	assert_false(steps[1].wait);
	assert_string_equal(channel_of(steps[1].assigns), "load_command");
	assert_int_equal(steps[1].mark, -1);
}

static void awaits_conditions(void **state)
{
	(void)state;
	struct step *steps =
	    load("- await: {channel: fault_code, is: encoder_loss, timeout: 1 s}\n"
	         "- await: {channel: speed, above: 10, for: 5 ms, timeout: 1 s}\n"
	         "- await: {channel: speed, below: -10 rpm, timeout: 1 s}\n"
	         "- await: {channel: running, is: 0, timeout: 1 s}\n"
	         "- mark: {name: over, when: {channel: own_angle, between: [80 deg, 1.7 rad]}}\n",
	         5);
	assert_near(steps[0].condition.a, 3, 0, "");
	assert_int_equal(steps[1].condition.kind, CONDITION_ABOVE);
	assert_int_equal(steps[1].condition.for_ns, 5 * NS_PER_MS);
	assert_int_equal(steps[1].timeout_ns, NS_PER_S);
	assert_int_equal(steps[2].condition.kind, CONDITION_BELOW);
	assert_int_equal(steps[3].condition.kind, CONDITION_IS);
	assert_int_equal(steps[4].kind, STEP_MARK);
	assert_int_equal(steps[4].mark, 0);
	/* 1.7 rad in degrees, computed with bc -l. */
	assert_near(steps[4].condition.b, 97.402825172239, 1e-11, "deg");
}

static void makes_requests_that_must_be_refused(void **state)
{
	(void)state;
	struct step *steps =
	    load("- attempt: {name: too-fast, write: {speed_command: 5000 rpm}, expect: "
	         "illegal_data_value}\n"
	         "- attempt: {device: controller, function: 99, expect: illegal_function}\n"
	         "- attempt: {device: controller, read_input_register: 9999, count: 2}\n"
	         "- attempt: {device: controller, read_holding_register: 1, count: 126}\n",
	         4);
	const struct attempt *write = &steps[0].attempt;
	assert_string_equal(write->name, "too-fast");
	assert_string_equal(rig->channels[write->channel].info.name, "speed_command");
	assert_near(write->value, 5000, 0, "rpm");
	assert_int_equal(write->device, rig_device_find(rig, "controller", 10));
	assert_int_equal(write->expected_exception, 3);
	const struct attempt *function = &steps[1].attempt;
	assert_string_equal(function->name, "refused-2");
	assert_int_equal(function->channel, -1);
	assert_int_equal(function->request.function, LINK_RAW);
	assert_int_equal(function->request.pdu_length, 1);
	assert_int_equal(function->request.pdu[0], 99);
	assert_int_equal(function->request.unit, 1);
	assert_int_equal(function->expected_exception, 1);
	const struct attempt *read = &steps[2].attempt;
	assert_int_equal(read->request.function, LINK_READ_INPUT_REGISTERS);
	assert_int_equal(read->request.address, 9999);
	assert_int_equal(read->request.count, 2);
	assert_int_equal(read->expected_exception, 0);
	/* Application Protocol V1.1b3, 6.3: at most 125 registers, so this goes out as it stands. */
	static const uint8_t pdu[] = {3, 0, 1, 0, 126};
	assert_int_equal(steps[3].attempt.request.function, LINK_RAW);
	assert_int_equal(steps[3].attempt.request.pdu_length, sizeof pdu);
	assert_memory_equal(steps[3].attempt.request.pdu, pdu, sizeof pdu);
}

static void nests_cycles(void **state)
{
	(void)state;
	struct step *step = load("- cycle: {times: 5, steps: [{hold: 10 ms}, "
	                         "{cycle: {times: 2, steps: [{hold: 1 ms}]}}]}\n",
	                         1);
	assert_int_equal(step->times, 5);
	assert_int_equal(step->step_count, 2);
	assert_int_equal(step->steps[1].steps[0].duration_ns, NS_PER_MS);
}

static void sums_shortest_and_longest_times(void **state)
{
	(void)state;
	struct step *steps = load("- set: {control: 1}\n"
	                          "- hold: 100 ms\n"
	                          "- ramp: {speed_command: 100, over: 2 s}\n"
	                          "- ramp: {speed_command: 0, over: 9 s, wait: no}\n"
	                          "- await: {channel: speed, above: 10, for: 50 ms, timeout: 4 s}\n"
	                          "- silence: {device: controller, for: 300 ms}\n"
	                          "- cycle: {times: 10, steps: [{hold: 10 ms}]}\n",
	                          7);
	int64_t least, most;
	steps_duration(steps, 7, &least, &most);
	assert_int_equal(least, (100 + 2000 + 50 + 300 + 100) * NS_PER_MS);
	assert_int_equal(most, (100 + 2000 + 4000 + 300 + 100) * NS_PER_MS);
	steps_duration(NULL, 0, &least, &most);
	assert_int_equal(least, 0);
	assert_int_equal(most, 0);
}

static void never_overflows_a_duration(void **state)
{
	(void)state;
	struct step *steps = load("- cycle: {times: 100000, steps: [{cycle: {times: 100000, steps: "
	                          "[{hold: 8000 h}]}}]}\n"
	                          "- hold: 8000 h\n",
	                          2);
	int64_t least, most;
	steps_duration(steps, 2, &least, &most);
	assert_int_equal(least, NS_MOST);
	assert_int_equal(most, NS_MOST);
}

static void says_steps_in_words(void **state)
{
	(void)state;
	static const struct {
		const char *step, *text;
	} rows[] = {
	    {"- set: {speed_command: 1500, control: 1}", "set speed_command = 1500 rpm, control = 1"},
	    {"- set: {load_command: -0.0}", "set load_command = 0 Nm"},
	    {"- ramp: {speed_command: 1500, over: 2 s}", "ramp speed_command to 1500 rpm over 2 s"},
	    {"- hold: 1.5 s", "hold 1.5 s"},
	    {"- await: {channel: bench_speed, between: [-10, 10], for: 100 ms, timeout: 5 s}",
	     "await bench_speed between -10 rpm and 10 rpm for 100 ms, at most 5 s"},
	    {"- await: {channel: fault_code, is: none, timeout: 5 s}",
	     "await fault_code is none, at most 5 s"},
	    {"- silence: {device: controller, for: 300 ms}", "silence controller for 300 ms"},
	    {"- attempt: {name: x, write: {speed_command: 5000}}",
	     "attempt x: speed_command = 5000 rpm"},
	    {"- attempt: {device: controller, function: 99}",
	     "attempt refused-1: function 99 of controller"},
	    {"- attempt: {device: controller, read_coil: 7, count: 2001}",
	     "attempt refused-1: read 2001 coils at 7 of controller"},
	    {"- cycle: {times: 5, steps: [{hold: 1 s}]}", "cycle 1 steps 5 times"},
	    {"- mark: {name: m, when: {channel: speed, above: 10}}", "mark when speed above 10 rpm"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		char buffer[200], small[12];
		struct step *step = load(rows[i].step, 1);
		assert_string_equal(step_text(step, rig, buffer, sizeof buffer), rows[i].text);
		(void)step_text(step, rig, small, sizeof small);
		assert_true(strlen(small) < sizeof small);
		assert_memory_equal(small, rows[i].text, strlen(small));
	}
}

static void keeps_64_marks(void **state)
{
	(void)state;
	static char names[65][16];
	struct mark_names all = {.count = 0};
	for (int i = 0; i < 65; i++) {
		(void)snprintf(names[i], sizeof names[i], "m%d", i);
		assert_int_equal(mark_names_enter(&all, names[i]), i < 64 ? i : -1);
	}
	assert_int_equal(mark_names_find(&all, "m63"), 63);
	assert_int_equal(mark_names_enter(&all, "m5"), 5);
	assert_int_equal(mark_names_find(&all, "m64"), -1);
}

static const struct yaml_node *value_of(void *context, const struct yaml_node *node)
{
	return yaml_get(context, node->text + 1);
}

static void reads_values_by_name(void **state)
{
	(void)state;
	struct step_context context = everything;
	struct step *steps;
	size_t count;
	struct err err = {0};
	context.rig = rig;
	context.substitute = value_of;
	context.substitute_context =
	    (void *)(uintptr_t)tree("{fast: 3000 rpm, time: 2 s, code: overcurrent}\n");
	memset(&faults, 0, sizeof faults);
	assert_int_equal(steps_load(&context,
	                            tree("- ramp: {speed_command: $fast, over: $time}\n"
	                                 "- await: {channel: fault_code, is: $code, timeout: $time}\n"),
	                            &steps, &count, &err),
	                 0);
	assert_int_equal(faults_total(&faults), 0);
	assert_near(steps[0].assigns[0].value, 3000, 0, "rpm");
	assert_int_equal(steps[0].duration_ns, 2 * NS_PER_S);
	assert_near(steps[1].condition.a, 1, 0, "");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(sets_in_the_order_of_the_file),
	    cmocka_unit_test(converts_values_to_the_unit_of_the_channel),
	    cmocka_unit_test(ramps_and_waits_unless_told),
	    cmocka_unit_test(awaits_conditions),
	    cmocka_unit_test(makes_requests_that_must_be_refused),
	    cmocka_unit_test(nests_cycles),
	    cmocka_unit_test(sums_shortest_and_longest_times),
	    cmocka_unit_test(never_overflows_a_duration),
	    cmocka_unit_test(says_steps_in_words),
	    cmocka_unit_test(keeps_64_marks),
	    cmocka_unit_test(reads_values_by_name),
	};
	return cmocka_run_group_tests(tests, load_rig, release) != 0;
}
