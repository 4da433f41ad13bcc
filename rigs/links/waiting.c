/* SPDX-License-Identifier: Apache-2.0 */
/*
 * An eventfd in the same ppoll() ends a wait at once. shutdown() of the socket
 * from the other thread was rejected: it needs a mutex against a concurrent
 * close (else it may hit a descriptor that meanwhile is another file), loses
 * the connection also where nothing was outstanding, and serial lines have
 * none. select() was rejected: it cannot watch descriptors above 1023.
 */
#include "waiting.h"

#include <errno.h>
#include <poll.h>
#include <sys/eventfd.h>
#include <time.h>
#include <unistd.h>

int waking_init(struct waking *waking)
{
	atomic_init(&waking->signalled, false);
	waking->event_fd = eventfd(0, EFD_CLOEXEC | EFD_NONBLOCK);
	return waking->event_fd < 0 ? -1 : 0;
}

void waking_release(struct waking *waking)
{
	if (waking->event_fd >= 0)
		(void)close(waking->event_fd);
	waking->event_fd = -1;
}

void waking_signal(struct waking *waking)
{
	/* In this order: a flag without a count is harmless, a count without a flag is taken by who
	 * waits next. */
	(void)eventfd_write(waking->event_fd, 1);
	atomic_store(&waking->signalled, true);
}

void waking_clear(struct waking *waking)
{
	eventfd_t count;
	if (atomic_exchange(&waking->signalled, false))
		(void)eventfd_read(waking->event_fd, &count);
}

int64_t waiting_now(void)
{
	struct timespec t;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (int64_t)t.tv_sec * 1000000000 + t.tv_nsec;
}

enum waited waiting_for(const struct waking *waking, int fd, short events, int64_t deadline_ns)
{
	for (;;) {
		struct pollfd fds[2] = {
		    {.fd = waking->event_fd, .events = POLLIN},
		    {.fd = fd, .events = events},
		};
		int64_t left_ns = deadline_ns - waiting_now();
		if (left_ns < 0)
			left_ns = 0;
		struct timespec left = {.tv_sec = left_ns / 1000000000, .tv_nsec = left_ns % 1000000000};
		int ready = ppoll(fds, 2, &left, NULL);
		if (ready < 0 && errno != EINTR)
			return WAITED_FAILED;
		if (ready > 0 && fds[0].revents) {
			/* Taken here: the flag may come only after the next request has begun. */
			eventfd_t count;
			(void)eventfd_read(waking->event_fd, &count);
			return WAITED_STOPPED;
		}
		if (ready > 0)
			return WAITED_READY; /* errors and hang-ups show in the call that follows */
		if (ready == 0 && left_ns == 0)
			return WAITED_TIMEOUT;
	}
}
