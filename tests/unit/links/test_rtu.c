/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The RTU link on one side of a pseudo terminal, a scripted peer on the other.
 * Frames with their checksums are those of Modbus over Serial Line V1.02 and
 * of public test suites; the others get theirs from pdu_crc(), which
 * test_pdu.c holds against published values.
 */
#include "near.h"

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <termios.h>

#include "link.h"
#include "pdu.h"
#include "scripted_peer.h"
#include "waiting.h"

#define MS INT64_C(1000000)

static int64_t now_ns(void *context)
{
	(void)context;
	return waiting_now();
}

static const struct link_request read_one = {
    .unit = 1, .function = LINK_READ_INPUT_REGISTERS, .address = 8, .count = 1};

static enum link_status transact(struct link *link, const struct link_request *request,
                                 struct link_reply *reply)
{
	struct err err = {0};
	int64_t now = waiting_now();
	assert_int_equal(link_begin(link, request, now, &err), 0);
	assert_true(link_end(link, now, reply) <= now);
	return reply->status;
}

/* A terminal pair; the slave is held, so that the master sees no hang-up. */
struct line {
	int master, slave;
	char path[100];
};

static void line_open(struct line *line)
{
	struct termios raw;
	line->master = posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
	assert_true(line->master >= 0);
	assert_int_equal(grantpt(line->master), 0);
	assert_int_equal(unlockpt(line->master), 0);
	assert_int_equal(ptsname_r(line->master, line->path, sizeof line->path), 0);
	line->slave = open(line->path, O_RDWR | O_NOCTTY | O_CLOEXEC);
	assert_true(line->slave >= 0);
	assert_int_equal(tcgetattr(line->slave, &raw), 0);
	cfmakeraw(&raw);
	assert_int_equal(tcsetattr(line->slave, TCSANOW, &raw), 0);
}

static void line_close(struct line *line)
{
	(void)close(line->slave);
	(void)close(line->master);
}

static struct link *new_link(const char *path, int64_t timeout_ns)
{
	const struct link_config config = {.serial_path = path,
	                                   .baud = 115200,
	                                   .parity = PARITY_EVEN,
	                                   .stop_bits = 1,
	                                   .reply_timeout_ns = timeout_ns,
	                                   .clock = now_ns};
	struct link *link;
	struct err err = {0};
	assert_int_equal(link_rtu_new(&config, &link, &err), 0);
	return link;
}

struct wired {
	struct line line;
	struct peer peer;
	struct link *link;
};

/* The link is open before the script begins: opening throws away what came before. */
static void start(struct wired *wired, void (*script)(struct peer *), int64_t timeout_ns)
{
	struct err err = {0};
	memset(wired, 0, sizeof *wired);
	line_open(&wired->line);
	wired->link = new_link(wired->line.path, timeout_ns);
	assert_int_equal(link_open(wired->link, &err), 0);
	wired->peer.fd = wired->line.master;
	wired->peer.context = wired->link;
	peer_start(&wired->peer, script);
}

static void finish(struct wired *wired)
{
	peer_join(&wired->peer);
	link_release(wired->link);
	line_close(&wired->line);
	assert_int_equal(wired->peer.wrong, 0);
}

/* ---- pieces of scripts ------------------------------------------------- */

static void take_read(struct peer *peer)
{
	peer->last_length = peer_read(peer, peer->last, 8) ? 8 : 0;
}

static size_t add_crc(unsigned char *frame, size_t length)
{
	uint16_t crc = pdu_crc(frame, length);
	frame[length] = (unsigned char)crc;
	frame[length + 1] = (unsigned char)(crc >> 8);
	return length + 2;
}

static size_t make_value(unsigned char *frame, unsigned value)
{
	const unsigned char head[] = {1, LINK_READ_INPUT_REGISTERS, 2, (unsigned char)(value >> 8),
	                              (unsigned char)value};
	memcpy(frame, head, sizeof head);
	return add_crc(frame, sizeof head);
}

static void answer_value(struct peer *peer, unsigned value)
{
	unsigned char frame[16];
	peer_send(peer, frame, make_value(frame, value));
}

/* ---- the good case ----------------------------------------------------- */

static void script_published(struct peer *peer)
{
	/* 01 83 02 C0 F1: the exception of public test suites, for unit 1. */
	static const unsigned char refusal[] = {0x01, 0x83, 0x02, 0xC0, 0xF1};
	take_read(peer);
	peer_send(peer, refusal, sizeof refusal);
}

static void frames_carry_the_published_checksums(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	const struct link_request request = {
	    .unit = 1, .function = LINK_READ_HOLDING_REGISTERS, .address = 0x6B, .count = 3};
	const unsigned char expected[] = {0x01, 0x03, 0x00, 0x6B, 0x00, 0x03, 0x74, 0x17};
	start(&wired, script_published, 20000 * MS);
	assert_int_equal(transact(wired.link, &request, &reply), LINK_EXCEPTION);
	assert_int_equal(reply.exception, 2);
	finish(&wired);
	assert_memory_equal(wired.peer.last, expected, sizeof expected);
}

