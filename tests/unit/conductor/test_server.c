/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The served bench in a thread of this process, asked by the project's own
 * links over TCP and over a pty, by libmodbus as a second implementation, and
 * by a bare socket that frames its requests oddly.
 */
#include "near.h"

#include <arpa/inet.h>
#include <errno.h>
#include <modbus/modbus.h>
#include <netinet/in.h>
#include <poll.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/eventfd.h>
#include <sys/socket.h>
#include <unistd.h>

#include "plan.h"
#include "server.h"
#include "waiting.h"

enum { PATIENCE_MS = 20000 };

struct bench {
	struct arena arena;
	struct faults faults;
	const struct rig *rig;
	struct served *served;
	struct server *server;
	pthread_t thread;
	int wake_fd;
	int rc;
};

static bool on_wake(void *context)
{
	(void)context;
	return true;
}

static void *serve(void *context)
{
	struct bench *bench = context;
	bench->rc = server_run(bench->server, bench->wake_fd, on_wake, NULL, bench);
	return NULL;
}

static int setup_line(void **state, const char *line)
{
	struct bench *bench = calloc(1, sizeof *bench);
	struct err err = {0};
	assert_non_null(bench);
	arena_init(&bench->arena, 0);
	assert_int_equal(rig_load(SOURCE_DIR "/tests/unit/rigs/served.yaml", &bench->arena,
	                          &bench->faults, &bench->rig, &err),
	                 0);
	assert_non_null(bench->rig);
	assert_int_equal(served_new(bench->rig, 1, 0, &bench->faults, &bench->served, &err), 0);
	assert_non_null(bench->served);
	assert_int_equal(server_new(bench->served, bench->rig, &bench->server, &err), 0);
	assert_int_equal(server_listen(bench->server, 0, "tcp:127.0.0.1:0", &err), 0);
	assert_int_equal(server_listen(bench->server, 1, line, &err), 0);
	bench->wake_fd = eventfd(0, EFD_CLOEXEC);
	assert_int_equal(pthread_create(&bench->thread, NULL, serve, bench), 0);
	*state = bench;
	return 0;
}

static int setup(void **state)
{
	return setup_line(state, "rtu");
}

static int setup_slow(void **state)
{
	return setup_line(state, "rtu:1200");
}

static int setup_unpaced(void **state)
{
	return setup_line(state, "rtu:0");
}

static int teardown(void **state)
{
	struct bench *bench = *state;
	(void)eventfd_write(bench->wake_fd, 1);
	(void)pthread_join(bench->thread, NULL);
	assert_int_equal(bench->rc, 0);
	server_release(bench->server);
	served_release(bench->served);
	arena_release(&bench->arena);
	(void)close(bench->wake_fd);
	free(bench);
	return 0;
}

static int64_t now_ns(void *context)
{
	(void)context;
	return waiting_now();
}

static uint16_t port_of(const struct bench *bench)
{
	const char *colon = strrchr(server_address(bench->server, 0), ':');
	return (uint16_t)strtoul(colon + 1, NULL, 10);
}

/* The project's own link to a link of the rig. */
static struct link *link_to(struct bench *bench, int index)
{
	struct link_config config = {.reply_timeout_ns = PATIENCE_MS * NS_PER_MS, .clock = now_ns};
	struct link *link;
	struct err err = {0};
	const char *address = server_address(bench->server, index);
	if (strncmp(address, "tcp:", 4) == 0) {
		config.tcp_host = "127.0.0.1";
		config.tcp_port = port_of(bench);
		assert_int_equal(link_tcp_new(&config, &link, &err), 0);
	} else {
		config.serial_path = address + strlen("rtu:");
		config.baud = 115200;
		config.parity = PARITY_EVEN;
		assert_int_equal(link_rtu_new(&config, &link, &err), 0);
	}
	if (link_open(link, &err) < 0)
		fail_msg("%s", err.message);
	return link;
}

static void transact(struct link *link, const struct link_request *request,
                     struct link_reply *reply)
{
	struct err err = {0};
	int64_t now = waiting_now();
	if (link_begin(link, request, now, &err) < 0)
		fail_msg("%s", err.message);
	assert_true(link_end(link, now, reply) <= now);
}

/* ---- own links --------------------------------------------------------- */

static double read_channel(struct bench *bench, struct link *link, const char *name)
{
	unsigned char needed[64] = {0};
	struct read_plan plan;
	struct link_request request;
	struct link_reply reply;
	struct err err = {0};
	int channel = rig_channel_find(bench->rig, name, strlen(name));
	assert_true(channel >= 0);
	needed[channel] = 1;
	assert_int_equal(plan_reads(bench->rig, needed, &bench->arena, &plan, &err), 0);
	assert_int_equal(plan.count, 1);
	block_request(bench->rig, &plan.blocks[0], &request);
	transact(link, &request, &reply);
	assert_int_equal(reply.status, LINK_OK);
	return block_value(bench->rig, &plan.blocks[0], channel, &reply);
}

