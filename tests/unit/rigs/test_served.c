/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The register map of served.yaml beside this file, asked PDU by PDU. Function codes,
 * exceptions and limits: Modbus Application Protocol V1.1b3, section 6.
 */
#include "near.h"

#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "link.h"
#include "served.h"

#define RIG SOURCE_DIR "/tests/unit/rigs/served.yaml"

enum { CONTROLLER = 1, LOAD = 2, TRANSDUCER = 3, FAULT_BOX = 5 };
enum { DRIVE_WIRE = 0, BENCH_WIRE = 1 };

struct fixture {
	struct arena arena;
	struct faults faults;
	const struct rig *rig;
	struct served *served;
};

static void load(struct fixture *fixture, const char *path)
{
	struct err err = {0};
	memset(fixture, 0, sizeof *fixture);
	arena_init(&fixture->arena, 0);
	if (rig_load(path, &fixture->arena, &fixture->faults, &fixture->rig, &err) < 0 || !fixture->rig)
		fail_msg("%s: %s%s", path, err.message,
		         fixture->faults.count ? fixture->faults.items[0].message : "");
}

static void start(struct fixture *fixture, const char *defect)
{
	struct err err = {0};
	uint64_t defects = defect ? UINT64_C(1) << model_defect_find(defect) : 0;
	load(fixture, RIG);
	if (served_new(fixture->rig, 1, defects, &fixture->faults, &fixture->served, &err) < 0 ||
	    !fixture->served)
		fail_msg("%s%s", err.message,
		         fixture->faults.count ? fixture->faults.items[0].message : "");
	model_advance(served_model(fixture->served), 10 * NS_PER_MS);
}

static void finish(struct fixture *fixture)
{
	served_release(fixture->served);
	arena_release(&fixture->arena);
}

struct question {
	int link;
	uint8_t unit;
	int length;
	uint8_t pdu[40];
	int exception; /* 0: answered */
};

static size_t ask(struct fixture *fixture, const struct question *q, uint8_t *reply)
{
	return served_answer(fixture->served, q->link, q->unit, q->pdu, (size_t)q->length, reply);
}

static void expect(struct fixture *fixture, const struct question *questions, size_t count)
{
	for (size_t i = 0; i < count; i++) {
		uint8_t reply[LINK_PDU_MOST] = {0};
		const struct question *q = &questions[i];
		size_t length = ask(fixture, q, reply);
		bool refused = length == 2 && (reply[0] & 0x80);
		if (q->exception ? !refused || reply[1] != q->exception : refused || length == 0)
			fail_msg("question %zu: reply of %zu bytes, %02x %02x; expected exception %d", i,
			         length, reply[0], reply[1], q->exception);
		assert_int_equal(reply[0] & 0x7F, q->pdu[0] & 0x7F);
	}
}

#define EXPECT(fixture, questions)                                                                 \
	expect((fixture), (questions), sizeof(questions) / sizeof((questions)[0]))

