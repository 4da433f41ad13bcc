/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus TCP with several requests under way, for devices whose rig entry says
 * that they take them (Modbus Messaging on TCP/IP V1.0b, 4.4.2.2, leaves the
 * number to the server).
 *
 * begin() only puts the frame into a buffer. end() gives a reply that is there
 * already without a system call; where none is, all that was put in goes out
 * with one send() and one wait follows. So the replies that came in together
 * are answered by requests that go out together, which is where most of the
 * gain over one at a time comes from.
 *
 * Replies find their request by the transaction number, in whatever order they
 * come, and are handed over in the order of the requests, so that rows of a
 * block stay in the order of time. A reply without an outstanding request is
 * thrown away. After a timeout, or a frame that is no Modbus, the connection is
 * closed and all that is outstanding is lost with it: nothing late can arrive.
 *
 * Mixing this into tcp.c was rejected: that one is for devices which take one
 * request, and must be seen at a glance to send only one. Threads: as there.
 */
#include <errno.h>
#include <netdb.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include "pdu.h"
#include "tcp_dial.h"
#include "waiting.h"

enum {
	MBAP_BYTES = 7, /* transaction, protocol, length, unit */
	ADU_MOST = MBAP_BYTES + LINK_PDU_MOST,
	FLIGHTS_MOST = 16,
};

struct flight {
	struct link_request request;
	uint16_t transaction;
	bool sent, answered;
	int64_t sent_ns, received_ns, deadline_ns;
	uint8_t reply[ADU_MOST]; /* where answered */
	size_t reply_length;
};

struct flight_link {
	struct link link;
	struct waking waking;
	struct addrinfo *addresses;
	int64_t timeout_ns, begun_ns;
	int fd; /* -1: closed */
	uint16_t transaction;
	struct flight flights[FLIGHTS_MOST]; /* a ring, in the order of begin() */
	size_t first, count, unsent;
	enum link_status failed; /* LINK_OK: the connection stands */
	char failure[160];
	uint8_t out[FLIGHTS_MOST * ADU_MOST];
	size_t out_length;
	uint8_t in[2 * FLIGHTS_MOST * ADU_MOST];
	size_t in_length;
};

static struct flight_link *flight_of(struct link *link)
{
	return (struct flight_link *)link;
}

static struct flight *flight_at(struct flight_link *tcp, size_t index)
{
	return &tcp->flights[(tcp->first + index) % FLIGHTS_MOST];
}

static void hang_up(struct flight_link *tcp)
{
	if (tcp->fd >= 0)
		(void)close(tcp->fd);
	tcp->fd = -1;
	tcp->in_length = tcp->out_length = 0;
}

static void flight_close(struct link *link)
{
	struct flight_link *tcp = flight_of(link);
	hang_up(tcp);
	tcp->count = tcp->unsent = 0;
	tcp->failed = LINK_OK;
}

static int dial(struct flight_link *tcp)
{
	hang_up(tcp);
	tcp->fd = tcp_dial(&tcp->waking, tcp->addresses, tcp->timeout_ns);
	return tcp->fd < 0 ? -1 : 0;
}

static int flight_open(struct link *link, struct err *reterr)
{
	struct flight_link *tcp = flight_of(link);
	char text[128];
	flight_close(link);
	waking_clear(&tcp->waking);
	if (dial(tcp) == 0)
		return 0;
	return err_set(reterr, ERR_LINK, "no connection to %s: %s", link->address,
	               strerror_r(errno, text, sizeof text));
}

static int flight_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                        struct err *reterr)
{
	struct flight_link *tcp = flight_of(link);
	if (tcp->count >= (size_t)link->depth)
		return err_set(reterr, ERR_STATE, "%s: %zu requests are outstanding", link->address,
		               tcp->count);
	if (tcp->failed != LINK_OK && tcp->count > 0)
		return err_set(reterr, ERR_STATE, "%s: the connection is gone", link->address);
	if (tcp->count == 0)
		waking_clear(&tcp->waking);
	struct flight *flight = flight_at(tcp, tcp->count);
	uint8_t *adu = tcp->out + tcp->out_length;
	int length = pdu_build(request, adu + MBAP_BYTES, reterr);
	if (length < 0)
		return -1;
	tcp->failed = LINK_OK;
	tcp->transaction++;
	adu[0] = (uint8_t)(tcp->transaction >> 8);
	adu[1] = (uint8_t)tcp->transaction;
	adu[2] = adu[3] = 0;
	adu[4] = (uint8_t)((length + 1) >> 8);
	adu[5] = (uint8_t)(length + 1);
	adu[6] = request->unit;
	tcp->out_length += MBAP_BYTES + (size_t)length;
	flight->request = *request;
	flight->transaction = tcp->transaction;
	flight->sent = flight->answered = false;
	flight->sent_ns = now_ns;
	tcp->count++;
	tcp->unsent++;
	return 0;
}

