/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A Modbus TCP server that costs next to nothing, so that what a client costs
 * can be seen: register 0 counts, the others are 0, writes are echoed.
 *
 *     speed_server [DELAY_MS ...]      one port for each, default one without delay
 *
 * prints `ready PORT ...` and ends when its standard input does. Replies to a
 * port with a delay are held back for as long. The modelled bench was rejected
 * as the server here: moving the model costs more than the transaction.
 */
#include <arpa/inet.h>
#include <errno.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/socket.h>
#include <time.h>
#include <unistd.h>

enum { PORTS_MOST = 8, CLIENTS_MOST = 32, ADU_MOST = 260, IN_MOST = 16 * ADU_MOST };

struct client {
	int fd; /* -1: free */
	int64_t delay_ns, due_ns;
	size_t in_length, out_length;
	uint8_t in[IN_MOST], out[16 * ADU_MOST];
};

static struct client clients[CLIENTS_MOST];
static uint16_t counter;

static int64_t now(void)
{
	struct timespec t;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (int64_t)t.tv_sec * 1000000000 + t.tv_nsec;
}

static int listen_any(uint16_t *ret_port)
{
	struct sockaddr_in address = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
	socklen_t size = sizeof address;
	int fd = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
	if (fd < 0 || bind(fd, (struct sockaddr *)&address, sizeof address) < 0 || listen(fd, 8) < 0 ||
	    getsockname(fd, (struct sockaddr *)&address, &size) < 0)
		return -1;
	*ret_port = ntohs(address.sin_port);
	return fd;
}

static void greet(int listener, int64_t delay_ns)
{
	const int on = 1;
	int fd = accept4(listener, NULL, NULL, SOCK_CLOEXEC | SOCK_NONBLOCK);
	for (int i = 0; fd >= 0 && i < CLIENTS_MOST; i++) {
		if (clients[i].fd >= 0)
			continue;
		(void)setsockopt(fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
		clients[i].fd = fd;
		clients[i].delay_ns = delay_ns;
		clients[i].in_length = clients[i].out_length = 0;
		return;
	}
	if (fd >= 0)
		(void)close(fd);
}

/* Puts the reply to one frame behind those that wait; 0 where it is not understood. */
static size_t answer(struct client *client, const uint8_t *frame)
{
	uint8_t *out = client->out + client->out_length;
	unsigned function = frame[7], count = (unsigned)frame[10] << 8 | frame[11];
	memcpy(out, frame, 8);
	size_t pdu = 5; /* writes: address and count, or value, come back */
	if (function >= 1 && function <= 4) {
		size_t bytes = function <= 2 ? (count + 7) / 8 : 2 * (size_t)count;
		if (count < 1 || bytes > 250)
			return 0;
		out[8] = (uint8_t)bytes;
		memset(out + 9, 0, bytes);
		if (function == 4 && frame[8] == 0 && frame[9] == 0) {
			counter++;
			out[9] = (uint8_t)(counter >> 8);
			out[10] = (uint8_t)counter;
		}
		pdu = 2 + bytes;
	} else {
		memcpy(out + 8, frame + 8, 4);
	}
	out[4] = (uint8_t)((pdu + 1) >> 8);
	out[5] = (uint8_t)(pdu + 1);
	return 7 + pdu;
}

static void hang_up(struct client *client)
{
	(void)close(client->fd);
	client->fd = -1;
}

static void flush_out(struct client *client)
{
	if (client->out_length > 0 &&
	    send(client->fd, client->out, client->out_length, MSG_NOSIGNAL) < 0)
		hang_up(client);
	client->out_length = 0;
}

static void serve(struct client *client)
{
	ssize_t got =
	    recv(client->fd, client->in + client->in_length, sizeof client->in - client->in_length, 0);
	if (got <= 0) {
		if (got == 0 || (errno != EAGAIN && errno != EINTR))
			hang_up(client);
		return;
	}
	client->in_length += (size_t)got;
	size_t at = 0;
	while (client->in_length - at >= 12) {
		size_t length = 6 + ((size_t)client->in[at + 4] << 8 | client->in[at + 5]);
		if (length > ADU_MOST || client->in_length - at < length ||
		    client->out_length + ADU_MOST > sizeof client->out)
			break;
		if (client->out_length == 0)
			client->due_ns = now() + client->delay_ns;
		client->out_length += answer(client, client->in + at);
		at += length;
	}
	memmove(client->in, client->in + at, client->in_length - at);
	client->in_length -= at;
	if (client->delay_ns == 0)
		flush_out(client);
}

/* Sends what is due; returns the ns until the next, or -1. */
static int64_t send_due(void)
{
	int64_t next = -1;
	for (int i = 0; i < CLIENTS_MOST; i++) {
		if (clients[i].fd < 0 || clients[i].out_length == 0)
			continue;
		int64_t left = clients[i].due_ns - now();
		if (left <= 0)
			flush_out(&clients[i]);
		else if (next < 0 || left < next)
			next = left;
	}
	return next;
}

int main(int argc, char **argv)
{
	int listeners[PORTS_MOST], ports = argc > 1 ? argc - 1 : 1;
	int64_t delays[PORTS_MOST] = {0};
	if (ports > PORTS_MOST)
		return 64;
	for (int i = 0; i < CLIENTS_MOST; i++)
		clients[i].fd = -1;
	(void)prctl(PR_SET_TIMERSLACK, 1UL);
	(void)printf("ready");
	for (int i = 0; i < ports; i++) {
		uint16_t port;
		delays[i] = argc > 1 ? (int64_t)(atof(argv[i + 1]) * 1e6) : 0;
		listeners[i] = listen_any(&port);
		if (listeners[i] < 0)
			return 1;
		(void)printf(" %u", port);
	}
	(void)printf("\n");
	(void)fflush(stdout);
	for (;;) {
		struct pollfd fds[1 + PORTS_MOST + CLIENTS_MOST];
		fds[0] = (struct pollfd){.fd = STDIN_FILENO, .events = POLLIN};
		for (int i = 0; i < ports; i++)
			fds[1 + i] = (struct pollfd){.fd = listeners[i], .events = POLLIN};
		for (int i = 0; i < CLIENTS_MOST; i++)
			fds[1 + ports + i] = (struct pollfd){.fd = clients[i].fd, .events = POLLIN};
		int64_t left = send_due();
		struct timespec wait = {.tv_sec = left / 1000000000, .tv_nsec = left % 1000000000};
		if (ppoll(fds, (nfds_t)(1 + ports + CLIENTS_MOST), left < 0 ? NULL : &wait, NULL) <= 0)
			continue;
		if (fds[0].revents)
			return 0;
		for (int i = 0; i < ports; i++)
			if (fds[1 + i].revents)
				greet(listeners[i], delays[i]);
		for (int i = 0; i < CLIENTS_MOST; i++)
			if (fds[1 + ports + i].revents && clients[i].fd >= 0)
				serve(&clients[i]);
	}
}
