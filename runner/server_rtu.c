/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus RTU of the served bench, on a pseudo terminal that stands for the
 * serial line. A request of a known function ends with its length, any other
 * with silence; what does not end with its CRC is dropped without an answer, as
 * Modbus over Serial Line V1.02 demands.
 *
 * A pty has no bit rate, so the server keeps one: a request counts as complete
 * when its last bit would have come, t3.5 of silence follows before the device
 * looks at it, and the reply is written no faster than a line carries it, in
 * pieces as a UART's buffer hands them over, the last byte exactly at its time.
 * While it answers the device hears nothing, as on two wires. Writing each byte
 * at its own time was rejected: at 921600 baud that is every 12 us, and only the
 * last one decides when a client has the reply.
 */
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <termios.h>
#include <unistd.h>

#include "pdu.h"
#include "server_inner.h"
#include "timing.h"
#include "waiting.h"

/* A pty hands over what was written piece by piece when the machine is busy. */
#define SILENCE_LEAST_NS INT64_C(5000000)
#define PIECE_NS         INT64_C(1000000)

static void set_pace(struct served_link *link, const struct link_config *config, int baud)
{
	const int rig_baud = config->baud > 0 ? config->baud : 115200;
	const int bits = config->baud > 0 ? 1 + 8 + (config->parity != PARITY_NONE) +
	                                        (config->stop_bits == 2 ? 2 : 1)
	                                  : 11;
	struct timing timing = timing_rtu(baud > 0 ? baud : rig_baud, bits);
	link->t35_ns = timing_t35_ns(&timing);
	link->silence_ns = link->t35_ns > SILENCE_LEAST_NS ? link->t35_ns : SILENCE_LEAST_NS;
	link->character_ns = baud == 0 ? 0 : INT64_C(1000000000) * bits / timing.baud;
}

int server_rtu_open(struct served_link *link, const struct link_config *config, int baud,
                    struct err *reterr)
{
	char path[100], text[128];
	struct termios raw;

