/* SPDX-License-Identifier: Apache-2.0 */
/* Several Modbus TCP requests under way, against a peer that follows a script. */
#include "near.h"

#include <arpa/inet.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <stdlib.h>

#include "link.h"
#include "scripted_peer.h"
#include "waiting.h"

#define MS INT64_C(1000000)

enum { DEPTH = 4, REQUEST_BYTES = 12 };

static int64_t now_ns(void *context)
{
	(void)context;
	return waiting_now();
}

static struct link *start(struct peer *peer, void (*script)(struct peer *), int64_t timeout_ns)
{
	struct sockaddr_in address = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
	socklen_t size = sizeof address;
	struct link *link;
	struct err err = {0};
	memset(peer, 0, sizeof *peer);
	peer->listener = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
	assert_int_equal(bind(peer->listener, (struct sockaddr *)&address, sizeof address), 0);
	assert_int_equal(listen(peer->listener, 8), 0);
	assert_int_equal(getsockname(peer->listener, (struct sockaddr *)&address, &size), 0);
	const struct link_config config = {.tcp_host = "127.0.0.1",
	                                   .tcp_port = ntohs(address.sin_port),
	                                   .reply_timeout_ns = timeout_ns,
	                                   .in_flight = DEPTH,
	                                   .clock = now_ns};
	assert_int_equal(link_tcp_flight_new(&config, &link, &err), 0);
	assert_int_equal(link->depth, DEPTH);
	peer_start(peer, script);
	return link;
}

static void finish(struct peer *peer, struct link *link)
{
	peer_join(peer); /* first: a link is released only once nobody interrupts it */
	link_release(link);
	if (peer->fd > 0)
		(void)close(peer->fd);
	(void)close(peer->listener);
	assert_int_equal(peer->wrong, 0);
}

/* Begins a read of one register of each address [from, from + count). */
static void begin(struct link *link, unsigned from, unsigned count)
{
	for (unsigned i = 0; i < count; i++) {
		const struct link_request request = {.unit = 1,
		                                     .function = LINK_READ_INPUT_REGISTERS,
		                                     .address = (uint16_t)(from + i),
		                                     .count = 1};
		struct err err = {0};
		assert_int_equal(link_begin(link, &request, waiting_now(), &err), 0);
	}
}

/* Ends `count` requests; each must bring the value 1000 + its address. */
static void end_good(struct link *link, unsigned from, unsigned count)
{
	static struct link_reply reply;
	for (unsigned i = 0; i < count; i++) {
		int64_t now = waiting_now();
		assert_true(link_end(link, now, &reply) <= now);
		assert_int_equal(reply.status, LINK_OK);
		assert_int_equal(reply.words[0], 1000 + from + i);
		assert_true(reply.received_ns >= reply.sent_ns);
	}
}

static void end_as(struct link *link, unsigned count, enum link_status status)
{
	static struct link_reply reply;
	for (unsigned i = 0; i < count; i++) {
		(void)link_end(link, waiting_now(), &reply);
		assert_int_equal(reply.status, status);
		assert_true(reply.message[0] != '\0');
	}
}

/* ---- pieces of scripts ------------------------------------------------------- */

static void take_connection(struct peer *peer)
{
	struct pollfd poller = {.fd = peer->listener, .events = POLLIN};
	const int on = 1;
	peer->fd = poll(&poller, 1, PEER_PATIENCE_MS) == 1 ? accept(peer->listener, NULL, NULL) : -1;
	if (peer->fd < 0)
		peer->wrong++;
	(void)setsockopt(peer->fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
}

static void take(struct peer *peer, unsigned char (*requests)[REQUEST_BYTES], int count)
{
	for (int i = 0; i < count; i++)
		(void)peer_read(peer, requests[i], REQUEST_BYTES);
}

/* The right answer to a request: 1000 and its address. */
static void answer(struct peer *peer, const unsigned char *request)
{
	unsigned value = 1000 + ((unsigned)request[8] << 8 | request[9]);
	const unsigned char reply[] = {request[0],
	                               request[1],
	                               0,
	                               0,
	                               0,
	                               5,
	                               request[6],
	                               request[7],
	                               2,
	                               (unsigned char)(value >> 8),
	                               (unsigned char)value};
	peer_send(peer, reply, sizeof reply);
}

/* ---- good -------------------------------------------------------------------- */

static void script_all_before_an_answer(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	for (int round = 0; round < 3; round++) {
		take(peer, requests, DEPTH);
		for (int i = 0; i < DEPTH; i++)
			answer(peer, requests[i]);
	}
}

static void all_are_under_way_before_the_first_answer(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_all_before_an_answer, 20000 * MS);
	for (unsigned round = 0; round < 3; round++) {
		begin(link, 10 * round, DEPTH);
		end_good(link, 10 * round, DEPTH);
	}
	finish(&peer, link);
}

static void script_sliding(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	for (int i = 0; i < 40; i++) {
		answer(peer, requests[i % DEPTH]);
		take(peer, &requests[i % DEPTH], 1);
	}
	for (int i = 40; i < 40 + DEPTH; i++)
		answer(peer, requests[i % DEPTH]);
}

static void a_refill_goes_out_while_others_are_under_way(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_sliding, 20000 * MS);
	begin(link, 0, DEPTH);
	for (unsigned i = 0; i < 40; i++) {
		end_good(link, i, 1);
		begin(link, i + DEPTH, 1);
	}
	end_good(link, 40, DEPTH);
	finish(&peer, link);
}