static void script_values(struct peer *peer)
{
	for (unsigned value = 0; value < 50; value++) {
		unsigned char frame[16];
		take_read(peer);
		size_t length = make_value(frame, value);
		for (size_t i = 0; i < length; i++)
			peer_send(peer, frame + i, 1);
	}
}

static void values_come_one_after_another(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_values, 20000 * MS);
	int64_t last_ns = 0;
	for (unsigned value = 0; value < 50; value++) {
		assert_int_equal(transact(wired.link, &read_one, &reply), LINK_OK);
		assert_int_equal(reply.words[0], value);
		if (value > 0) /* t3.5 above 19200 baud is 1.750 ms */
			assert_true(reply.sent_ns - last_ns >= 1750000 - 1);
		last_ns = reply.received_ns;
	}
	finish(&wired);
}

static void script_odd(struct peer *peer)
{
	unsigned char object[32] = {1,    0x2B, 0x0E, 0x04, 0x81, 0,   0,  1,
	                            0x02, 5,    'V',  '2',  '.',  '1', '1'};
	unsigned char odd[8] = {1, 0x63, 7};
	if (peer_read(peer, peer->last, 7)) /* unit, 2B 0E 04 02, CRC */
		peer_send(peer, object, add_crc(object, 15));
	if (peer_read(peer, peer->last, 5)) /* unit, 63 01, CRC */
		peer_send(peer, odd, add_crc(odd, 3));
}

static void identification_and_unknown_functions_are_read_whole(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	const struct link_request identify = {.unit = 1, .function = LINK_IDENTIFY, .address = 2};
	const struct link_request raw = {
	    .unit = 1, .function = LINK_RAW, .pdu = {0x63, 1}, .pdu_length = 2};
	start(&wired, script_odd, 20000 * MS);
	assert_int_equal(transact(wired.link, &identify, &reply), LINK_OK);
	assert_string_equal(reply.text, "V2.11");
	assert_int_equal(transact(wired.link, &raw, &reply), LINK_OK); /* ends with silence */
	assert_int_equal(reply.pdu_length, 2);
	assert_int_equal(reply.pdu[1], 7);
	finish(&wired);
}

/* ---- late, doubled, broken --------------------------------------------- */

static void script_late(struct peer *peer)
{
	take_read(peer);
	peer_wait(peer, &peer->go); /* the client has given up */
	answer_value(peer, 1);
	(void)sem_post(&peer->told);
	take_read(peer);
	answer_value(peer, 2);
}

static void a_late_reply_is_gone_before_the_next_request(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_late, 400 * MS);
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_TIMEOUT);
	int64_t given_up_ns = reply.received_ns;
	(void)sem_post(&wired.peer.go);
	peer_wait(&wired.peer, &wired.peer.told);
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 2);
	assert_true(reply.sent_ns - given_up_ns >= 400 * MS); /* the quiet time */
	finish(&wired);
}

static void script_doubled(struct peer *peer)
{
	for (unsigned value = 1; value <= 4; value++) {
		unsigned char twice[32];
		take_read(peer);
		size_t length = make_value(twice, value);
		length += make_value(twice + length, value);
		peer_send(peer, twice, length);
	}
}

static void doubled_replies_never_shift_the_answers(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_doubled, 400 * MS);
	for (unsigned value = 1; value <= 4; value++) {
		assert_int_equal(transact(wired.link, &read_one, &reply), LINK_OK);
		assert_int_equal(reply.words[0], value);
	}
	finish(&wired);
}

static void script_broken(struct peer *peer)
{
	unsigned char frame[16];
	size_t length;

	take_read(peer); /* a byte of noise before the reply: no frame is found in it */
	frame[0] = 0x55;
	length = 1 + make_value(frame + 1, 3);
	peer_send(peer, frame, length);

	take_read(peer); /* a checksum that does not fit */
	length = make_value(frame, 3);
	frame[length - 1] ^= 1;
	peer_send(peer, frame, length);

	take_read(peer); /* another unit */
	(void)make_value(frame, 3);
	frame[0] = 2;
	peer_send(peer, frame, add_crc(frame, 5));

	take_read(peer); /* another function */
	(void)make_value(frame, 3);
	frame[1] = LINK_READ_HOLDING_REGISTERS;
	peer_send(peer, frame, add_crc(frame, 5));

	take_read(peer);
	answer_value(peer, 4);
}

static void broken_frames_are_garbled_and_do_not_spoil_the_next(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_broken, 400 * MS);
	for (int i = 0; i < 4; i++) {
		enum link_status status = transact(wired.link, &read_one, &reply);
		/* Noise moves the length, so that the end of the frame may be missed. */
		assert_true(status == LINK_GARBLED || (i == 0 && status == LINK_TIMEOUT));
		assert_int_equal(reply.words[0], 0);
	}
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 4);
	finish(&wired);
}

