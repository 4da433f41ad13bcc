/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus RTU on a serial line.
 *
 * libmodbus opens and sets up the port, sends (with its CRC) and flushes, with
 * error recovery off. Replies are read here: the end of a frame is known from
 * its function and length, or from silence where the function is unknown, and
 * the CRC, the unit and every length must fit.
 *
 * RTU frames carry no transaction number, so a late or doubled reply looks
 * like a good one. What can be done is done: the input is flushed before each
 * request, frames are at least t3.5 apart, and after a timeout or a broken
 * frame the line must first have been silent for QUIET_NS (or a whole reply
 * timeout, if longer). What remains: a device whose reply comes later than
 * that. Its reply timeout must be set above its worst reply time, and a life
 * counter in every block shows a repeated image.
 *
 * Rejected: modbus_receive_confirmation() (leaves bytes of function 43 behind,
 * cannot be broken off) and the library's recovery modes (they sleep whole
 * timeouts, and one loops for ever). Threads: as in tcp.c.
 */
#include <errno.h>
#include <fcntl.h>
#include <linux/serial.h>
#include <modbus/modbus.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <sys/ioctl.h>
#include <unistd.h>

#include "pdu.h"
#include "timing.h"
#include "waiting.h"

enum {
	CRC_BYTES = 2,
	ADU_MOST = 1 + LINK_PDU_MOST + CRC_BYTES,
	UNIT_MOST = 247, /* 248 to 255 are reserved, 0 is a broadcast */
};
/* Long enough that replies delayed by drivers and gateways are over: measured
 * with one late reply, none of the later reads took it. */
#define QUIET_NS INT64_C(100000000)
/* A frame of unknown length has ended after this silence: adapters hand over
 * what they receive in pieces up to 16 ms apart. */
#define ENDED_NS INT64_C(25000000)

struct rtu_link {
	struct link link;
	struct waking waking;
	modbus_t *port;
	bool is_open, busy;
	int64_t timeout_ns, t35_ns;
	struct timing timing;
	int64_t free_from_ns;  /* monotonic: the gap after the last frame is over */
	int64_t quiet_from_ns; /* monotonic: to be silent until then; 0: not demanded */
	struct link_request request;
	int64_t begun_ns;
	uint8_t frame[ADU_MOST + 1];
	size_t frame_length;
};

static struct rtu_link *rtu_of(struct link *link)
{
	return (struct rtu_link *)link;
}

static int64_t quiet_ns(const struct rtu_link *rtu)
{
	return rtu->timeout_ns > QUIET_NS ? rtu->timeout_ns : QUIET_NS;
}

static void rtu_close(struct link *link)
{
	struct rtu_link *rtu = rtu_of(link);
	if (rtu->is_open) {
		/* Else the mark stays while anybody else holds the terminal open. */
		(void)ioctl(modbus_get_socket(rtu->port), TIOCNXCL);
		modbus_close(rtu->port); /* ends the flock too */
	}
	rtu->is_open = false;
	rtu->busy = false;
}

/* USB adapters else hold back what they have for up to 16 ms. Best effort. */
static void ask_low_latency(int fd)
{
	struct serial_struct serial;
	if (ioctl(fd, TIOCGSERIAL, &serial) == 0) {
		serial.flags = (int)((unsigned)serial.flags | ASYNC_LOW_LATENCY);
		(void)ioctl(fd, TIOCSSERIAL, &serial);
	}
}

static int rtu_open(struct link *link, struct err *reterr)
{
	struct rtu_link *rtu = rtu_of(link);
	char text[128];
	rtu_close(link);
	waking_clear(&rtu->waking);
	if (modbus_connect(rtu->port) < 0)
		return err_set(reterr, ERR_LINK, "%s cannot be opened: %s", link->address,
		               strerror_r(errno, text, sizeof text));
	rtu->is_open = true;
	int fd = modbus_get_socket(rtu->port);
	if (flock(fd, LOCK_EX | LOCK_NB) < 0) {
		rtu_close(link);
		return err_set(reterr, ERR_LINK, "%s is in use by another program", link->address);
	}
	(void)fcntl(fd, F_SETFD, FD_CLOEXEC);
	(void)ioctl(fd, TIOCEXCL);
	ask_low_latency(fd);
	(void)modbus_flush(rtu->port);
	rtu->free_from_ns = waiting_now() + rtu->t35_ns;
	rtu->quiet_from_ns = 0;
	return 0;
}