static void script_backwards(struct peer *peer)
{
	static const unsigned char foreign[] = {0xEE, 0xEE, 0, 0, 0, 5, 1, 4, 2, 9, 9};
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	peer_send(peer, foreign, sizeof foreign);
	for (int i = DEPTH; i-- > 0;) {
		answer(peer, requests[i]);
		answer(peer, requests[i]); /* doubled */
	}
}

static void answers_find_their_request_in_any_order(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_backwards, 20000 * MS);
	begin(link, 70, DEPTH);
	end_good(link, 70, DEPTH);
	finish(&peer, link);
}

static void one_more_than_the_depth_is_refused(void **state)
{
	(void)state;
	struct peer peer;
	struct err err = {0};
	const struct link_request request = {
	    .unit = 1, .function = LINK_READ_INPUT_REGISTERS, .address = 0, .count = 1};
	struct link *link = start(&peer, script_all_before_an_answer, 20000 * MS);
	begin(link, 0, DEPTH);
	assert_int_equal(link_begin(link, &request, waiting_now(), &err), -1);
	end_good(link, 0, DEPTH);
	begin(link, 0, DEPTH);
	end_good(link, 0, DEPTH);
	begin(link, 0, DEPTH);
	end_good(link, 0, DEPTH);
	finish(&peer, link);
}

/* ---- trouble ------------------------------------------------------------------- */

static void script_one_missing(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	answer(peer, requests[0]);
	answer(peer, requests[2]); /* the second is lost */
	peer_wait(peer, &peer->go);
	int old = peer->fd;
	take_connection(peer);
	answer(&(struct peer){.fd = old}, requests[1]); /* late, where nobody listens any more */
	take(peer, requests, 1);
	answer(peer, requests[0]);
	(void)close(old);
}

static void a_lost_reply_ends_all_and_nothing_late_is_taken(void **state)
{
	(void)state;
	struct peer peer;
	static struct link_reply reply;
	struct link *link = start(&peer, script_one_missing, 300 * MS);
	begin(link, 0, DEPTH);
	end_good(link, 0, 1);
	end_as(link, 1, LINK_TIMEOUT);
	(void)link_end(link, waiting_now(), &reply); /* it was answered in time */
	assert_int_equal(reply.status, LINK_OK);
	assert_int_equal(reply.words[0], 1002);
	end_as(link, 1, LINK_TIMEOUT);
	(void)sem_post(&peer.go);
	begin(link, 50, 1);
	end_good(link, 50, 1);
	finish(&peer, link);
}

static void script_closes(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	(void)close(peer->fd);
	peer->fd = -1;
}

static void a_closed_connection_ends_all(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_closes, 20000 * MS);
	begin(link, 0, DEPTH);
	end_as(link, DEPTH, LINK_LOST);
	finish(&peer, link);
}

static void script_idle_close(struct peer *peer)
{
	unsigned char requests[1][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, 1);
	answer(peer, requests[0]);
	peer_wait(peer, &peer->go);
	(void)close(peer->fd);
	(void)sem_post(&peer->told);
	take_connection(peer);
	take(peer, requests, 1);
	answer(peer, requests[0]);
}

static void an_idle_connection_that_was_closed_is_made_anew(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_idle_close, 20000 * MS);
	begin(link, 3, 1);
	end_good(link, 3, 1);
	(void)sem_post(&peer.go);
	peer_wait(&peer, &peer.told);
	begin(link, 4, 1);
	end_good(link, 4, 1);
	finish(&peer, link);
}

static void script_noise(struct peer *peer)
{
	static const unsigned char noise[] = {1, 2, 3, 4, 5, 6, 7, 8, 9, 10};
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	peer_send(peer, noise, sizeof noise);
}

static void what_is_no_modbus_ends_all(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_noise, 20000 * MS);
	begin(link, 0, DEPTH);
	end_as(link, DEPTH, LINK_GARBLED);
	finish(&peer, link);
}

static void script_other_unit(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	take(peer, requests, DEPTH);
	requests[0][6] = 9;
	answer(peer, requests[0]);
}

static void another_units_answer_is_no_answer(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_other_unit, 20000 * MS);
	begin(link, 0, DEPTH);
	end_as(link, DEPTH, LINK_GARBLED);
	finish(&peer, link);
}

static void script_mute(struct peer *peer)
{
	unsigned char requests[DEPTH][REQUEST_BYTES];
	take_connection(peer);
	peer_wait(peer, &peer->go); /* the link stands in the context */
	take(peer, requests, DEPTH);
	link_interrupt(peer->context);
}

static void an_interrupt_breaks_all_off(void **state)
{
	(void)state;
	struct peer peer;
	struct link *link = start(&peer, script_mute, 20000 * MS);
	peer.context = link;
	(void)sem_post(&peer.go);
	begin(link, 0, DEPTH);
	end_as(link, DEPTH, LINK_STOPPED);
	finish(&peer, link);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(all_are_under_way_before_the_first_answer),
	    cmocka_unit_test(a_refill_goes_out_while_others_are_under_way),
	    cmocka_unit_test(answers_find_their_request_in_any_order),
	    cmocka_unit_test(one_more_than_the_depth_is_refused),
	    cmocka_unit_test(a_lost_reply_ends_all_and_nothing_late_is_taken),
	    cmocka_unit_test(a_closed_connection_ends_all),
	    cmocka_unit_test(an_idle_connection_that_was_closed_is_made_anew),
	    cmocka_unit_test(what_is_no_modbus_ends_all),
	    cmocka_unit_test(another_units_answer_is_no_answer),
	    cmocka_unit_test(an_interrupt_breaks_all_off),
	};
	return RUN_GROUP(tests);
}
