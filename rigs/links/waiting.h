/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_WAITING_H
#define DRIVETRIAL_WAITING_H
/*
 * Waiting for a descriptor until an absolute time, in a way that another
 * thread can break off: the wait also watches an eventfd. Signals do not end
 * it. Only waking_signal() may be called by other threads; it is safe at any
 * time between waking_init() and waking_release().
 */
#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

struct waking {
	int event_fd;
	atomic_bool signalled; /* there may be something to clear: saves a system call a request */
};

enum waited { WAITED_READY, WAITED_TIMEOUT, WAITED_STOPPED, WAITED_FAILED };

int waking_init(struct waking *waking); /* -1: no descriptor left */
void waking_release(struct waking *waking);
void waking_signal(struct waking *waking);
/* Forgets signals that came before. */
void waking_clear(struct waking *waking);

/* CLOCK_MONOTONIC in ns: deadlines are real time, whatever clock stamps. */
int64_t waiting_now(void);

/* events: as of poll(); fd -1: only the time and the signal. */
enum waited waiting_for(const struct waking *waking, int fd, short events, int64_t deadline_ns);

#endif