static int rtu_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                     struct err *reterr)
{
	struct rtu_link *rtu = rtu_of(link);
	uint8_t pdu[LINK_PDU_MOST];
	if (rtu->busy)
		return err_set(reterr, ERR_STATE, "%s: a request is still outstanding", link->address);
	if (request->unit < 1 || request->unit > UNIT_MOST)
		return err_set(reterr, ERR_STATE, "unit %u on a serial line; 1 to %d are possible",
		               request->unit, UNIT_MOST);
	if (pdu_build(request, pdu, reterr) < 0)
		return -1;
	waking_clear(&rtu->waking);
	rtu->request = *request;
	rtu->begun_ns = now_ns;
	rtu->busy = true;
	return 0;
}

static enum link_status stopped(struct link_reply *reply)
{
	return reply_set(reply, LINK_STOPPED, "broken off");
}

static enum link_status lost(const struct rtu_link *rtu, struct link_reply *reply)
{
	char text[80];
	return reply_set(reply, LINK_LOST, "%.60s: %s", rtu->link.address,
	                 strerror_r(errno, text, sizeof text));
}

/* Reads what is there into at[0..size). 0: nothing; -1 with errno: the line is gone. */
static ssize_t take_bytes(struct rtu_link *rtu, uint8_t *at, size_t size)
{
	ssize_t got;
	do
		got = read(modbus_get_socket(rtu->port), at, size);
	while (got < 0 && errno == EINTR);
	if (got < 0 && (errno == EAGAIN || errno == EWOULDBLOCK))
		return 0;
	if (got == 0) {
		errno = EIO; /* hung up */
		return -1;
	}
	return got;
}

/* Waits until the line may be used: the silence after trouble, then the gap. */
static enum link_status wait_free(struct rtu_link *rtu, struct link_reply *reply)
{
	int fd = modbus_get_socket(rtu->port);
	int64_t give_up_ns = waiting_now() + 5 * quiet_ns(rtu);
	uint8_t waste[ADU_MOST];
	while (waiting_now() < rtu->quiet_from_ns) {
		enum waited waited = waiting_for(&rtu->waking, fd, POLLIN, rtu->quiet_from_ns);
		if (waited == WAITED_STOPPED)
			return stopped(reply);
		if (waited == WAITED_TIMEOUT)
			break;
		if (waited == WAITED_FAILED || take_bytes(rtu, waste, sizeof waste) < 0)
			return lost(rtu, reply);
		rtu->quiet_from_ns = waiting_now() + quiet_ns(rtu);
		if (waiting_now() > give_up_ns)
			return reply_set(reply, LINK_GARBLED, "%.60s does not fall silent", rtu->link.address);
	}
	rtu->quiet_from_ns = 0;
	if (waiting_for(&rtu->waking, -1, 0, rtu->free_from_ns) == WAITED_STOPPED)
		return stopped(reply);
	return LINK_OK;
}

static enum link_status send_request(struct rtu_link *rtu, struct link_reply *reply)
{
	uint8_t raw[1 + LINK_PDU_MOST + 1];
	raw[0] = rtu->request.unit;
	int length = 1 + pdu_build(&rtu->request, raw + 1, NULL);
	(void)modbus_flush(rtu->port);
	rtu->frame_length = 0;
	reply->sent_ns = rtu->link.clock(rtu->link.clock_context);
	return modbus_send_raw_request(rtu->port, raw, length) < 0 ? lost(rtu, reply) : LINK_OK;
}