static enum link_status command(struct bench *bench, struct link *link, const char *name,
                                double value)
{
	struct link_request request;
	struct link_reply reply;
	struct err err = {0};
	int channel = rig_channel_find(bench->rig, name, strlen(name));
	assert_true(channel >= 0);
	assert_int_equal(command_request(bench->rig, channel, value, NULL, &request, &err), 0);
	transact(link, &request, &reply);
	return reply.status;
}

static void the_drive_is_commanded_and_the_shaft_turns(void **state)
{
	struct bench *bench = *state;
	struct link *drive = link_to(bench, 0), *wire = link_to(bench, 1);
	double rpm = 0;
	assert_near(read_channel(bench, drive, "dc_voltage"), 310, 10, "V");
	assert_int_equal(command(bench, drive, "control", 1), LINK_OK);
	assert_int_equal(command(bench, drive, "speed_command", 600), LINK_OK);
	/* Seen by the controller over TCP and by the transducer over the serial line. */
	for (int i = 0; i < 2000 && !(fabs(rpm - 600) < 5); i++)
		rpm = read_channel(bench, wire, "bench_speed");
	assert_near(rpm, 600, 5, "rpm");
	assert_near(read_channel(bench, drive, "speed"), 600, 20, "rpm");
	assert_near(read_channel(bench, drive, "running"), 1, 0, "");
	assert_int_equal(command(bench, drive, "speed_command", 0), LINK_OK);
	assert_int_equal(command(bench, drive, "control", 0), LINK_OK);
	link_release(drive);
	link_release(wire);
}

static void values_of_two_registers_cross_the_serial_line(void **state)
{
	struct bench *bench = *state;
	struct link *wire = link_to(bench, 1);
	assert_int_equal(command(bench, wire, "load_command", -1.25), LINK_OK);
	assert_near(read_channel(bench, wire, "load_command"), -1.25, 0, "Nm");
	assert_int_equal(command(bench, wire, "encoder_open", 1), LINK_OK);
	assert_near(read_channel(bench, wire, "encoder_open"), 1, 0, "");
	assert_int_equal(command(bench, wire, "encoder_open", 0), LINK_OK);
	link_release(wire);
}

static void refusals_and_identification_come_over_both(void **state)
{
	struct bench *bench = *state;
	const struct {
		int link;
		struct link_request request;
		enum link_status status;
		int exception;
	} rows[] = {
	    {0, {.unit = 1, .function = LINK_RAW, .pdu = {0x63}, .pdu_length = 1}, LINK_EXCEPTION, 1},
	    {0,
	     {.unit = 1, .function = LINK_READ_INPUT_REGISTERS, .address = 900, .count = 1},
	     LINK_EXCEPTION,
	     2},
	    {0,
	     {.unit = 1, .function = LINK_RAW, .pdu = {4, 0, 0, 0, 126}, .pdu_length = 5},
	     LINK_EXCEPTION,
	     3},
	    {0, {.unit = 77, .function = LINK_READ_INPUT_REGISTERS, .count = 1}, LINK_EXCEPTION, 0x0B},
	    {0, {.unit = 1, .function = LINK_IDENTIFY, .address = 2}, LINK_OK, 0},
	    {1, {.unit = 3, .function = LINK_IDENTIFY, .address = 1}, LINK_OK, 0},
	    {1,
	     {.unit = 3, .function = LINK_RAW, .pdu = {0x63, 1}, .pdu_length = 2},
	     LINK_EXCEPTION,
	     1},
	    {1, {.unit = 2, .function = LINK_WRITE_REGISTER, .address = 9}, LINK_EXCEPTION, 2},
	    {1, {.unit = 2, .function = LINK_READ_HOLDING_REGISTERS, .count = 3}, LINK_OK, 0},
	};
	struct link *links[2] = {link_to(bench, 0), link_to(bench, 1)};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct link_reply reply;
		transact(links[rows[i].link], &rows[i].request, &reply);
		if (reply.status != rows[i].status || reply.exception != rows[i].exception)
			fail_msg("row %zu: status %d, exception %d: %s", i, (int)reply.status, reply.exception,
			         reply.message);
		if (rows[i].request.function == LINK_IDENTIFY)
			assert_string_equal(reply.text, rows[i].link ? "transducer" : "2.4.1");
	}
	link_release(links[0]);
	link_release(links[1]);
}

