/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus TCP: one connection, one request at a time, own framing.
 *
 * Every request carries its own transaction number. Frames of other numbers
 * (late, doubled) are thrown away whole, and the wait goes on; a frame of this
 * number must also have protocol 0, a sane length and the unit that was asked.
 * After a timeout or a frame that cannot be trusted the connection is closed,
 * and the next request makes a new one: nothing late can arrive on it.
 *
 * The transport of the Modbus library was rejected for TCP, though the serial
 * line uses it: it does not compare unit, protocol and length, gives every raw
 * request the number 0 (so that a stale reply to one is taken as good), ends a
 * wait at the first foreign number instead of reading on, and cannot be broken
 * off without closing its socket under it.
 *
 * Names are resolved once, in link_tcp_new(): the way to rest must not wait
 * for a name server. Threads: the worker owns everything but `waking`.
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
};

struct tcp_link {
	struct link link;
	struct waking waking;
	struct addrinfo *addresses;
	int64_t timeout_ns;
	int fd; /* -1: closed */
	uint16_t transaction;
	uint8_t pending[ADU_MOST]; /* received, not yet a whole frame */
	size_t pending_length;
	struct link_request request;
	int64_t begun_ns;
	bool busy;
};

static struct tcp_link *tcp_of(struct link *link)
{
	return (struct tcp_link *)link;
}

static const char *error_text(int code, char *buffer, size_t size)
{
	return strerror_r(code, buffer, size);
}

static void tcp_close(struct link *link)
{
	struct tcp_link *tcp = tcp_of(link);
	if (tcp->fd >= 0)
		(void)close(tcp->fd);
	tcp->fd = -1;
	tcp->pending_length = 0;
	tcp->busy = false;
}

static int tcp_connect(struct tcp_link *tcp)
{
	tcp_close(&tcp->link);
	tcp->fd = tcp_dial(&tcp->waking, tcp->addresses, tcp->timeout_ns);
	return tcp->fd < 0 ? -1 : 0;
}

static int tcp_open(struct link *link, struct err *reterr)
{
	char text[128];
	waking_clear(&tcp_of(link)->waking);
	if (tcp_connect(tcp_of(link)) == 0)
		return 0;
	return err_set(reterr, ERR_LINK, "no connection to %s: %s", link->address,
	               error_text(errno, text, sizeof text));
}

static int tcp_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                     struct err *reterr)
{
	struct tcp_link *tcp = tcp_of(link);
	uint8_t pdu[LINK_PDU_MOST];
	if (tcp->busy)
		return err_set(reterr, ERR_STATE, "%s: a request is still outstanding", link->address);
	if (pdu_build(request, pdu, reterr) < 0)
		return -1;
	waking_clear(&tcp->waking);
	tcp->request = *request;
	tcp->begun_ns = now_ns;
	tcp->busy = true;
	return 0;
}

/*
 * Takes what has arrived into `pending`. Returns 1 where something came, 0
 * where nothing is there, -1 where the connection is gone (errno 0: closed by
 * the peer).
 */
static int take_bytes(struct tcp_link *tcp)
{
	size_t room = sizeof tcp->pending - tcp->pending_length;
	ssize_t got;
	do
		got = recv(tcp->fd, tcp->pending + tcp->pending_length, room, 0);
	while (got < 0 && errno == EINTR);
	if (got < 0)
		return errno == EAGAIN || errno == EWOULDBLOCK ? 0 : -1;
	if (got == 0) {
		errno = 0;
		return -1;
	}
	tcp->pending_length += (size_t)got;
	return 1;
}

/* Length of the frame at the head of `pending`; 0: not whole yet; -1: no Modbus. */
static int head_length(const struct tcp_link *tcp)
{
	const uint8_t *at = tcp->pending;
	if (tcp->pending_length < 6)
		return 0;
	unsigned protocol = (unsigned)at[2] << 8 | at[3];
	unsigned length = (unsigned)at[4] << 8 | at[5];
	if (protocol != 0 || length < 2 || length > LINK_PDU_MOST + 1)
		return -1;
	return tcp->pending_length < 6 + length ? 0 : (int)(6 + length);
}

static void drop_head(struct tcp_link *tcp, size_t length)
{
	memmove(tcp->pending, tcp->pending + length, tcp->pending_length - length);
	tcp->pending_length -= length;
}

/* Throws away whole frames that nobody waits for. -1: the connection is of no use. */
static int drop_stale(struct tcp_link *tcp)
{
	/* Bounded: a peer that floods would else hold the worker here. */
	for (int i = 0; i < 64; i++) {
		int got = take_bytes(tcp);
		int length;
		while ((length = head_length(tcp)) > 0)
			drop_head(tcp, (size_t)length);
		if (got < 0 || length < 0)
			return -1;
		if (got == 0)
			return 0;
	}
	return -1;
}

static enum link_status stopped(struct link_reply *reply)
{
	return reply_set(reply, LINK_STOPPED, "broken off");
}

static enum link_status lost(const struct tcp_link *tcp, struct link_reply *reply)
{
	char text[80];
	if (errno == 0)
		return reply_set(reply, LINK_LOST, "%.60s closed the connection", tcp->link.address);
	return reply_set(reply, LINK_LOST, "%.60s: %s", tcp->link.address,
	                 error_text(errno, text, sizeof text));
}