static void the_map_answers_what_it_has_and_refuses_the_rest(void **state)
{
	(void)state;
	struct fixture fixture;
	start(&fixture, NULL);
	const struct question questions[] = {
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 0, 0, 28}, 0},  /* all input registers */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 7, 0, 1}, 0},   /* a gap inside reads 0 */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 27, 0, 1}, 0},  /* the last, of a text */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 27, 0, 2}, 2},  /* one more */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 100, 0, 1}, 2}, /* outside */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0xFF, 0xFF, 0, 2}, 2},
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 0, 0, 0}, 3},  /* counts before addresses */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 0, 0, 41}, 3}, /* max_registers: 40 */
	    {DRIVE_WIRE, CONTROLLER, 5, {4, 0xFF, 0xFF, 0, 126}, 3},
	    {DRIVE_WIRE, CONTROLLER, 4, {4, 0, 0, 0}, 3}, /* too short */
	    {DRIVE_WIRE, CONTROLLER, 5, {3, 0, 0, 0, 3}, 0},
	    {DRIVE_WIRE, CONTROLLER, 5, {1, 0, 0, 0, 1}, 2}, /* no coils */
	    {DRIVE_WIRE, CONTROLLER, 5, {2, 0, 0, 0, 1}, 2},
	    {DRIVE_WIRE, CONTROLLER, 5, {1, 0, 0, 0x07, 0xD1}, 3}, /* 2000 are possible */
	    {DRIVE_WIRE, CONTROLLER, 5, {7, 0, 0, 0, 0}, 1},       /* unknown functions */
	    {DRIVE_WIRE, CONTROLLER, 1, {0x63}, 1},
	    {DRIVE_WIRE, CONTROLLER, 2, {8, 0}, 1},
	    {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 7, 0, 1}, 2}, /* nothing to write there */
	    {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 1, 0, 9}, 3}, /* control is 0 to 3 */
	    {DRIVE_WIRE, CONTROLLER, 5, {5, 0, 0, 0xFF, 0}, 2},
	    {DRIVE_WIRE, CONTROLLER, 5, {5, 0, 0, 1, 0}, 3}, /* neither 0000 nor FF00 */
	    {DRIVE_WIRE, CONTROLLER, 8, {16, 0, 0, 0, 1, 2, 0, 0}, 0},
	    {DRIVE_WIRE, CONTROLLER, 8, {16, 0, 0, 0, 1, 4, 0, 0}, 3},  /* byte count */
	    {DRIVE_WIRE, CONTROLLER, 8, {16, 0, 0, 0, 2, 4, 0, 0}, 3},  /* cut */
	    {DRIVE_WIRE, CONTROLLER, 8, {16, 0, 0, 0, 124, 248, 0}, 3}, /* 123 are possible */
	    {BENCH_WIRE, FAULT_BOX, 5, {1, 0, 0, 0, 2}, 0},
	    {BENCH_WIRE, FAULT_BOX, 5, {5, 0, 1, 0, 0}, 0},
	    {BENCH_WIRE, FAULT_BOX, 7, {15, 0, 0, 0, 2, 1, 0}, 0},
	    {BENCH_WIRE, FAULT_BOX, 7, {15, 0, 0, 0, 3, 1, 0}, 2},
	    {BENCH_WIRE, FAULT_BOX, 7, {15, 0, 0, 0, 2, 2, 0}, 3},
	    {BENCH_WIRE, TRANSDUCER, 5, {4, 0, 0, 0, 4}, 0},
	    {BENCH_WIRE, TRANSDUCER, 5, {4, 0, 0, 0, 126}, 3},
	    /* gaps: forbidden */
	    {BENCH_WIRE, LOAD, 5, {3, 0, 0, 0, 3}, 0},
	    {BENCH_WIRE, LOAD, 5, {3, 0, 3, 0, 1}, 2},
	    {BENCH_WIRE, LOAD, 5, {3, 0, 0, 0, 5}, 2},
	    /* half of a value */
	    {BENCH_WIRE, LOAD, 5, {6, 0, 0, 0, 0}, 2},
	    {BENCH_WIRE, LOAD, 10, {16, 0, 1, 0, 2, 4, 0, 0, 0, 0}, 2},
	    {DRIVE_WIRE, 99, 5, {4, 0, 0, 0, 1}, 0x0B}, /* no such unit: a TCP gateway says so */
	};
	EXPECT(&fixture, questions);
	uint8_t reply[LINK_PDU_MOST];
	const struct question elsewhere = {BENCH_WIRE, CONTROLLER, 5, {4, 0, 0, 0, 1}, 0};
	assert_int_equal(ask(&fixture, &elsewhere, reply), 0); /* on a serial line nobody answers */
	finish(&fixture);
}

static unsigned register_at(const uint8_t *reply, int index)
{
	return (unsigned)reply[2 + 2 * index] << 8 | reply[3 + 2 * index];
}

static void values_come_in_the_coding_of_the_rig(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	start(&fixture, NULL);
	const struct question voltage = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 1, 0, 1}, 0};
	const struct question firmware = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 20, 0, 8}, 0};
	const struct question speed = {BENCH_WIRE, TRANSDUCER, 5, {4, 0, 0, 0, 2}, 0};
	assert_int_equal(ask(&fixture, &voltage, reply), 4);
	/* 310 V in steps of 0.1 V, within what a DC link does at rest. */
	assert_near(register_at(reply, 0) * 0.1, 310, 10, "V");
	assert_int_equal(ask(&fixture, &firmware, reply), 2 + 16);
	assert_memory_equal(reply + 2, "2.4.1\0\0\0", 8);
	assert_int_equal(ask(&fixture, &speed, reply), 6);
	uint32_t bits = register_at(reply, 0) << 16 | register_at(reply, 1);
	float rpm;
	memcpy(&rpm, &bits, sizeof rpm);
	assert_near((double)rpm, 0, 1, "rpm");
	finish(&fixture);
}

static double present(struct fixture *fixture, const char *signal)
{
	return model_read(served_model(fixture->served), model_signal_find(signal, strlen(signal)));
}

