/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus RTU of the served bench, on a pseudo terminal that stands for the
 * serial line. A request of a known function ends with its length, any other
 * with silence; what does not end with its CRC is dropped without an answer, as
 * Modbus over Serial Line V1.02 demands. A pty has no bit rate: replies come
 * at once, faster than on a wire.
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

int server_rtu_open(struct served_link *link, const struct link_config *config, struct err *reterr)
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
	struct timing timing = timing_rtu(config->baud > 0 ? config->baud : 115200, 11);
	link->silence_ns = timing_t35_ns(&timing);
	if (link->silence_ns < SILENCE_LEAST_NS)
		link->silence_ns = SILENCE_LEAST_NS;
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

static void answer(struct server *server, int index, size_t length)
{
	struct served_link *link = &server->links[index];
	uint8_t adu[RTU_ADU_MOST];
	(void)server_advance(server);
	size_t reply =
	    served_answer(server->served, index, link->bytes[0], link->bytes + 1, length - 3, adu + 1);
	if (reply == 0)
		return;
	adu[0] = link->bytes[0];
	uint16_t crc = pdu_crc(adu, reply + 1);
	adu[reply + 1] = (uint8_t)crc;
	adu[reply + 2] = (uint8_t)(crc >> 8);
	/* A line that takes nothing loses the frame; the client sees a timeout, as on a wire. */
	if (write(link->master, adu, reply + 3) < 0)
		link->length = 0;
}

void server_rtu_receive(struct server *server, int index)
{
	struct served_link *link = &server->links[index];
	ssize_t got = read(link->master, link->bytes + link->length, sizeof link->bytes - link->length);
	if (got <= 0)
		return;
	link->length += (size_t)got;
	link->last_byte_ns = waiting_now();
	size_t length = request_length(link->bytes, link->length);
	while (length > 0 && link->length >= length && crc_fits(link->bytes, length)) {
		answer(server, index, length);
		link->length = link->length > length ? link->length - length : 0;
		memmove(link->bytes, link->bytes + length, link->length);
		length = request_length(link->bytes, link->length);
	}
	if (link->length == sizeof link->bytes)
		link->length = 0; /* noise without an end */
}

int64_t server_rtu_silence(struct server *server, int index)
{
	struct served_link *link = &server->links[index];
	if (link->length == 0)
		return INT64_MAX;
	int64_t end_ns = link->last_byte_ns + link->silence_ns;
	if (waiting_now() < end_ns)
		return end_ns;
	if (crc_fits(link->bytes, link->length))
		answer(server, index, link->length);
	link->length = 0;
	return INT64_MAX;
}