static enum link_status send_request(struct tcp_link *tcp, int64_t deadline_ns,
                                     struct link_reply *reply)
{
	uint8_t adu[ADU_MOST];
	int length = pdu_build(&tcp->request, adu + MBAP_BYTES, NULL);
	size_t total = MBAP_BYTES + (size_t)length, sent = 0;

	tcp->transaction++;
	adu[0] = (uint8_t)(tcp->transaction >> 8);
	adu[1] = (uint8_t)tcp->transaction;
	adu[2] = adu[3] = 0;
	adu[4] = (uint8_t)((length + 1) >> 8);
	adu[5] = (uint8_t)(length + 1);
	adu[6] = tcp->request.unit;
	reply->sent_ns = tcp->link.clock(tcp->link.clock_context);
	while (sent < total) {
		ssize_t done = send(tcp->fd, adu + sent, total - sent, MSG_NOSIGNAL);
		if (done >= 0) {
			sent += (size_t)done;
			continue;
		}
		if (errno == EINTR)
			continue;
		if (errno != EAGAIN && errno != EWOULDBLOCK)
			return lost(tcp, reply);
		enum waited waited = waiting_for(&tcp->waking, tcp->fd, POLLOUT, deadline_ns);
		if (waited == WAITED_STOPPED)
			return stopped(reply);
		if (waited != WAITED_READY)
			return reply_set(reply, LINK_TIMEOUT, "%.60s takes no request", tcp->link.address);
	}
	return LINK_OK;
}

/* Looks at the frame at the head. Returns true once the reply is decided. */
static bool take_frame(struct tcp_link *tcp, struct link_reply *reply)
{
	int length;
	while ((length = head_length(tcp)) > 0) {
		const uint8_t *at = tcp->pending;
		if (((unsigned)at[0] << 8 | at[1]) != tcp->transaction) {
			drop_head(tcp, (size_t)length);
			continue; /* late or doubled: not ours */
		}
		if (at[6] != tcp->request.unit)
			reply_set(reply, LINK_GARBLED, "unit %u answered for unit %u", at[6],
			          tcp->request.unit);
		else
			pdu_parse(&tcp->request, at + MBAP_BYTES, (size_t)length - MBAP_BYTES, reply);
		drop_head(tcp, (size_t)length);
		return true;
	}
	if (length < 0)
		reply_set(reply, LINK_GARBLED, "%.60s sends what is not Modbus TCP", tcp->link.address);
	return length < 0;
}

static enum link_status receive_reply(struct tcp_link *tcp, int64_t deadline_ns,
                                      struct link_reply *reply)
{
	for (;;) {
		if (take_frame(tcp, reply))
			return reply->status;
		switch (waiting_for(&tcp->waking, tcp->fd, POLLIN, deadline_ns)) {
		case WAITED_READY:
			if (take_bytes(tcp) < 0)
				return lost(tcp, reply);
			break;
		case WAITED_TIMEOUT:
			return reply_set(reply, LINK_TIMEOUT, "%.60s, unit %u: no reply within %lld ms",
			                 tcp->link.address, tcp->request.unit,
			                 (long long)(tcp->timeout_ns / 1000000));
		case WAITED_STOPPED:
			return stopped(reply);
		case WAITED_FAILED:
			return lost(tcp, reply);
		}
	}
}

static enum link_status transact(struct tcp_link *tcp, struct link_reply *reply)
{
	/* A peer may close an idle connection. Nothing was sent yet, so a new one is no retry. */
	if ((tcp->fd < 0 || drop_stale(tcp) < 0) && tcp_connect(tcp) < 0)
		return errno == ECANCELED ? stopped(reply) : lost(tcp, reply);
	int64_t deadline_ns = waiting_now() + tcp->timeout_ns;
	enum link_status status = send_request(tcp, deadline_ns, reply);
	return status == LINK_OK ? receive_reply(tcp, deadline_ns, reply) : status;
}

static int64_t tcp_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	struct tcp_link *tcp = tcp_of(link);
	pdu_reply_clear(ret_reply);
	ret_reply->sent_ns = tcp->begun_ns;
	if (!tcp->busy)
		reply_set(ret_reply, LINK_LOST, "no request was begun");
	else
		ret_reply->status = transact(tcp, ret_reply);
	ret_reply->received_ns = link->clock(link->clock_context);
	if (ret_reply->status != LINK_OK && ret_reply->status != LINK_EXCEPTION)
		tcp_close(link);
	tcp->busy = false;
	return now_ns;
}

static void tcp_interrupt(struct link *link)
{
	waking_signal(&tcp_of(link)->waking);
}

static void tcp_release(struct link *link)
{
	struct tcp_link *tcp = tcp_of(link);
	tcp_close(link);
	waking_release(&tcp->waking);
	if (tcp->addresses)
		freeaddrinfo(tcp->addresses);
	free(tcp);
}

static const struct link_ops tcp_ops = {
    .name = "tcp",
    .open = tcp_open,
    .close = tcp_close,
    .begin = tcp_begin,
    .end = tcp_end,
    .interrupt = tcp_interrupt,
    .release = tcp_release,
};

int link_tcp_new(const struct link_config *config, struct link **ret_link, struct err *reterr)
{
	*ret_link = NULL;
	struct tcp_link *tcp = calloc(1, sizeof *tcp);
	if (!tcp)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	tcp->fd = -1;
	tcp->timeout_ns = config->reply_timeout_ns;
	tcp->link.ops = &tcp_ops;
	tcp->link.clock = config->clock;
	tcp->link.clock_context = config->clock_context;
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
	tcp_release(&tcp->link);
	return -1;
}
