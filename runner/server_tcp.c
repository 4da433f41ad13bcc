/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Modbus TCP framing (MBAP) of the served bench. Several requests may come in
 * one segment, or one in many; each is answered with its own transaction
 * number. A header that is not Modbus closes the connection: behind it nothing
 * can be found again. A client that does not take its replies is closed too,
 * since the loop serves all others and must not wait.
 */
#include <errno.h>
#include <netdb.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include "server_inner.h"

static void name_address(struct served_link *link)
{
	struct sockaddr_storage address;
	socklen_t size = sizeof address;
	char host[NI_MAXHOST] = "?", port[NI_MAXSERV] = "?";
	if (getsockname(link->listener, (struct sockaddr *)&address, &size) == 0)
		(void)getnameinfo((struct sockaddr *)&address, size, host, sizeof host, port, sizeof port,
		                  NI_NUMERICHOST | NI_NUMERICSERV);
	bool bracket = strchr(host, ':') != NULL;
	(void)snprintf(link->address, sizeof link->address, "tcp:%s%.90s%s:%.8s", bracket ? "[" : "",
	               host, bracket ? "]" : "", port);
}

int server_tcp_listen(struct served_link *link, const char *host, unsigned port, struct err *reterr)
{
	const struct addrinfo hints = {.ai_socktype = SOCK_STREAM,
	                               .ai_flags = AI_NUMERICSERV | AI_PASSIVE};
	struct addrinfo *found = NULL;
	char service[16], text[128];
	const int on = 1;

	(void)snprintf(service, sizeof service, "%u", port);
	int code = getaddrinfo(host, service, &hints, &found);
	if (code != 0)
		return err_set(reterr, ERR_LINK, "%s: %s", host, gai_strerror(code));
	int fd = socket(found->ai_family, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
	if (fd >= 0)
		(void)setsockopt(fd, SOL_SOCKET, SO_REUSEADDR, &on, sizeof on);
	bool listening = fd >= 0 && bind(fd, found->ai_addr, found->ai_addrlen) == 0 &&
	                 listen(fd, SERVER_CLIENTS_MOST) == 0;
	code = errno;
	freeaddrinfo(found);
	if (!listening) {
		if (fd >= 0)
			(void)close(fd);
		return err_set(reterr, ERR_LINK, "cannot listen on tcp:%s:%u: %s", host, port,
		               strerror_r(code, text, sizeof text));
	}
	link->listener = fd;
	name_address(link);
	return 0;
}

void server_tcp_accept(struct server *server, int link)
{
	const int on = 1;
	int fd = accept4(server->links[link].listener, NULL, NULL, SOCK_NONBLOCK | SOCK_CLOEXEC);
	if (fd < 0)
		return;
	for (size_t i = 0; i < SERVER_CLIENTS_MOST; i++) {
		struct tcp_client *client = &server->clients[i];
		if (client->fd >= 0)
			continue;
		(void)setsockopt(fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
		client->fd = fd;
		client->link = link;
		client->length = 0;
		return;
	}
	(void)close(fd); /* all places are taken */
}

static void drop(struct tcp_client *client)
{
	(void)close(client->fd);
	client->fd = -1;
}

/* Answers the frame at the head of the client's bytes. False: the reply could not be sent. */
static bool answer(struct server *server, struct tcp_client *client, size_t length)
{
	uint8_t adu[TCP_ADU_MOST];
	(void)server_advance(server);
	size_t reply = served_answer(server->served, client->link, client->bytes[6],
	                             client->bytes + MBAP_BYTES, length - MBAP_BYTES, adu + MBAP_BYTES);
	if (reply == 0)
		return true;
	memcpy(adu, client->bytes, 4);
	adu[4] = (uint8_t)((reply + 1) >> 8);
	adu[5] = (uint8_t)(reply + 1);
	adu[6] = client->bytes[6];
	size_t total = MBAP_BYTES + reply;
	return send(client->fd, adu, total, MSG_NOSIGNAL) == (ssize_t)total;
}

void server_tcp_serve(struct server *server, struct tcp_client *client)
{
	size_t room = sizeof client->bytes - client->length;
	ssize_t got = recv(client->fd, client->bytes + client->length, room, 0);
	if (got < 0 && (errno == EAGAIN || errno == EINTR))
		return;
	if (got <= 0) {
		drop(client);
		return;
	}
	client->length += (size_t)got;
	while (client->length >= 6) {
		unsigned protocol = (unsigned)client->bytes[2] << 8 | client->bytes[3];
		unsigned follows = (unsigned)client->bytes[4] << 8 | client->bytes[5];
		if (protocol != 0 || follows < 2 || follows > LINK_PDU_MOST + 1) {
			drop(client);
			return;
		}
		size_t length = 6 + follows;
		if (client->length < length)
			return;
		if (!answer(server, client, length)) {
			drop(client);
			return;
		}
		client->length -= length;
		memmove(client->bytes, client->bytes + length, client->length);
	}
}