static void script_echo(struct peer *peer)
{
	take_read(peer);
	unsigned char both[32];
	memcpy(both, peer->last, 8);
	size_t length = 8 + make_value(both + 8, 6);
	peer_send(peer, both, length);
}

static void an_echoing_adapter_is_named(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_echo, 400 * MS);
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_GARBLED);
	assert_non_null(strstr(reply.message, "echo"));
	finish(&wired);
}

/* ---- the line ---------------------------------------------------------- */

static void script_silent(struct peer *peer)
{
	take_read(peer);
	link_interrupt(peer->context);
	take_read(peer);
	answer_value(peer, 9);
}

static void an_interrupt_breaks_off_a_blocked_read(void **state)
{
	(void)state;
	struct wired wired;
	struct link_reply reply;
	start(&wired, script_silent, 1500 * MS);
	/* Long enough to tell an interrupt from the timeout, and quiet time in between. */
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_STOPPED);
	assert_int_equal(transact(wired.link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 9);
	finish(&wired);
}

static void one_program_at_a_time_uses_a_line(void **state)
{
	(void)state;
	struct line line;
	struct err err = {0};
	line_open(&line);
	struct link *first = new_link(line.path, 100 * MS), *second = new_link(line.path, 100 * MS);
	assert_int_equal(link_open(first, &err), 0);
	assert_int_equal(link_open(second, &err), -1);
	assert_int_equal(err.code, ERR_LINK);
	link_close(first);
	err = (struct err){0};
	assert_int_equal(link_open(second, &err), 0);
	link_release(first);
	link_release(second);
	line_close(&line);
}

static void a_line_that_goes_away_is_lost(void **state)
{
	(void)state;
	struct line line;
	struct link_reply reply;
	struct err err = {0};
	line_open(&line);
	struct link *link = new_link(line.path, 20000 * MS);
	assert_int_equal(link_open(link, &err), 0);
	line_close(&line); /* like a pulled adapter */
	assert_int_equal(transact(link, &read_one, &reply), LINK_LOST);
	assert_int_equal(transact(link, &read_one, &reply), LINK_LOST);
	link_release(link);
}

static void what_a_serial_line_has_not_is_refused(void **state)
{
	(void)state;
	struct link_config config = {
	    .serial_path = "/dev/null", .baud = 12345, .reply_timeout_ns = MS, .clock = now_ns};
	struct link *link;
	struct err err = {0};
	assert_int_equal(link_rtu_new(&config, &link, &err), -1); /* the library would take 9600 */
	assert_int_equal(err.code, ERR_LINK);
	link = new_link("/dev/no-such-line", MS);
	err = (struct err){0};
	assert_int_equal(link_open(link, &err), -1);
	assert_int_equal(err.code, ERR_LINK);
	struct link_request broadcast = read_one;
	broadcast.unit = 0;
	assert_int_equal(link_begin(link, &broadcast, 0, &err), -1);
	broadcast.unit = 248;
	assert_int_equal(link_begin(link, &broadcast, 0, &err), -1);
	link_release(link);
}

static void a_timeout_below_the_bits_of_a_frame_is_explained(void **state)
{
	(void)state;
	struct line line;
	struct link_reply reply;
	line_open(&line);
	const struct link_config config = {.serial_path = line.path,
	                                   .baud = 9600,
	                                   .parity = PARITY_EVEN,
	                                   .reply_timeout_ns = 50 * MS,
	                                   .clock = now_ns};
	struct link *link;
	struct err err = {0};
	assert_int_equal(link_rtu_new(&config, &link, &err), 0);
	struct link_request large = read_one;
	large.count = 125;
	assert_int_equal(transact(link, &large, &reply), LINK_TIMEOUT);
	assert_non_null(strstr(reply.message, "at 9600 baud it takes"));
	link_release(link);
	line_close(&line);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(frames_carry_the_published_checksums),
	    cmocka_unit_test(values_come_one_after_another),
	    cmocka_unit_test(identification_and_unknown_functions_are_read_whole),
	    cmocka_unit_test(a_late_reply_is_gone_before_the_next_request),
	    cmocka_unit_test(doubled_replies_never_shift_the_answers),
	    cmocka_unit_test(broken_frames_are_garbled_and_do_not_spoil_the_next),
	    cmocka_unit_test(an_echoing_adapter_is_named),
	    cmocka_unit_test(an_interrupt_breaks_off_a_blocked_read),
	    cmocka_unit_test(one_program_at_a_time_uses_a_line),
	    cmocka_unit_test(a_line_that_goes_away_is_lost),
	    cmocka_unit_test(what_a_serial_line_has_not_is_refused),
	    cmocka_unit_test(a_timeout_below_the_bits_of_a_frame_is_explained),
	};
	return RUN_GROUP(tests);
}