static void writes_reach_the_model_in_its_units(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	start(&fixture, NULL);
	/* speed_command 1500 rpm in steps of 0.2 rpm is 7500 (1D4C); control 1; 200 ms. */
	const struct question all = {
	    DRIVE_WIRE, CONTROLLER, 12, {16, 0, 0, 0, 3, 6, 0x1D, 0x4C, 0, 1, 0, 200}, 0};
	const uint8_t answer[] = {16, 0, 0, 0, 3};
	assert_int_equal(ask(&fixture, &all, reply), 5);
	assert_memory_equal(reply, answer, 5);
	assert_near(present(&fixture, "controller.speed_command"), 157.07963267948966, 1e-9, "rad/s");
	assert_near(present(&fixture, "controller.control"), 1, 0, "");
	assert_near(present(&fixture, "controller.watchdog_time"), 0.2, 1e-12, "s");
	/* 1.5 Nm as a float is 3FC0 0000 (computed with Python's struct); low word first. */
	const struct question torque = {BENCH_WIRE, LOAD, 10, {16, 0, 0, 0, 2, 4, 0, 0, 0x3F, 0xC0}, 0};
	expect(&fixture, &torque, 1);
	assert_near(present(&fixture, "load.torque_command"), 1.5, 0, "Nm");
	/* One bad value: nothing of the request is taken. */
	const struct question half = {DRIVE_WIRE, CONTROLLER, 10, {16, 0, 0, 0, 2, 4, 0, 0, 0, 9}, 3};
	expect(&fixture, &half, 1);
	assert_near(present(&fixture, "controller.speed_command"), 157.07963267948966, 1e-9, "rad/s");
	finish(&fixture);
}

static void a_mask_changes_single_bits(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	start(&fixture, NULL);
	/* V1.1b3, 6.16: (current AND and_mask) OR (or_mask AND NOT and_mask); its example makes 0017 of
	 * 0012 with the masks 00F2 and 0025. The load's watchdog time stands for the register. */
	const struct question before = {BENCH_WIRE, LOAD, 5, {6, 0, 4, 0, 0x12}, 0};
	const struct question mask = {BENCH_WIRE, LOAD, 7, {22, 0, 4, 0, 0xF2, 0, 0x25}, 0};
	const struct question after = {BENCH_WIRE, LOAD, 5, {3, 0, 4, 0, 1}, 0};
	assert_int_equal(ask(&fixture, &before, reply), 5);
	assert_int_equal(ask(&fixture, &mask, reply), 7);
	assert_memory_equal(reply, mask.pdu, 7);
	assert_int_equal(ask(&fixture, &after, reply), 4);
	assert_int_equal(register_at(reply, 0), 0x17);
	finish(&fixture);
}

static void function_23_writes_before_it_reads(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	start(&fixture, NULL);
	const struct question both = {
	    DRIVE_WIRE, CONTROLLER, 12, {23, 0, 0, 0, 3, 0, 2, 0, 1, 2, 0, 150}, 0};
	assert_int_equal(ask(&fixture, &both, reply), 8);
	assert_int_equal(reply[1], 6);
	assert_int_equal(register_at(reply, 2), 150);
	const struct question questions[] = {
	    {DRIVE_WIRE, CONTROLLER, 12, {23, 0, 9, 0, 3, 0, 2, 0, 1, 2, 0, 99}, 2}, /* the read */
	    {DRIVE_WIRE, CONTROLLER, 12, {23, 0, 0, 0, 41, 0, 2, 0, 1, 2, 0, 99}, 3},
	    {DRIVE_WIRE, CONTROLLER, 12, {23, 0, 0, 0, 3, 0, 2, 0, 122, 2, 0, 99}, 3},
	    {DRIVE_WIRE, CONTROLLER, 9, {23, 0, 0, 0, 3, 0, 2, 0, 1}, 3},
	};
	EXPECT(&fixture, questions);
	assert_near(present(&fixture, "controller.watchdog_time"), 0.15, 1e-12, "s"); /* none wrote */
	finish(&fixture);
}