	link->master = posix_openpt(O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
	if (link->master < 0 || grantpt(link->master) < 0 || unlockpt(link->master) < 0 ||
	    ptsname_r(link->master, path, sizeof path) != 0)
		return err_set(reterr, ERR_LINK, "no pseudo terminal: %s",
		               strerror_r(errno, text, sizeof text));
	link->slave = open(path, O_RDWR | O_NOCTTY | O_CLOEXEC);
	if (link->slave < 0 || tcgetattr(link->slave, &raw) < 0)
		return err_set(reterr, ERR_LINK, "%s: %s", path, strerror_r(errno, text, sizeof text));
	cfmakeraw(&raw); /* no echo before the client has set it up */
	(void)tcsetattr(link->slave, TCSANOW, &raw);
	set_pace(link, config, baud);
	(void)snprintf(link->address, sizeof link->address, "rtu:%s", path);
	return 0;
}

/* Length of the request frame that begins in bytes; 0: more is needed, or only silence tells. */
static size_t request_length(const uint8_t *bytes, size_t known)
{
	if (known < 2)
		return 0;
	switch (bytes[1]) {
	case LINK_READ_COILS:
	case LINK_READ_DISCRETE_INPUTS:
	case LINK_READ_HOLDING_REGISTERS:
	case LINK_READ_INPUT_REGISTERS:
	case LINK_WRITE_COIL:
	case LINK_WRITE_REGISTER:
		return 8;
	case LINK_WRITE_COILS:
	case LINK_WRITE_REGISTERS:
		return known < 7 ? 0 : 9u + bytes[6];
	case LINK_MASK_WRITE:
		return 10;
	case 23: /* read and write */
		return known < 11 ? 0 : 13u + bytes[10];
	case LINK_IDENTIFY:
		return 7;
	default:
		return 0;
	}
}

static bool crc_fits(const uint8_t *bytes, size_t length)
{
	if (length < 4)
		return false;
	uint16_t crc = pdu_crc(bytes, length - 2);
	return bytes[length - 2] == (crc & 0xFF) && bytes[length - 1] == crc >> 8;
}

/* Writes what of the reply has come over the line by now. Returns when to go on, or INT64_MAX. */
static int64_t send_due(struct served_link *link)
{
	int64_t now_ns = waiting_now();
	size_t due = link->out_length;
	if (link->character_ns > 0) {
		int64_t whole = now_ns < link->out_ns ? 0 : (now_ns - link->out_ns) / link->character_ns;
		due = (size_t)whole < link->out_length ? (size_t)whole : link->out_length;
	}
	/* A line that takes nothing loses the frame; the client sees a timeout, as on a wire. */
	if (due > link->out_done && write(link->master, link->out + link->out_done,
	                                  due - link->out_done) != (ssize_t)(due - link->out_done))
		due = link->out_length;
	link->out_done = due;
	if (due == link->out_length) {
		link->out_length = 0;
		return INT64_MAX;
	}
	int64_t last_ns = link->out_ns + (int64_t)link->out_length * link->character_ns;
	return last_ns < now_ns + PIECE_NS ? last_ns : now_ns + PIECE_NS;
}

/* The device looks at the first `length` bytes, and its reply begins. */
static void answer(struct server *server, int index, size_t length)
{
	struct served_link *link = &server->links[index];
	(void)server_advance(server);
	size_t reply = served_answer(server->served, index, link->bytes[0], link->bytes + 1, length - 3,
	                             link->out + 1);
	if (reply == 0)
		return;
	link->out[0] = link->bytes[0];
	uint16_t crc = pdu_crc(link->out, reply + 1);
	link->out[reply + 1] = (uint8_t)crc;
	link->out[reply + 2] = (uint8_t)(crc >> 8);
	link->out_length = reply + 3;
	link->out_done = 0;
	link->out_ns = waiting_now();
	if (link->character_ns > 0 && link->answer_ns > 0)
		link->out_ns = link->answer_ns; /* a late wake must not make the line slower */
	(void)send_due(link);
}

static void drop_front(struct served_link *link, size_t length)
{
	link->length = link->length > length ? link->length - length : 0;
	memmove(link->bytes, link->bytes + length, link->length);
}

void server_rtu_receive(struct server *server, int index)
{
	struct served_link *link = &server->links[index];
	uint8_t unheard[RTU_ADU_MOST];
	ssize_t got;
	if (link->request_length > 0 || link->out_length > 0) {
		got = read(link->master, unheard, sizeof unheard);
		return;
	}
	got = read(link->master, link->bytes + link->length, sizeof link->bytes - link->length);
	if (got <= 0)
		return;
	if (link->length == 0)
		link->first_byte_ns = waiting_now();
	link->length += (size_t)got;
	link->last_byte_ns = waiting_now();
	size_t length = request_length(link->bytes, link->length);
	while (length > 0 && link->length >= length && crc_fits(link->bytes, length)) {
		if (link->character_ns > 0) {
			int64_t over_ns = link->first_byte_ns + (int64_t)length * link->character_ns;
			over_ns = over_ns > link->last_byte_ns ? over_ns : link->last_byte_ns;
			link->request_length = length;
			link->answer_ns = over_ns + link->t35_ns;
			return;
		}
		answer(server, index, length);
		drop_front(link, length);
		length = request_length(link->bytes, link->length);
	}
	if (link->length == sizeof link->bytes)
		link->length = 0; /* noise without an end */
}

int64_t server_rtu_due(struct server *server, int index)
{
	struct served_link *link = &server->links[index];
	if (link->out_length > 0)
		return send_due(link);
	if (link->request_length > 0) {
		if (waiting_now() < link->answer_ns)
			return link->answer_ns;
		answer(server, index, link->request_length);
		link->request_length = 0;
		link->length = 0; /* nothing follows within t3.5 that would be a frame */
		return link->out_length > 0 ? send_due(link) : INT64_MAX;
	}
	if (link->length == 0)
		return INT64_MAX;
	int64_t end_ns = link->last_byte_ns + link->silence_ns;
	if (waiting_now() < end_ns)
		return end_ns;
	link->answer_ns = 0;
	if (crc_fits(link->bytes, link->length))
		answer(server, index, link->length);
	link->length = 0;
	return link->out_length > 0 ? send_due(link) : INT64_MAX;
}
