/* SPDX-License-Identifier: Apache-2.0 */
/* The last line of defence: what may go out on the wire, whoever made it. */
#include "guard.h"

#include <stdlib.h>
#include <unistd.h>

#include "near.h"
#include "plan.h"

static const char RIG[] =
    "rig: guarded\n"
    "links: {wire: {tcp: \"127.0.0.1:502\", reply_timeout: 100 ms}}\n"
    "devices: {drive: {link: wire, unit: 1, under_test: true}}\n"
    "channels:\n"
    "  speed: {device: drive, input_register: 0, type: int16, unit: rpm}\n"
    "  goal: {device: drive, holding_register: 0, type: int16, scale: 0.2, unit: rpm, "
    "command: true, between: [-3300, 3300], slew: 1000 rpm/s}\n"
    "  wide: {device: drive, holding_register: 1, type: float32, words: low_first, unit: Nm, "
    "command: true, between: [-2.5, 2.5]}\n"
    "  shown: {device: drive, holding_register: 3, type: uint16}\n"
    "  relay: {device: drive, coil: 4, command: true, between: [0, 1]}\n"
    "safe_state:\n"
    "  - set: {goal: 0}\n"
    "  - await: {channel: speed, between: [-10, 10], timeout: 5 s}\n";

struct bench {
	struct arena arena;
	const struct rig *rig;
	struct guard guard;
};

static int bench_open(void **state)
{
	static struct bench bench;
	static struct faults faults;
	static char path[] = "/tmp/drivetrial-guard-XXXXXX";
	struct err err = {0};
	int fd = mkstemp(path);
	if (fd < 0 || write(fd, RIG, sizeof RIG - 1) != (ssize_t)sizeof RIG - 1)
		return -1;
	(void)close(fd);
	arena_init(&bench.arena, 0);
	int result = rig_load(path, &bench.arena, &faults, &bench.rig, &err);
	(void)unlink(path);
	for (size_t i = 0; i < faults.count; i++)
		print_error("%d: %s\n", faults.items[i].at.line, faults.items[i].message);
	*state = &bench;
	return result < 0 || !bench.rig ? -1 : guard_init(&bench.guard, bench.rig, NULL);
}

static int bench_close(void **state)
{
	struct bench *bench = *state;
	guard_release(&bench->guard);
	arena_release(&bench->arena);
	return 0;
}

static int pass(struct bench *bench, const struct link_request *request, bool resting, double at_s)
{
	struct err err = {0};
	int result = guard_pass(&bench->guard, 0, request, resting, (int64_t)(at_s * 1e9), &err);
	assert_true(result == 0 || err.code == ERR_REFUSED);
	assert_true(result == 0 || err.message[0]);
	return result;
}

static struct link_request goal(int raw)
{
	return (struct link_request){.unit = 1,
	                             .function = LINK_WRITE_REGISTER,
	                             .address = 0,
	                             .count = 1,
	                             .words = {(uint16_t)raw}};
}

static void reads_pass(void **state)
{
	struct link_request request = {
	    .unit = 1, .function = LINK_READ_INPUT_REGISTERS, .address = 5000, .count = 100};
	assert_int_equal(pass(*state, &request, false, 0), 0);
}

static void writes_inside_the_range_pass_and_outside_do_not(void **state)
{
	struct link_request request = goal(16500); /* 3300 rpm */
	assert_int_equal(pass(*state, &request, true, 0), 0);
	request = goal(16501);
	assert_int_equal(pass(*state, &request, true, 0), -1);
	request = goal(-16501);
	assert_int_equal(pass(*state, &request, true, 0), -1);
}

static void a_float_is_judged_by_what_the_device_reads(void **state)
{
	struct bench *bench = *state;
	struct link_request request;
	int wide = rig_channel_find(bench->rig, "wide", 4);
	assert_int_equal(command_request(bench->rig, wide, 2.5, NULL, &request, NULL), 0);
	assert_int_equal(pass(bench, &request, false, 0), 0);
	request.words[0] = 0;
	request.words[1] = 0x4040; /* 3.0 in the order of the rig */
	assert_int_equal(pass(bench, &request, false, 0), -1);
	request.words[1] = 0x7FC0; /* not a number */
	assert_int_equal(pass(bench, &request, false, 0), -1);
}

static void half_a_value_never_passes(void **state)
{
	struct link_request request = {
	    .unit = 1, .function = LINK_WRITE_REGISTER, .address = 2, .count = 1, .words = {0}};
	assert_int_equal(pass(*state, &request, false, 0), -1);
}

static void what_is_no_command_is_not_written(void **state)
{
	struct link_request request = {.unit = 1,
	                               .function = LINK_WRITE_REGISTERS,
	                               .address = 0,
	                               .count = 4,
	                               .words = {0, 0, 0, 0}};
	assert_int_equal(pass(*state, &request, true, 0), -1); /* register 3 only shows */
	request.count = 3;
	assert_int_equal(pass(*state, &request, true, 0), 0);
	request.address = 9;
	request.count = 1;
	assert_int_equal(pass(*state, &request, true, 0), -1); /* no channel at all */
	request.function = LINK_WRITE_COIL;
	request.address = 4;
	assert_int_equal(pass(*state, &request, true, 0), 0);
}

static void slew_holds_but_on_the_way_to_rest(void **state)
{
	struct bench *bench = *state;
	struct link_request request = goal(0);
	assert_int_equal(pass(bench, &request, true, 10), 0);
	request = goal(500); /* 100 rpm in 0.1 s: as fast as allowed */
	assert_int_equal(pass(bench, &request, false, 10.1), 0);
	request = goal(5000); /* 900 rpm more in 0.1 s */
	assert_int_equal(pass(bench, &request, false, 10.2), -1);
	assert_int_equal(pass(bench, &request, true, 10.2), 0);
	request = goal(0); /* stopping at once is allowed on the way to rest only */
	assert_int_equal(pass(bench, &request, false, 10.21), -1);
	assert_int_equal(pass(bench, &request, true, 10.21), 0);
}

static void raw_requests_and_masked_writes_never_pass(void **state)
{
	struct link_request request = {
	    .unit = 1, .function = LINK_RAW, .pdu = {6, 0, 0, 0, 0}, .pdu_length = 5};
	assert_int_equal(pass(*state, &request, true, 0), -1);
	request.function = LINK_MASK_WRITE;
	assert_int_equal(pass(*state, &request, true, 0), -1);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(reads_pass),
	    cmocka_unit_test(writes_inside_the_range_pass_and_outside_do_not),
	    cmocka_unit_test(a_float_is_judged_by_what_the_device_reads),
	    cmocka_unit_test(half_a_value_never_passes),
	    cmocka_unit_test(what_is_no_command_is_not_written),
	    cmocka_unit_test(slew_holds_but_on_the_way_to_rest),
	    cmocka_unit_test(raw_requests_and_masked_writes_never_pass),
	};
	return cmocka_run_group_tests(tests, bench_open, bench_close) != 0;
}