/* From now on every outstanding request ends with this status. */
static void fail(struct flight_link *tcp, enum link_status status, const char *text)
{
	if (tcp->failed != LINK_OK)
		return;
	tcp->failed = status;
	(void)snprintf(tcp->failure, sizeof tcp->failure, "%.60s: %.90s", tcp->link.address, text);
	hang_up(tcp);
}

static void fail_errno(struct flight_link *tcp)
{
	char text[80];
	fail(tcp, errno == ECANCELED ? LINK_STOPPED : LINK_LOST,
	     errno == 0 ? "the connection was closed" : strerror_r(errno, text, sizeof text));
}

/* Length of the frame at `at`; 0: not whole yet; -1: no Modbus. */
static int frame_length(const uint8_t *at, size_t known)
{
	if (known < 6)
		return 0;
	unsigned protocol = (unsigned)at[2] << 8 | at[3];
	unsigned length = (unsigned)at[4] << 8 | at[5];
	if (protocol != 0 || length < 2 || length > LINK_PDU_MOST + 1)
		return -1;
	return known < 6 + length ? 0 : (int)(6 + length);
}

/* Gives a frame to the request that it answers, if there is one. */
static void sort_in(struct flight_link *tcp, const uint8_t *frame, size_t length, int64_t now_ns)
{
	unsigned transaction = (unsigned)frame[0] << 8 | frame[1];
	for (size_t i = 0; i < tcp->count; i++) {
		struct flight *flight = flight_at(tcp, i);
		if (!flight->sent || flight->answered || flight->transaction != transaction)
			continue;
		memcpy(flight->reply, frame, length);
		flight->reply_length = length;
		flight->received_ns = now_ns;
		flight->answered = true;
		return;
	}
}

/* Takes what has arrived and sorts in whole frames. 1: something came; 0: nothing; -1: gone. */
static int take_bytes(struct flight_link *tcp)
{
	ssize_t got;
	do
		got = recv(tcp->fd, tcp->in + tcp->in_length, sizeof tcp->in - tcp->in_length, 0);
	while (got < 0 && errno == EINTR);
	if (got < 0)
		return errno == EAGAIN || errno == EWOULDBLOCK ? 0 : -1;
	if (got == 0) {
		errno = 0;
		return -1;
	}
	int64_t now_ns = tcp->link.clock(tcp->link.clock_context);
	tcp->in_length += (size_t)got;
	size_t at = 0;
	int length;
	while ((length = frame_length(tcp->in + at, tcp->in_length - at)) > 0) {
		sort_in(tcp, tcp->in + at, (size_t)length, now_ns);
		at += (size_t)length;
	}
	memmove(tcp->in, tcp->in + at, tcp->in_length - at);
	tcp->in_length -= at;
	if (length < 0) {
		fail(tcp, LINK_GARBLED, "what it sends is not Modbus TCP");
		return 1;
	}
	return 1;
}

/*
 * A peer may close an idle connection; nothing was sent yet, so a new one is no
 * retry. Whatever else lies there belongs to nobody.
 */
static int freshen(struct flight_link *tcp)
{
	const size_t kept = tcp->out_length;
	int got = tcp->fd < 0 ? -1 : 1;
	for (int i = 0; got > 0 && tcp->failed == LINK_OK; i++)
		got = i < 64 ? take_bytes(tcp) : -1;
	if (got == 0)
		return 0;
	tcp->failed = LINK_OK;
	if (dial(tcp) < 0)
		return -1;
	tcp->out_length = kept;
	return 0;
}

/* Sends all that was begun, with one call where the socket takes it. */
static void send_begun(struct flight_link *tcp)
{
	if (tcp->unsent == tcp->count && freshen(tcp) < 0) {
		fail_errno(tcp);
		return;
	}
	int64_t now_ns = tcp->link.clock(tcp->link.clock_context);
	int64_t deadline_ns = waiting_now() + tcp->timeout_ns;
	for (size_t i = tcp->count - tcp->unsent; i < tcp->count; i++) {
		struct flight *flight = flight_at(tcp, i);
		flight->sent = true;
		flight->sent_ns = now_ns;
		flight->deadline_ns = deadline_ns;
	}
	tcp->unsent = 0;
	size_t sent = 0;
	while (sent < tcp->out_length) {
		ssize_t done = send(tcp->fd, tcp->out + sent, tcp->out_length - sent, MSG_NOSIGNAL);
		if (done >= 0) {
			sent += (size_t)done;
			continue;
		}
		if (errno == EINTR)
			continue;
		if (errno != EAGAIN && errno != EWOULDBLOCK) {
			fail_errno(tcp);
			return;
		}
		enum waited waited = waiting_for(&tcp->waking, tcp->fd, POLLOUT, deadline_ns);
		if (waited == WAITED_STOPPED)
			fail(tcp, LINK_STOPPED, "broken off");
		else if (waited != WAITED_READY)
			fail(tcp, LINK_TIMEOUT, "it takes no request");
		if (waited != WAITED_READY)
			return;
	}
	tcp->out_length = 0;
}

