/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Any bytes on a serial line (a pty) after a request. Input: function (1),
 * count (1), then the bytes. As in fuzz_tcp.c the line answers when the link
 * asks its clock; the checksum is mended where the first byte says so, since
 * a search would not find one.
 */
#include <fcntl.h>
#include <string.h>
#include <termios.h>
#include <unistd.h>

#include "fuzz.h"
#include "link.h"
#include "pdu.h"

struct line {
	int master;
	char path[64];
	const uint8_t *data;
	size_t size;
	int64_t now_ns;
};

static int64_t clock_of(void *context)
{
	struct line *line = context;
	if (line->data)
		(void)!write(line->master, line->data, line->size);
	line->data = NULL;
	return line->now_ns += 1000;
}

static void open_line(struct line *line)
{
	struct termios raw;
	line->master = posix_openpt(O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
	demand(line->master >= 0 && grantpt(line->master) == 0 && unlockpt(line->master) == 0);
	demand(ptsname_r(line->master, line->path, sizeof line->path) == 0);
	/* Raw before the link has set it up, and open all the time. */
	int slave = open(line->path, O_RDWR | O_NOCTTY | O_CLOEXEC);
	demand(slave >= 0 && tcgetattr(slave, &raw) == 0);
	cfmakeraw(&raw);
	demand(tcsetattr(slave, TCSANOW, &raw) == 0);
}

static void drain(const struct line *line)
{
	uint8_t waste[512];
	while (read(line->master, waste, sizeof waste) > 0)
		;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct line line = {.master = -1};
	static struct link_reply reply;
	struct link *link = NULL;
	struct err err = {0};
	uint8_t bytes[600];
	if (size < 4 || size > 512)
		return 0;
	if (line.master < 0)
		open_line(&line);
	const struct link_config config = {.serial_path = line.path,
	                                   .baud = 115200,
	                                   .parity = PARITY_EVEN,
	                                   .stop_bits = 1,
	                                   .reply_timeout_ns = 2000000,
	                                   .clock = clock_of,
	                                   .clock_context = &line};
	struct link_request request = {.unit = 1,
	                               .function =
	                                   data[0] & 1 ? LINK_READ_INPUT_REGISTERS : LINK_IDENTIFY,
	                               .count = (uint16_t)(1 + data[1] % LINK_REGISTERS_MOST)};
	if (request.function == LINK_IDENTIFY)
		request.count = 0;
	size_t length = size - 2;
	memcpy(bytes, data + 2, length);
	if (data[0] & 2) {
		uint16_t crc = pdu_crc(bytes, length);
		bytes[length++] = (uint8_t)crc;
		bytes[length++] = (uint8_t)(crc >> 8);
	}
	demand(link_rtu_new(&config, &link, &err) == 0);
	demand(link_open(link, &err) == 0);
	line.data = bytes;
	line.size = length;
	demand(link_begin(link, &request, 0, &err) == 0);
	demand(link_end(link, 0, &reply) <= 0);
	line.data = NULL;
	demand(reply.status != LINK_LOST);
	demand(reply.status == LINK_OK || reply.status == LINK_EXCEPTION || reply.message[0]);
	fuzz_readable(reply.message);
	drain(&line);
	link_release(link);
	return 0;
}