/* Whether the first `length` bytes end with their own CRC. */
static bool crc_fits(const struct rtu_link *rtu, size_t length)
{
	if (length < 1 + 1 + CRC_BYTES)
		return false;
	uint16_t crc = pdu_crc(rtu->frame, length - CRC_BYTES);
	return rtu->frame[length - 2] == (crc & 0xFF) && rtu->frame[length - 1] == crc >> 8;
}

static bool is_echo(const struct rtu_link *rtu)
{
	uint8_t pdu[LINK_PDU_MOST];
	int length = pdu_build(&rtu->request, pdu, NULL);
	return rtu->frame_length >= 1 + (size_t)length && rtu->frame[0] == rtu->request.unit &&
	       memcmp(rtu->frame + 1, pdu, (size_t)length) == 0;
}

/* Judges a frame that has ended after `length` bytes. */
static enum link_status take_frame(struct rtu_link *rtu, size_t length, struct link_reply *reply)
{
	if (!crc_fits(rtu, length))
		return reply_set(reply, LINK_GARBLED, "%zu bytes whose checksum does not fit%s",
		                 rtu->frame_length,
		                 is_echo(rtu) ? "; the adapter echoes what is sent" : "");
	if (rtu->frame[0] != rtu->request.unit)
		return reply_set(reply, LINK_GARBLED, "unit %u answered for unit %u", rtu->frame[0],
		                 rtu->request.unit);
	pdu_parse(&rtu->request, rtu->frame + 1, length - 1 - CRC_BYTES, reply);
	return reply->status;
}

static enum link_status timed_out(const struct rtu_link *rtu, struct link_reply *reply)
{
	int function = (int)rtu->request.function;
	int64_t needed_ns = timing_request_ns(&rtu->timing, function, rtu->request.count) +
	                    timing_reply_ns(&rtu->timing, function, rtu->request.count);
	long long timeout_ms = (long long)rtu->timeout_ns / 1000000;
	if (needed_ns > rtu->timeout_ns)
		return reply_set(reply, LINK_TIMEOUT,
		                 "%.40s, unit %u: no reply within %lld ms; at %d baud it takes %lld ms",
		                 rtu->link.address, rtu->request.unit, timeout_ms, rtu->timing.baud,
		                 (long long)needed_ns / 1000000 + 1);
	return reply_set(reply, LINK_TIMEOUT, "%.60s, unit %u: no reply within %lld ms%s",
	                 rtu->link.address, rtu->request.unit, timeout_ms,
	                 rtu->frame_length ? " (it had begun)" : "");
}

static enum link_status receive_reply(struct rtu_link *rtu, struct link_reply *reply)
{
	int fd = modbus_get_socket(rtu->port);
	int64_t deadline_ns = waiting_now() + rtu->timeout_ns;
	for (;;) {
		/* The length of the whole frame: 0 not known yet, -1 known by silence only. */
		int length =
		    rtu->frame_length < 2 ? 0 : pdu_reply_length(rtu->frame + 1, rtu->frame_length - 1);
		if (length > 0)
			length += 1 + CRC_BYTES;
		if (length > 0 && rtu->frame_length >= (size_t)length) {
			if (rtu->frame_length > (size_t)length) /* more than one frame: be wary */
				rtu->quiet_from_ns = waiting_now() + quiet_ns(rtu);
			return take_frame(rtu, (size_t)length, reply);
		}
		if (rtu->frame_length > ADU_MOST)
			return reply_set(reply, LINK_GARBLED, "more bytes than a frame has");
		bool by_silence = length < 0;
		int64_t until_ns = deadline_ns;
		if (by_silence && waiting_now() + ENDED_NS < deadline_ns)
			until_ns = waiting_now() + ENDED_NS;
		ssize_t got;
		switch (waiting_for(&rtu->waking, fd, POLLIN, until_ns)) {
		case WAITED_READY:
			got = take_bytes(rtu, rtu->frame + rtu->frame_length,
			                 sizeof rtu->frame - rtu->frame_length);
			if (got < 0)
				return lost(rtu, reply);
			rtu->frame_length += (size_t)got;
			break;
		case WAITED_TIMEOUT:
			return by_silence ? take_frame(rtu, rtu->frame_length, reply) : timed_out(rtu, reply);
		case WAITED_STOPPED:
			return stopped(reply);
		case WAITED_FAILED:
			return lost(rtu, reply);
		}
	}
}