/* Waits until the oldest request is answered or all have failed. */
static void wait_oldest(struct flight_link *tcp)
{
	const struct flight *oldest = flight_at(tcp, 0);
	char text[64];
	while (!oldest->answered && tcp->failed == LINK_OK) {
		switch (waiting_for(&tcp->waking, tcp->fd, POLLIN, oldest->deadline_ns)) {
		case WAITED_READY:
			if (take_bytes(tcp) < 0)
				fail_errno(tcp);
			break;
		case WAITED_TIMEOUT:
			(void)snprintf(text, sizeof text, "unit %u: no reply within %lld ms",
			               oldest->request.unit, (long long)(tcp->timeout_ns / 1000000));
			fail(tcp, LINK_TIMEOUT, text);
			break;
		case WAITED_STOPPED:
			fail(tcp, LINK_STOPPED, "broken off");
			break;
		case WAITED_FAILED:
			fail_errno(tcp);
			break;
		}
	}
}

static void hand_over(struct flight_link *tcp, const struct flight *flight,
                      struct link_reply *reply)
{
	reply->sent_ns = flight->sent_ns;
	reply->received_ns =
	    flight->answered ? flight->received_ns : tcp->link.clock(tcp->link.clock_context);
	if (!flight->answered)
		reply_set(reply, tcp->failed, "%s", tcp->failure);
	else if (flight->reply[6] != flight->request.unit)
		reply_set(reply, LINK_GARBLED, "unit %u answered for unit %u", flight->reply[6],
		          flight->request.unit);
	else
		pdu_parse(&flight->request, flight->reply + MBAP_BYTES, flight->reply_length - MBAP_BYTES,
		          reply);
}

static int64_t flight_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	struct flight_link *tcp = flight_of(link);
	pdu_reply_clear(ret_reply);
	ret_reply->sent_ns = ret_reply->received_ns = now_ns;
	if (tcp->count == 0) {
		reply_set(ret_reply, LINK_LOST, "no request was begun");
		return now_ns;
	}
	struct flight *oldest = flight_at(tcp, 0);
	if (!oldest->answered && tcp->failed == LINK_OK) {
		if (tcp->unsent > 0)
			send_begun(tcp);
		wait_oldest(tcp);
	}
	hand_over(tcp, oldest, ret_reply);
	/* A reply that is not to be trusted leaves the others in doubt as well. */
	if (ret_reply->status == LINK_GARBLED)
		fail(tcp, LINK_GARBLED, "a reply before it was garbled");
	tcp->first = (tcp->first + 1) % FLIGHTS_MOST;
	tcp->count--;
	if (tcp->unsent > tcp->count)
		tcp->unsent = tcp->count; /* given up before it was sent */
	if (tcp->count == 0)
		tcp->failed = LINK_OK;
	return now_ns;
}

static void flight_interrupt(struct link *link)
{
	waking_signal(&flight_of(link)->waking);
}

static void flight_release(struct link *link)
{
	struct flight_link *tcp = flight_of(link);
	flight_close(link);
	waking_release(&tcp->waking);
	if (tcp->addresses)
		freeaddrinfo(tcp->addresses);
	free(tcp);
}

static const struct link_ops flight_ops = {
    .name = "tcp in flight",
    .open = flight_open,
    .close = flight_close,
    .begin = flight_begin,
    .end = flight_end,
    .interrupt = flight_interrupt,
    .release = flight_release,
};

int link_tcp_flight_new(const struct link_config *config, struct link **ret_link,
                        struct err *reterr)
{
	*ret_link = NULL;
	struct flight_link *tcp = calloc(1, sizeof *tcp);
	if (!tcp)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	tcp->fd = -1;
	tcp->timeout_ns = config->reply_timeout_ns;
	tcp->link.ops = &flight_ops;
	tcp->link.clock = config->clock;
	tcp->link.clock_context = config->clock_context;
	tcp->link.depth = config->in_flight < 1              ? 1
	                  : config->in_flight > FLIGHTS_MOST ? FLIGHTS_MOST
	                                                     : config->in_flight;
	(void)snprintf(tcp->link.address, sizeof tcp->link.address, "tcp %s:%u", config->tcp_host,
	               config->tcp_port);
	if (waking_init(&tcp->waking) < 0) {
		err_set(reterr, ERR_LINK, "%s: no file descriptor left", tcp->link.address);
		goto fail;
	}
	if (tcp_resolve(config, tcp->link.address, &tcp->addresses, reterr) < 0)
		goto fail;
	*ret_link = &tcp->link;
	return 0;
fail:
	flight_release(&tcp->link);
	return -1;
}