static void an_absent_unit_on_the_serial_line_is_silent(void **state)
{
	struct bench *bench = *state;
	struct link_config config = {.serial_path = server_address(bench->server, 1) + strlen("rtu:"),
	                             .baud = 115200,
	                             .reply_timeout_ns = 100 * NS_PER_MS,
	                             .clock = now_ns};
	struct link *link;
	struct link_reply reply;
	struct err err = {0};
	const struct link_request absent = {
	    .unit = 99, .function = LINK_READ_INPUT_REGISTERS, .count = 1};
	assert_int_equal(link_rtu_new(&config, &link, &err), 0);
	transact(link, &absent, &reply);
	assert_int_equal(reply.status, LINK_TIMEOUT);
	link_release(link);
}

static void a_reply_takes_the_time_of_its_bits(void **state)
{
	struct link *link = link_to(*state, 1);
	static struct link_reply reply;
	const struct link_request request = {
	    .unit = 3, .function = LINK_READ_INPUT_REGISTERS, .count = 4};
	transact(link, &request, &reply);
	assert_int_equal(reply.status, LINK_OK);
	/* 8 characters there, 3.5 of silence, 13 back, of 11 bits (Modbus over Serial Line
	 * V1.02, 2.5.1). */
	double least = 24.5 * 11 / 1200;
	assert_true((double)(reply.received_ns - reply.sent_ns) / 1e9 >= least);
	link_release(link);
}

static void a_line_that_is_not_slowed_answers_too(void **state)
{
	struct link *link = link_to(*state, 1);
	static struct link_reply reply;
	const struct link_request request = {
	    .unit = 3, .function = LINK_READ_INPUT_REGISTERS, .count = 4};
	for (int i = 0; i < 5; i++) {
		transact(link, &request, &reply);
		assert_int_equal(reply.status, LINK_OK);
	}
	link_release(link);
}

/* ---- other clients ----------------------------------------------------- */

static void another_implementation_reads_and_writes(void **state)
{
	struct bench *bench = *state;
	uint16_t words[8] = {0};
	modbus_t *other = modbus_new_tcp("127.0.0.1", port_of(bench));
	assert_non_null(other);
	(void)modbus_set_response_timeout(other, PATIENCE_MS / 1000, 0);
	(void)modbus_set_slave(other, 1);
	assert_int_equal(modbus_connect(other), 0);
	assert_int_equal(modbus_read_input_registers(other, 20, 8, words), 8);
	assert_int_equal(words[0], 0x322E); /* "2." */
	assert_int_equal(modbus_write_register(other, 2, 321), 1);
	assert_int_equal(modbus_read_registers(other, 2, 1, words), 1);
	assert_int_equal(words[0], 321);
	const uint16_t both[2] = {0, 0};
	assert_int_equal(modbus_write_registers(other, 1, 2, both), 2);
	assert_int_equal(modbus_mask_write_register(other, 2, 0xFFF0, 0x0005), 1);
	assert_int_equal(modbus_read_registers(other, 2, 1, words), 1);
	assert_int_equal(words[0], 5);
	assert_int_equal(modbus_read_input_registers(other, 900, 1, words), -1);
	assert_int_equal(errno, EMBXILADD);
	assert_int_equal(modbus_write_register(other, 1, 7), -1);
	assert_int_equal(errno, EMBXILVAL);
	modbus_close(other);
	modbus_free(other);
}

static int bare_connection(const struct bench *bench)
{
	struct sockaddr_in address = {.sin_family = AF_INET,
	                              .sin_addr.s_addr = htonl(INADDR_LOOPBACK),
	                              .sin_port = htons(port_of(bench))};
	int fd = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
	assert_int_equal(connect(fd, (struct sockaddr *)&address, sizeof address), 0);
	return fd;
}

/* Reads exactly `length` bytes, or fewer where the server closes first. */
static size_t read_all(int fd, uint8_t *at, size_t length)
{
	size_t have = 0;
	while (have < length) {
		struct pollfd poller = {.fd = fd, .events = POLLIN};
		assert_int_equal(poll(&poller, 1, PATIENCE_MS), 1);
		ssize_t got = read(fd, at + have, length - have);
		if (got <= 0)
			break;
		have += (size_t)got;
	}
	return have;
}