static void devices_identify_themselves(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	start(&fixture, NULL);
	const struct question one = {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0E, 4, 2}, 0};
	const uint8_t version[] = {0x2B, 0x0E, 4, 0x81, 0, 0, 1, 2, 5, '2', '.', '4', '.', '1'};
	assert_int_equal(ask(&fixture, &one, reply), sizeof version);
	assert_memory_equal(reply, version, sizeof version);
	const struct question stream = {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0E, 1, 0}, 0};
	size_t length = ask(&fixture, &stream, reply);
	assert_int_equal(reply[6], 3); /* vendor, product, version */
	size_t at = 7;
	for (int object = 0; object < 3; object++) {
		assert_int_equal(reply[at], object);
		at += 2u + reply[at + 1];
	}
	assert_int_equal(at, length);
	const struct question serial = {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0E, 4, 4}, 0};
	length = ask(&fixture, &serial, reply); /* a channel of the rig lies there */
	assert_true(length > 9 && reply[8] == strlen("MODEL-000001"));
	assert_memory_equal(reply + 9, "MODEL-000001", strlen("MODEL-000001"));
	const struct question questions[] = {
	    {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0E, 4, 9}, 2}, /* no such object */
	    {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0E, 5, 0}, 3}, /* no such code */
	    {DRIVE_WIRE, CONTROLLER, 4, {0x2B, 0x0D, 1, 0}, 1},
	    {DRIVE_WIRE, CONTROLLER, 3, {0x2B, 0x0E, 1}, 3},
	};
	EXPECT(&fixture, questions);
	finish(&fixture);
}

static void only_good_requests_feed_the_watchdog(void **state)
{
	(void)state;
	struct fixture fixture;
	start(&fixture, NULL);
	struct model *model = served_model(fixture.served);
	const struct question arm = {DRIVE_WIRE, CONTROLLER, 10, {16, 0, 1, 0, 2, 4, 0, 1, 0, 200}, 0};
	const struct question read = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 8, 0, 1}, 0};
	const struct question bad = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 200, 0, 1}, 2};
	expect(&fixture, &arm, 1);
	for (int i = 0; i < 10; i++) {
		model_advance(model, model_now(model) + 100 * NS_PER_MS);
		expect(&fixture, &read, 1);
	}
	assert_near(present(&fixture, "controller.fault_code"), 0, 0, "");
	for (int i = 0; i < 4; i++) {
		model_advance(model, model_now(model) + 100 * NS_PER_MS);
		expect(&fixture, &bad, 1);
	}
	assert_near(present(&fixture, "controller.fault_code"), 9, 0, "");
	finish(&fixture);
}

static void defects_of_the_request_handling_are_there(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST], right[LINK_PDU_MOST];
	const struct question out = {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 1, 0, 9}, 2};
	const struct question bench = {BENCH_WIRE, LOAD, 5, {6, 0, 2, 0, 9}, 3};
	start(&fixture, "wrong-exception");
	expect(&fixture, &out, 1); /* 3 would be right */
	expect(&fixture, &bench, 1);
	finish(&fixture);

	const struct question enable = {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 1, 0, 3}, 0};
	start(&fixture, "writes-neighbour");
	expect(&fixture, &enable, 1);
	assert_near(present(&fixture, "controller.watchdog_time"), 0.003, 1e-12, "s");
	finish(&fixture);

	/* Another device's values of two registers are right. */
	const struct question speed = {BENCH_WIRE, TRANSDUCER, 5, {4, 0, 0, 0, 2}, 0};
	start(&fixture, NULL);
	assert_int_equal(ask(&fixture, &speed, right), 6);
	finish(&fixture);
	start(&fixture, "word-order-swapped");
	assert_int_equal(ask(&fixture, &speed, reply), 6);
	assert_memory_equal(reply, right, 6);
	finish(&fixture);

	const struct question position = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 13, 0, 2}, 0};
	start(&fixture, NULL);
	assert_int_equal(ask(&fixture, &position, right), 6);
	finish(&fixture);
	start(&fixture, "word-order-swapped");
	assert_int_equal(ask(&fixture, &position, reply), 6);
	assert_memory_equal(reply + 2, right + 4, 2);
	assert_memory_equal(reply + 4, right + 2, 2);
	finish(&fixture);
}

/* One answer of eight has the high word of the answer before it. */
static void a_torn_value_joins_two_instants(void **state)
{
	(void)state;
	struct fixture fixture;
	uint8_t reply[LINK_PDU_MOST];
	const struct question enable = {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 1, 0, 1}, 0};
	const struct question fast = {DRIVE_WIRE, CONTROLLER, 5, {6, 0, 0, 0x1D, 0x4C}, 0};
	const struct question position = {DRIVE_WIRE, CONTROLLER, 5, {4, 0, 13, 0, 2}, 0};
	unsigned before = 0, torn = 0;

	start(&fixture, "torn");
	struct model *model = served_model(fixture.served);
	model_advance(model, 10 * NS_PER_MS);
	expect(&fixture, &enable, 1);
	expect(&fixture, &fast, 1); /* 1500 rpm: 65.536 deg pass in 7.3 ms */
	model_advance(model, 500 * NS_PER_MS);
	for (int i = 1; i <= 32; i++) {
		model_advance(model, model_now(model) + 8 * NS_PER_MS);
		assert_int_equal(ask(&fixture, &position, reply), 6);
		unsigned high = (unsigned)reply[2] << 8 | reply[3];
		if (i > 1 && high == before)
			torn++;
		before = high;
	}
	assert_int_equal(torn, 4);
	finish(&fixture);
}

