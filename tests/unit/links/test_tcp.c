/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The TCP link against a scripted peer: nothing late, doubled or foreign is
 * ever taken for the answer. Timeouts of requests that must succeed are long,
 * since the machine may be busy; only those that must expire are short.
 */
#include "near.h"

#include <arpa/inet.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <stdio.h>

#include "link.h"
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

/* Opens a listening socket on loopback, any port. */
static uint16_t listen_any(int *ret_fd, int backlog)
{
	struct sockaddr_in address = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
	socklen_t size = sizeof address;
	*ret_fd = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
	assert_int_equal(bind(*ret_fd, (struct sockaddr *)&address, sizeof address), 0);
	assert_int_equal(listen(*ret_fd, backlog), 0);
	assert_int_equal(getsockname(*ret_fd, (struct sockaddr *)&address, &size), 0);
	return ntohs(address.sin_port);
}

static struct link *new_link(uint16_t port, int64_t timeout_ns)
{
	const struct link_config config = {
	    .tcp_host = "127.0.0.1", .tcp_port = port, .reply_timeout_ns = timeout_ns, .clock = now_ns};
	struct link *link;
	struct err err = {0};
	assert_int_equal(link_tcp_new(&config, &link, &err), 0);
	return link;
}

static enum link_status transact(struct link *link, const struct link_request *request,
                                 struct link_reply *reply)
{
	struct err err = {0};
	int64_t now = waiting_now();
	assert_int_equal(link_begin(link, request, now, &err), 0);
	assert_true(link_end(link, now, reply) <= now);
	assert_true(reply->received_ns >= reply->sent_ns);
	return reply->status;
}

/* ---- pieces of scripts ------------------------------------------------- */

static void take_connection(struct peer *peer)
{
	struct pollfd poller = {.fd = peer->listener, .events = POLLIN};
	const int on = 1;
	peer->fd = poll(&poller, 1, PEER_PATIENCE_MS) == 1 ? accept(peer->listener, NULL, NULL) : -1;
	if (peer->fd < 0)
		peer->wrong++;
	(void)setsockopt(peer->fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
}

static void end_connection(struct peer *peer)
{
	(void)close(peer->fd);
	peer->fd = -1;
}

/* Reads one request whole into peer->last. */
static void take_request(struct peer *peer)
{
	if (!peer_read(peer, peer->last, 6))
		return;
	size_t follows = (size_t)peer->last[4] << 8 | peer->last[5];
	if (peer_read(peer, peer->last + 6, follows))
		peer->last_length = 6 + follows;
}

/* A reply to transaction `transaction` of one register with a value. */
static size_t make_value(unsigned char *adu, unsigned transaction, unsigned value)
{
	const unsigned char reply[11] = {(unsigned char)(transaction >> 8),
	                                 (unsigned char)transaction,
	                                 0,
	                                 0,
	                                 0,
	                                 5,
	                                 1,
	                                 LINK_READ_INPUT_REGISTERS,
	                                 2,
	                                 (unsigned char)(value >> 8),
	                                 (unsigned char)value};
	memcpy(adu, reply, sizeof reply);
	return sizeof reply;
}

static unsigned transaction_of(const struct peer *peer)
{
	return (unsigned)peer->last[0] << 8 | peer->last[1];
}

static void answer_value(struct peer *peer, unsigned value)
{
	unsigned char adu[16];
	peer_send(peer, adu, make_value(adu, transaction_of(peer), value));
}

/* One test: a peer with a script, and a link to it. */
static struct link *start(struct peer *peer, void (*script)(struct peer *), int64_t timeout_ns)
{
	memset(peer, 0, sizeof *peer);
	uint16_t port = listen_any(&peer->listener, 8);
	peer_start(peer, script);
	return new_link(port, timeout_ns);
}

static void finish(struct peer *peer, struct link *link)
{
	link_release(link);
	peer_join(peer);
	if (peer->fd > 0)
		(void)close(peer->fd);
	(void)close(peer->listener);
	assert_int_equal(peer->wrong, 0);
}

/* ---- the good case ----------------------------------------------------- */

static void script_write(struct peer *peer)
{
	take_connection(peer);
	take_request(peer);
	unsigned char echo[12];
	memcpy(echo, peer->last, sizeof echo);
	echo[5] = 6; /* of a write the address and the count come back */
	peer_send(peer, echo, sizeof echo);
}

static void a_request_is_framed_as_the_standard_says(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_write, 20000 * MS);
	/* Modbus Application Protocol V1.1b3, 6.12: 10 00 01 00 02 04 00 0A 01 02. */
	const struct link_request request = {.unit = 17,
	                                     .function = LINK_WRITE_REGISTERS,
	                                     .address = 1,
	                                     .count = 2,
	                                     .words = {0x000A, 0x0102}};
	const unsigned char expected[] = {0, 0, 0, 11, 17, 0x10, 0, 1, 0, 2, 4, 0, 0x0A, 1, 2};
	assert_int_equal(transact(link, &request, &reply), LINK_OK);
	finish(&peer, link);
	assert_int_equal(peer.last_length, 17);
	assert_memory_equal(peer.last + 2, expected, sizeof expected);
}