static enum link_status transact(struct rtu_link *rtu, struct link_reply *reply)
{
	struct err err = {0};
	if (!rtu->is_open && rtu_open(&rtu->link, &err) < 0)
		return reply_set(reply, LINK_LOST, "%.150s", err.message);
	enum link_status status = wait_free(rtu, reply);
	if (status == LINK_OK)
		status = send_request(rtu, reply);
	if (status == LINK_OK)
		status = receive_reply(rtu, reply);
	int64_t now_ns = waiting_now();
	rtu->free_from_ns = now_ns + rtu->t35_ns;
	if (status != LINK_OK && status != LINK_EXCEPTION)
		rtu->quiet_from_ns = now_ns + quiet_ns(rtu);
	return status;
}

static int64_t rtu_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	struct rtu_link *rtu = rtu_of(link);
	pdu_reply_clear(ret_reply);
	ret_reply->sent_ns = rtu->begun_ns;
	if (!rtu->busy)
		reply_set(ret_reply, LINK_LOST, "no request was begun");
	else
		ret_reply->status = transact(rtu, ret_reply);
	ret_reply->received_ns = link->clock(link->clock_context);
	if (ret_reply->status == LINK_LOST)
		rtu_close(link);
	rtu->busy = false;
	return now_ns;
}

static void rtu_interrupt(struct link *link)
{
	waking_signal(&rtu_of(link)->waking);
}

static void rtu_release(struct link *link)
{
	struct rtu_link *rtu = rtu_of(link);
	rtu_close(link);
	waking_release(&rtu->waking);
	if (rtu->port)
		modbus_free(rtu->port);
	free(rtu);
}

static const struct link_ops rtu_ops = {
    .name = "rtu",
    .open = rtu_open,
    .close = rtu_close,
    .begin = rtu_begin,
    .end = rtu_end,
    .interrupt = rtu_interrupt,
    .release = rtu_release,
};

/* The library makes 9600 of every rate that it does not know. */
static bool is_known_rate(int baud)
{
	static const int rates[] = {1200,  2400,   4800,   9600,   19200, 38400,
	                            57600, 115200, 230400, 460800, 921600};
	for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++)
		if (rates[i] == baud)
			return true;
	return false;
}

int link_rtu_new(const struct link_config *config, struct link **ret_link, struct err *reterr)
{
	const char parity = "NEO"[config->parity];
	const int stop_bits = config->stop_bits == 2 ? 2 : 1;
	const int character = 1 + 8 + (config->parity != PARITY_NONE) + stop_bits;
	*ret_link = NULL;
	if (!is_known_rate(config->baud))
		return err_set(reterr, ERR_LINK, "%d baud is not a rate of serial lines", config->baud);
	struct rtu_link *rtu = calloc(1, sizeof *rtu);
	if (!rtu)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	rtu->timeout_ns = config->reply_timeout_ns;
	rtu->timing = timing_rtu(config->baud, character);
	rtu->t35_ns = timing_t35_ns(&rtu->timing);
	rtu->link.ops = &rtu_ops;
	rtu->link.clock = config->clock;
	rtu->link.clock_context = config->clock_context;
	(void)snprintf(rtu->link.address, sizeof rtu->link.address, "rtu %s", config->serial_path);
	rtu->port = modbus_new_rtu(config->serial_path, config->baud, parity, 8, stop_bits);
	if (waking_init(&rtu->waking) < 0 || !rtu->port ||
	    modbus_set_error_recovery(rtu->port, MODBUS_ERROR_RECOVERY_NONE) < 0) {
		rtu_release(&rtu->link);
		return err_set(reterr, ERR_LINK, "rtu %s cannot be set up", config->serial_path);
	}
	*ret_link = &rtu->link;
	return 0;
}
