/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Any bytes of a peer over a real connection, before the request and after
 * it. Input: bytes sent before (1), function (1), count (1), then the bytes.
 *
 * One thread: the link asks its clock right before it sends, and that is when
 * the peer writes and closes its side, so that no exchange waits for a timeout.
 */
#include <arpa/inet.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include "fuzz.h"
#include "link.h"

struct peer {
	int listener, fd;
	const uint8_t *data;
	size_t size;
	int64_t now_ns;
};

static void accept_client(struct peer *peer)
{
	int fd = accept4(peer->listener, NULL, NULL, SOCK_CLOEXEC);
	if (fd < 0)
		return;
	if (peer->fd >= 0)
		(void)close(peer->fd);
	peer->fd = fd;
}

static int64_t clock_of(void *context)
{
	struct peer *peer = context;
	accept_client(peer);
	if (peer->fd >= 0 && peer->data) {
		(void)!write(peer->fd, peer->data, peer->size);
		(void)shutdown(peer->fd, SHUT_WR);
		peer->data = NULL;
	}
	return peer->now_ns += 1000;
}

static int listen_on(struct sockaddr_in *address)
{
	socklen_t length = sizeof *address;
	int fd = socket(AF_INET, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
	*address =
	    (struct sockaddr_in){.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
	demand(fd >= 0 && bind(fd, (struct sockaddr *)address, length) == 0 && listen(fd, 4) == 0);
	demand(getsockname(fd, (struct sockaddr *)address, &length) == 0);
	return fd;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct peer peer = {.listener = -1, .fd = -1};
	static struct sockaddr_in address;
	static struct link_reply reply;
	struct link *link = NULL;
	struct err err = {0};
	if (size < 3 || size > 4096)
		return 0;
	if (peer.listener < 0)
		peer.listener = listen_on(&address);
	const struct link_config config = {.tcp_host = "127.0.0.1",
	                                   .tcp_port = ntohs(address.sin_port),
	                                   .reply_timeout_ns = 20000000,
	                                   .clock = clock_of,
	                                   .clock_context = &peer};
	const struct link_request request = {.unit = 1,
	                                     .function = data[1] % 2 ? LINK_READ_INPUT_REGISTERS
	                                                             : LINK_WRITE_REGISTER,
	                                     .count = (uint16_t)(1 + data[2] % LINK_REGISTERS_MOST)};
	size_t before = data[0] < size - 3 ? data[0] : size - 3;
	data += 3;
	size -= 3;
	demand(link_tcp_new(&config, &link, &err) == 0);
	struct link_request asked = request;
	if (asked.function == LINK_WRITE_REGISTER)
		asked.count = 1;
	if (link_open(link, &err) == 0) {
		accept_client(&peer);
		if (peer.fd >= 0 && before > 0)
			(void)!write(peer.fd, data, before);
		peer.data = data + before;
		peer.size = size - before;
		demand(link_begin(link, &asked, 0, &err) == 0);
		demand(link_end(link, 0, &reply) <= 0);
		demand(reply.status != LINK_OK || asked.function == LINK_WRITE_REGISTER ||
		       reply.count == asked.count);
		demand(reply.status == LINK_OK || reply.status == LINK_EXCEPTION || reply.message[0]);
		fuzz_readable(reply.message);
	}
	peer.data = NULL;
	link_release(link);
	if (peer.fd >= 0)
		(void)close(peer.fd);
	peer.fd = -1;
	return 0;
}
