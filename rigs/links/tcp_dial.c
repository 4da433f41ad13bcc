/* SPDX-License-Identifier: Apache-2.0 */
/*
 * A non-blocking connect of our own, so that it has a timeout of its own and
 * another thread can break it off; see tcp.c for what was rejected.
 */
#include "tcp_dial.h"

#include <errno.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <stdio.h>
#include <sys/socket.h>
#include <unistd.h>

static void set_options(int fd, int64_t timeout_ns)
{
	const int on = 1;
	const unsigned gone_ms = (unsigned)(2 * timeout_ns / 1000000) + 1;
	/* Best effort: without them the link is slower to send or to see a dead peer. */
	(void)setsockopt(fd, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
	(void)setsockopt(fd, SOL_SOCKET, SO_KEEPALIVE, &on, sizeof on);
	(void)setsockopt(fd, IPPROTO_TCP, TCP_USER_TIMEOUT, &gone_ms, sizeof gone_ms);
}

/* Connects to one address. Returns the descriptor; -1 with errno; ECANCELED: broken off. */
static int connect_to(const struct waking *waking, const struct addrinfo *to, int64_t timeout_ns,
                      int64_t deadline_ns)
{
	int fd = socket(to->ai_family, to->ai_socktype | SOCK_NONBLOCK | SOCK_CLOEXEC, to->ai_protocol);
	if (fd < 0)
		return -1;
	set_options(fd, timeout_ns);
	int code = 0;
	socklen_t size = sizeof code;
	if (connect(fd, to->ai_addr, to->ai_addrlen) < 0) {
		if (errno != EINPROGRESS) {
			code = errno;
		} else {
			switch (waiting_for(waking, fd, POLLOUT, deadline_ns)) {
			case WAITED_READY:
				if (getsockopt(fd, SOL_SOCKET, SO_ERROR, &code, &size) < 0)
					code = errno;
				break;
			case WAITED_TIMEOUT:
				code = ETIMEDOUT;
				break;
			case WAITED_STOPPED:
				code = ECANCELED;
				break;
			case WAITED_FAILED:
				code = errno;
				break;
			}
		}
	}
	if (code == 0)
		return fd;
	(void)close(fd);
	errno = code;
	return -1;
}

int tcp_dial(const struct waking *waking, const struct addrinfo *addresses, int64_t timeout_ns)
{
	int64_t deadline_ns = waiting_now() + timeout_ns;
	int fd = -1;
	errno = ENOENT;
	for (const struct addrinfo *to = addresses; to && fd < 0; to = to->ai_next) {
		fd = connect_to(waking, to, timeout_ns, deadline_ns);
		if (fd < 0 && (errno == ECANCELED || errno == ETIMEDOUT))
			break;
	}
	return fd;
}

int tcp_resolve(const struct link_config *config, const char *shown,
                struct addrinfo **ret_addresses, struct err *reterr)
{
	const struct addrinfo hints = {.ai_socktype = SOCK_STREAM, .ai_flags = AI_NUMERICSERV};
	char port[8];
	(void)snprintf(port, sizeof port, "%u", config->tcp_port);
	int code = getaddrinfo(config->tcp_host, port, &hints, ret_addresses);
	if (code == 0)
		return 0;
	*ret_addresses = NULL;
	return err_set(reterr, ERR_LINK, "%s: %s", shown, gai_strerror(code));
}