static void script_pieces(struct peer *peer)
{
	unsigned char adu[16];
	take_connection(peer);
	take_request(peer);
	size_t length = make_value(adu, transaction_of(peer), 555);
	for (size_t i = 0; i < length; i++)
		peer_send(peer, adu + i, 1);
}

static void a_reply_in_pieces_is_put_together(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_pieces, 20000 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 555);
	finish(&peer, link);
}

/* ---- late, doubled, foreign -------------------------------------------- */

static void script_late(struct peer *peer)
{
	unsigned char adu[16];
	take_connection(peer);
	take_request(peer);
	size_t length = make_value(adu, transaction_of(peer), 1);
	peer_wait(peer, &peer->go);                      /* the client has given up */
	(void)send(peer->fd, adu, length, MSG_NOSIGNAL); /* late; the connection may be gone */
	end_connection(peer);
	take_connection(peer);
	take_request(peer);
	peer_send(peer, adu, length); /* and late once more, on the new connection */
	answer_value(peer, 2);
}

static void a_late_reply_is_never_taken(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_late, 300 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_TIMEOUT);
	assert_int_equal(reply.words[0], 0);
	(void)sem_post(&peer.go);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 2);
	finish(&peer, link);
}

static void script_doubled(struct peer *peer)
{
	unsigned char twice[32];
	take_connection(peer);
	for (unsigned value = 1; value <= 20; value++) {
		take_request(peer);
		/* The reply before again, this one, and this one again, cut at odd places. */
		size_t length = make_value(twice, transaction_of(peer) - 1, value - 1);
		length += make_value(twice + length, transaction_of(peer), value);
		peer_send(peer, twice, 5);
		peer_send(peer, twice + 5, length - 5);
		peer_send(peer, twice + length / 2, length / 2);
	}
}

static void doubled_replies_never_shift_the_answers(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_doubled, 20000 * MS);
	for (unsigned value = 1; value <= 20; value++) {
		assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
		assert_int_equal(reply.words[0], value);
	}
	finish(&peer, link);
}

/* Each row: what byte of a good reply is changed, and to what. */
struct corruption {
	size_t at;
	unsigned char value;
};

static const struct corruption corruptions[] = {
    {2, 1}, /* protocol */
    {4, 9}, /* length far too large */
    {5, 1}, /* length without a function */
    {6, 2}, /* another unit */
    {7, 3}, /* another function */
    {8, 4}, /* another byte count */
    {5, 4}, /* one byte less than the count says */
};

enum { CORRUPTIONS = sizeof corruptions / sizeof corruptions[0] };

static void script_corrupt(struct peer *peer)
{
	for (int i = 0; i < CORRUPTIONS; i++) {
		unsigned char adu[16];
		take_connection(peer); /* a new one each time: the old is not trusted */
		take_request(peer);
		size_t length = make_value(adu, transaction_of(peer), 7);
		adu[corruptions[i].at] = corruptions[i].value;
		peer_send(peer, adu, length);
		peer_wait(peer, &peer->go);
		end_connection(peer);
	}
	take_connection(peer);
	take_request(peer);
	answer_value(peer, 8);
}

static void a_reply_that_does_not_fit_is_garbled(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_corrupt, 20000 * MS);
	for (int i = 0; i < CORRUPTIONS; i++) {
		assert_int_equal(transact(link, &read_one, &reply), LINK_GARBLED);
		assert_int_equal(reply.words[0], 0);
		assert_true(reply.message[0] != '\0');
		(void)sem_post(&peer.go);
	}
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 8);
	finish(&peer, link);
}

static void script_refuse(struct peer *peer)
{
	take_connection(peer);
	take_request(peer);
	unsigned char refusal[9] = {peer->last[0], peer->last[1], 0, 0, 0, 3, 1, 0x84, 2};
	peer_send(peer, refusal, sizeof refusal);
	take_request(peer); /* on the same connection */
	answer_value(peer, 3);
}

static void a_refusal_keeps_the_connection(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_refuse, 20000 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_EXCEPTION);
	assert_int_equal(reply.exception, 2);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 3);
	finish(&peer, link);
}

/* ---- time ------------------------------------------------------------- */

static void script_dribble(struct peer *peer)
{
	unsigned char adu[16];
	take_connection(peer);
	take_request(peer);
	(void)make_value(adu, transaction_of(peer), 5);
	peer_send(peer, adu, 9); /* all but the value */
	peer_wait(peer, &peer->go);
}

