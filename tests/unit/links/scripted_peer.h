/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SCRIPTED_PEER_H
#define DRIVETRIAL_SCRIPTED_PEER_H
/*
 * The other end of a wire, in a thread that runs a script: what to read, what
 * to answer, also wrongly. Order comes from what is read and from `go` and
 * `told`, never from sleeping; every read is bounded. Scripts assert nothing
 * (cmocka allows that in the main thread only) but count what went wrong.
 */
#include <poll.h>
#include <pthread.h>
#include <semaphore.h>
#include <stdbool.h>
#include <string.h>
#include <sys/socket.h>
#include <time.h>
#include <unistd.h>

enum { PEER_PATIENCE_MS = 20000 };

struct peer {
	int listener, fd; /* TCP: fd is the accepted connection; RTU: the master */
	void (*script)(struct peer *peer);
	pthread_t thread;
	sem_t go, told; /* the test lets the script go on; the script tells the test */
	int wrong;      /* reads that did not bring what was wanted */
	unsigned char last[300];
	size_t last_length;
	void *context;
};

static inline void *peer_main(void *argument)
{
	struct peer *peer = argument;
	peer->script(peer);
	return NULL;
}

static inline void peer_start(struct peer *peer, void (*script)(struct peer *peer))
{
	peer->script = script;
	(void)sem_init(&peer->go, 0, 0);
	(void)sem_init(&peer->told, 0, 0);
	if (pthread_create(&peer->thread, NULL, peer_main, peer) != 0)
		peer->wrong++;
}

static inline void peer_wait(struct peer *peer, sem_t *semaphore)
{
	struct timespec until;
	(void)clock_gettime(CLOCK_REALTIME, &until);
	until.tv_sec += PEER_PATIENCE_MS / 1000;
	if (sem_timedwait(semaphore, &until) != 0)
		peer->wrong++;
}

static inline void peer_join(struct peer *peer)
{
	(void)pthread_join(peer->thread, NULL);
	(void)sem_destroy(&peer->go);
	(void)sem_destroy(&peer->told);
}

/* Reads exactly `length` bytes to `at`. */
static inline bool peer_read(struct peer *peer, unsigned char *at, size_t length)
{
	while (length > 0) {
		struct pollfd poller = {.fd = peer->fd, .events = POLLIN};
		ssize_t got = -1;
		if (poll(&poller, 1, PEER_PATIENCE_MS) == 1)
			got = read(peer->fd, at, length);
		if (got <= 0) {
			peer->wrong++;
			return false;
		}
		at += got;
		length -= (size_t)got;
	}
	return true;
}

static inline void peer_send(struct peer *peer, const unsigned char *bytes, size_t length)
{
	if (write(peer->fd, bytes, length) != (ssize_t)length)
		peer->wrong++;
}

#endif
