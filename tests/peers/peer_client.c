/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The project's client against an independent server, whose values
 * server_peer.py packs: reads every channel of peers.yaml as a run would,
 * commands, and asks for what must be refused. The script looks afterwards
 * into the server's registers.
 *
 *     peer_client tcp PORT | rtu PATH
 */
#include "near.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "clock.h"
#include "plan.h"

static struct link *wire;
static const struct rig *rig;
static struct arena arena;

static int64_t now_ns(void *context)
{
	(void)context;
	const struct clock clock = clock_real();
	return clock_now(&clock);
}

static enum link_status transact(const struct link_request *request, struct link_reply *reply)
{
	struct err err = {0};
	int64_t now = now_ns(NULL);
	if (link_begin(wire, request, now, &err) < 0)
		fail_msg("%s", err.message);
	assert_true(link_end(wire, now, reply) <= now);
	return reply->status;
}

static void every_coding_is_read(void **state)
{
	(void)state;
	static const struct {
		const char *channel;
		double value;
	} expected[] = {
	    {"count_u16", 43981},
	    {"scaled_i16", -1234.5},
	    {"count_u32", 4023233417},
	    {"real_ab", -1234.56787109375},
	    {"real_ba", -1234.56787109375},
	    {"real_swab", -1234.56787109375},
	    {"real_swba", -1234.56787109375},
	    {"real_64", 3.141592653589793},
	    {"count_i64", -9007199254740991},
	    {"count_i32", -19088744},
	    {"flag_on", 1},
	    {"flag_off", 0},
	    {"high_byte", 165},
	    {"switch_on", 1},
	    {"switch_off", 0},
	};
	unsigned char needed[64] = {0};
	struct read_plan plan;
	struct err err = {0};
	size_t seen = 0;
	for (size_t i = 0; i < sizeof expected / sizeof expected[0]; i++)
		needed[rig_channel_find(rig, expected[i].channel, strlen(expected[i].channel))] = 1;
	assert_int_equal(plan_reads(rig, needed, &arena, &plan, &err), 0);
	assert_int_equal(plan.count, 2); /* discrete inputs, and all registers in one */
	for (size_t b = 0; b < plan.count; b++) {
		struct link_request request;
		struct link_reply reply;
		block_request(rig, &plan.blocks[b], &request);
		if (transact(&request, &reply) != LINK_OK)
			fail_msg("%s", reply.message);
		for (size_t c = 0; c < plan.blocks[b].channel_count; c++) {
			int channel = plan.blocks[b].channels[c];
			const char *name = rig->channels[channel].info.name;
			for (size_t i = 0; i < sizeof expected / sizeof expected[0]; i++) {
				if (strcmp(expected[i].channel, name) != 0)
					continue;
				assert_near(block_value(rig, &plan.blocks[b], channel, &reply), expected[i].value,
				            0, name);
				seen++;
			}
		}
	}
	assert_int_equal(seen, sizeof expected / sizeof expected[0]);
}

static void commands_are_taken(void **state)
{
	(void)state;
	static const struct {
		const char *channel;
		double value;
	} commands[] = {{"speed", -1500}, {"torque", 1.5}, {"relay", 1}, {"mode", 10}};
	for (size_t i = 0; i < sizeof commands / sizeof commands[0]; i++) {
		struct link_request request;
		struct link_reply reply;
		struct err err = {0};
		int channel = rig_channel_find(rig, commands[i].channel, strlen(commands[i].channel));
		assert_int_equal(command_request(rig, channel, commands[i].value, NULL, &request, &err), 0);
		if (transact(&request, &reply) != LINK_OK)
			fail_msg("%s: status %d, exception %d %s", commands[i].channel, (int)reply.status,
			         reply.exception, reply.message);
	}
}

static void several_coils_and_registers_are_written_at_once(void **state)
{
	(void)state;
	struct link_reply reply;
	const struct link_request coils = {.unit = 1,
	                                   .function = LINK_WRITE_COILS,
	                                   .address = 8,
	                                   .count = 10,
	                                   .words = {1, 0, 1, 1, 0, 0, 1, 1, 1, 0}};
	const struct link_request registers = {.unit = 1,
	                                       .function = LINK_WRITE_REGISTERS,
	                                       .address = 20,
	                                       .count = 2,
	                                       .words = {0x000A, 0x0102}};
	assert_int_equal(transact(&coils, &reply), LINK_OK);
	assert_int_equal(transact(&registers, &reply), LINK_OK);
}

static void refusals_carry_their_codes(void **state)
{
	(void)state;
	struct link_reply reply;
	const struct link_request outside = {
	    .unit = 1, .function = LINK_READ_INPUT_REGISTERS, .address = 5000, .count = 1};
	/* 126 registers: one more than Modbus Application Protocol V1.1b3, 6.4, allows. */
	const struct link_request too_many = {
	    .unit = 1, .function = LINK_RAW, .pdu = {4, 0, 0, 0, 126}, .pdu_length = 5};
	assert_int_equal(transact(&outside, &reply), LINK_EXCEPTION);
	assert_int_equal(reply.exception, 2);
	assert_int_equal(transact(&too_many, &reply), LINK_EXCEPTION);
	assert_int_equal(reply.exception, 3);
}

static void the_peer_identifies_itself(void **state)
{
	(void)state;
	struct link_reply reply;
	const struct link_request version = {.unit = 1, .function = LINK_IDENTIFY, .address = 2};
	if (transact(&version, &reply) != LINK_OK)
		fail_msg("status %d: %s", (int)reply.status, reply.message);
	assert_string_equal(reply.text, "V2.11");
}

static int open_wire(const char *kind, const char *where, struct err *err)
{
	struct link_config config = rig->links[0].config;
	config.reply_timeout_ns = rig->links[0].reply_timeout_ns;
	config.clock = now_ns;
	if (strcmp(kind, "tcp") == 0) {
		config.tcp_host = "127.0.0.1";
		config.tcp_port = (uint16_t)strtoul(where, NULL, 10);
		return link_tcp_new(&config, &wire, err) < 0 ? -1 : link_open(wire, err);
	}
	config.tcp_host = NULL;
	config.serial_path = where;
	config.baud = 115200;
	return link_rtu_new(&config, &wire, err) < 0 ? -1 : link_open(wire, err);
}

int main(int argc, char **argv)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_coding_is_read),
	    cmocka_unit_test(commands_are_taken),
	    cmocka_unit_test(several_coils_and_registers_are_written_at_once),
	    cmocka_unit_test(refusals_carry_their_codes),
	    cmocka_unit_test(the_peer_identifies_itself),
	};
	struct faults faults = {0};
	struct err err = {0};
	if (argc != 3)
		return 64;
	arena_init(&arena, 0);
	if (rig_load(SOURCE_DIR "/tests/peers/peers.yaml", &arena, &faults, &rig, &err) < 0 || !rig ||
	    open_wire(argv[1], argv[2], &err) < 0) {
		(void)fprintf(stderr, "%s%s\n", err.message, faults.count ? faults.items[0].message : "");
		return 1;
	}
	int failed = RUN_GROUP(tests);
	link_release(wire);
	arena_release(&arena);
	return failed;
}