static void requests_in_odd_segments_are_each_answered(void **state)
{
	struct bench *bench = *state;
	/* Three reads of one register: two and a half in one segment, then the rest. */
	const uint8_t requests[36] = {0, 1, 0, 0, 0, 6, 1, 4, 0, 8, 0, 1, /* fault_code */
	                              0, 2, 0, 0, 0, 6, 1, 4, 0, 8, 0, 1,
	                              0, 3, 0, 0, 0, 6, 1, 4, 0, 8, 0, 1};
	uint8_t replies[33];
	int fd = bare_connection(bench);
	assert_int_equal(write(fd, requests, 30), 30);
	assert_int_equal(read_all(fd, replies, 22), 22);
	assert_int_equal(write(fd, requests + 30, 6), 6);
	assert_int_equal(read_all(fd, replies + 22, 11), 11);
	for (int i = 0; i < 3; i++) {
		const uint8_t expected[11] = {0, (uint8_t)(i + 1), 0, 0, 0, 5, 1, 4, 2, 0, 0};
		assert_memory_equal(replies + (ptrdiff_t)11 * i, expected, sizeof expected);
	}
	(void)close(fd);
}

static void what_is_not_modbus_closes_the_connection(void **state)
{
	struct bench *bench = *state;
	const uint8_t wrong[][12] = {
	    {0, 1, 0, 1, 0, 6, 1, 4, 0, 8, 0, 1}, /* protocol 1 */
	    {0, 1, 0, 0, 0, 1, 1, 4, 0, 8, 0, 1}, /* length without a function */
	    {0, 1, 0, 0, 1, 0, 1, 4, 0, 8, 0, 1}, /* length 256 */
	    {'G', 'E', 'T', ' ', '/', ' ', 'H', 'T', 'T', 'P', '/', '1'},
	};
	for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
		uint8_t reply[16];
		int fd = bare_connection(bench);
		assert_int_equal(write(fd, wrong[i], 12), 12);
		assert_int_equal(read_all(fd, reply, sizeof reply), 0);
		(void)close(fd);
	}
	int fd = bare_connection(bench); /* others are still served */
	const uint8_t good[12] = {0, 9, 0, 0, 0, 6, 1, 4, 0, 8, 0, 1};
	uint8_t reply[11];
	assert_int_equal(write(fd, good, sizeof good), sizeof good);
	assert_int_equal(read_all(fd, reply, sizeof reply), sizeof reply);
	(void)close(fd);
}

static void too_many_clients_are_turned_away(void **state)
{
	struct bench *bench = *state;
	int fds[SERVER_CLIENTS_MOST + 1];
	const uint8_t ask[12] = {0, 1, 0, 0, 0, 6, 1, 4, 0, 8, 0, 1};
	uint8_t reply[11];
	for (int i = 0; i <= SERVER_CLIENTS_MOST; i++) {
		fds[i] = bare_connection(bench);
		(void)send(fds[i], ask, sizeof ask, MSG_NOSIGNAL);
		size_t got = read_all(fds[i], reply, sizeof reply);
		assert_int_equal(got, i < SERVER_CLIENTS_MOST ? sizeof reply : 0);
	}
	for (int i = 0; i <= SERVER_CLIENTS_MOST; i++)
		(void)close(fds[i]);
}

static void wrong_addresses_are_refused(void **state)
{
	(void)state;
	struct bench *bench = *state;
	struct server *server;
	struct err err = {0};
	const char *wrong[] = {"127.0.0.1:0",         "tcp:127.0.0.1",   "tcp::0",
	                       "tcp:127.0.0.1:70000", "tcp:127.0.0.1:x", "rtu:/dev/x",
	                       "udp:127.0.0.1:0"};
	assert_int_equal(server_new(bench->served, bench->rig, &server, &err), 0);
	for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
		err = (struct err){0};
		assert_int_equal(server_listen(server, 0, wrong[i], &err), -1);
		assert_int_equal(err.code, ERR_USAGE);
	}
	server_release(server);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(the_drive_is_commanded_and_the_shaft_turns, setup,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(values_of_two_registers_cross_the_serial_line, setup,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(refusals_and_identification_come_over_both, setup,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(an_absent_unit_on_the_serial_line_is_silent, setup,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(a_reply_takes_the_time_of_its_bits, setup_slow, teardown),
	    cmocka_unit_test_setup_teardown(a_line_that_is_not_slowed_answers_too, setup_unpaced,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(another_implementation_reads_and_writes, setup, teardown),
	    cmocka_unit_test_setup_teardown(requests_in_odd_segments_are_each_answered, setup,
	                                    teardown),
	    cmocka_unit_test_setup_teardown(what_is_not_modbus_closes_the_connection, setup, teardown),
	    cmocka_unit_test_setup_teardown(too_many_clients_are_turned_away, setup, teardown),
	    cmocka_unit_test_setup_teardown(wrong_addresses_are_refused, setup, teardown),
	};
	return RUN_GROUP(tests);
}