static void half_a_reply_ends_with_the_timeout(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_dribble, 200 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_TIMEOUT);
	assert_true(reply.received_ns - reply.sent_ns >= 200 * MS);
	(void)sem_post(&peer.go);
	finish(&peer, link);
}

static void script_hang_up(struct peer *peer)
{
	take_connection(peer);
	take_request(peer);
	end_connection(peer); /* in the middle of a transaction */
	take_connection(peer);
	take_request(peer);
	answer_value(peer, 1);
	end_connection(peer); /* between two */
	(void)sem_post(&peer->told);
	take_connection(peer);
	take_request(peer);
	answer_value(peer, 2);
}

static void a_closed_connection_is_lost_or_made_anew(void **state)
{
	(void)state;
	struct peer peer;
	struct link_reply reply;
	struct link *link = start(&peer, script_hang_up, 20000 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_LOST);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	peer_wait(&peer, &peer.told);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK); /* nothing was outstanding */
	assert_int_equal(reply.words[0], 2);
	finish(&peer, link);
}

static void a_full_backlog_ends_the_connect_with_the_timeout(void **state)
{
	(void)state;
	int listener, held[8];
	struct err err = {0};
	struct link_reply reply;
	uint16_t port = listen_any(&listener, 0);
	struct sockaddr_in address = {
	    .sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK), .sin_port = htons(port)};
	for (int i = 0; i < 8; i++) { /* nobody accepts; what does not fit stays half open */
		held[i] = socket(AF_INET, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
		(void)connect(held[i], (struct sockaddr *)&address, sizeof address);
	}
	struct link *link = new_link(port, 200 * MS);
	int64_t begun = waiting_now();
	assert_int_equal(link_open(link, &err), -1);
	assert_int_equal(err.code, ERR_LINK);
	assert_true(waiting_now() - begun < 10000 * MS);
	assert_int_equal(transact(link, &read_one, &reply), LINK_LOST);
	link_release(link);
	for (int i = 0; i < 8; i++)
		(void)close(held[i]);
	(void)close(listener);
}

static void nobody_listening_is_told_at_once(void **state)
{
	(void)state;
	int listener;
	struct err err = {0};
	uint16_t port = listen_any(&listener, 1);
	(void)close(listener);
	struct link *link = new_link(port, 20000 * MS);
	assert_int_equal(link_open(link, &err), -1);
	assert_int_equal(err.code, ERR_LINK);
	assert_non_null(strstr(err.message, "Connection refused"));
	link_release(link);
}

/* ---- breaking off ------------------------------------------------------ */

static void script_silent(struct peer *peer)
{
	take_connection(peer);
	take_request(peer);
	link_interrupt(peer->context); /* the client waits for its reply now */
	peer_wait(peer, &peer->go);
	end_connection(peer);
	take_connection(peer);
	take_request(peer);
	answer_value(peer, 4);
}

static void an_interrupt_breaks_off_a_blocked_read(void **state)
{
	(void)state;
	struct peer peer = {0};
	struct link_reply reply;
	uint16_t port = listen_any(&peer.listener, 8);
	struct link *link = new_link(port, 60000 * MS);
	peer.context = link;
	peer_start(&peer, script_silent);
	link_interrupt(link); /* without a request it does nothing */
	assert_int_equal(transact(link, &read_one, &reply), LINK_STOPPED);
	assert_true(reply.received_ns - reply.sent_ns < 30000 * MS);
	(void)sem_post(&peer.go);
	assert_int_equal(transact(link, &read_one, &reply), LINK_OK);
	assert_int_equal(reply.words[0], 4);
	finish(&peer, link);
}

static void a_request_outside_the_protocol_is_not_sent(void **state)
{
	(void)state;
	struct err err = {0};
	struct link *link = new_link(1, 1000 * MS);
	struct link_request wrong = read_one;
	wrong.count = 126;
	assert_int_equal(link_begin(link, &wrong, 0, &err), -1);
	assert_int_equal(err.code, ERR_STATE);
	link_release(link);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_request_is_framed_as_the_standard_says),
	    cmocka_unit_test(a_reply_in_pieces_is_put_together),
	    cmocka_unit_test(a_late_reply_is_never_taken),
	    cmocka_unit_test(doubled_replies_never_shift_the_answers),
	    cmocka_unit_test(a_reply_that_does_not_fit_is_garbled),
	    cmocka_unit_test(a_refusal_keeps_the_connection),
	    cmocka_unit_test(half_a_reply_ends_with_the_timeout),
	    cmocka_unit_test(a_closed_connection_is_lost_or_made_anew),
	    cmocka_unit_test(a_full_backlog_ends_the_connect_with_the_timeout),
	    cmocka_unit_test(nobody_listening_is_told_at_once),
	    cmocka_unit_test(an_interrupt_breaks_off_a_blocked_read),
	    cmocka_unit_test(a_request_outside_the_protocol_is_not_sent),
	};
	return RUN_GROUP(tests);
}