/* Loads the rig with one piece of its text replaced. */
static void load_changed(struct fixture *fixture, const char *from, const char *to)
{
	static char text[1 << 16], changed[1 << 16];
	char path[64];
	FILE *file = fopen(RIG, "r");
	assert_non_null(file);
	size_t length = fread(text, 1, sizeof text - 1, file);
	(void)fclose(file);
	text[length] = '\0';
	char *at = strstr(text, from);
	assert_non_null(at);
	(void)snprintf(changed, sizeof changed, "%.*s%s%s", (int)(at - text), text, to,
	               at + strlen(from));
	int fd = memfd_create("rig", MFD_CLOEXEC);
	assert_int_equal(write(fd, changed, strlen(changed)), strlen(changed));
	(void)snprintf(path, sizeof path, "/proc/self/fd/%d", fd);
	load(fixture, path);
	(void)close(fd);
}

static void what_is_not_served_is_named(void **state)
{
	(void)state;
	const struct {
		const char *from, *to, *message;
	} rows[] = {
	    {"    load_control: load.control\n", "",
	     "the model section does not say which signal is served on load_control"},
	    {"dc_voltage: controller.dc_voltage", "dc_voltage: controller.dc_voltge",
	     "the modelled bench has no signal 'controller.dc_voltge'; did you mean "
	     "'controller.dc_voltage'?"},
	    {"shaft_torque: shaft.torque", "shaft_torque: shaft.speed", "shaft_torque is in Nm"},
	    {"load_command: load.torque_command", "load_command: load.torque",
	     "load_command is a command, but the signal load.torque cannot be written"},
	    {"firmware_version: controller.firmware", "firmware_version: controller.life",
	     "firmware_version is text, but the signal controller.life is a number"},
	    {"parameters: {inertia:", "parameters: {inertja:", "inertja"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct fixture fixture;
		struct err err = {0};
		load_changed(&fixture, rows[i].from, rows[i].to);
		int rc = served_new(fixture.rig, 1, 0, &fixture.faults, &fixture.served, &err);
		assert_int_equal(rc, 0);
		assert_null(fixture.served);
		assert_true(fixture.faults.count >= 1);
		if (!strstr(fixture.faults.items[0].message, rows[i].message))
			fail_msg("'%s' says nothing of '%s'", fixture.faults.items[0].message, rows[i].message);
		assert_true(fixture.faults.items[0].at.line > 1);
		finish(&fixture);
	}
}

static void random_requests_never_break_the_bounds(void **state)
{
	(void)state;
	struct fixture fixture;
	uint32_t random = 1;
	start(&fixture, NULL);
	for (int i = 0; i < 100000; i++) {
		uint8_t pdu[LINK_PDU_MOST], reply[LINK_PDU_MOST];
		size_t length = 0;
		for (; length < sizeof pdu; length++) {
			random = random * 1664525u + 1013904223u;
			/* Small numbers, so that many of them are addresses and counts of the map. */
			pdu[length] = (uint8_t)((random >> 24) >> (random >> 8 & 7));
			if ((random >> 16 & 31) == 0)
				break;
		}
		length = length == 0 ? 1 : length;
		uint8_t unit = (uint8_t)(1 + random % 6);
		size_t got =
		    served_answer(fixture.served, (int)(random >> 12 & 1), unit, pdu, length, reply);
		assert_in_range(got, 0, LINK_PDU_MOST);
		if (got > 0)
			assert_int_equal(reply[0] & 0x7F, pdu[0] & 0x7F);
	}
	finish(&fixture);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_map_answers_what_it_has_and_refuses_the_rest),
	    cmocka_unit_test(values_come_in_the_coding_of_the_rig),
	    cmocka_unit_test(writes_reach_the_model_in_its_units),
	    cmocka_unit_test(a_mask_changes_single_bits),
	    cmocka_unit_test(function_23_writes_before_it_reads),
	    cmocka_unit_test(devices_identify_themselves),
	    cmocka_unit_test(only_good_requests_feed_the_watchdog),
	    cmocka_unit_test(defects_of_the_request_handling_are_there),
	    cmocka_unit_test(a_torn_value_joins_two_instants),
	    cmocka_unit_test(what_is_not_served_is_named),
	    cmocka_unit_test(random_requests_never_break_the_bounds),
	};
	return RUN_GROUP(tests);
}
