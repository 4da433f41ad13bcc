/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_RING_H
#define DRIVETRIAL_RING_H
/*
 * A bounded queue between exactly two threads: one pushes, one pops. Elements
 * have a fixed size and are copied. Nothing blocks and nothing allocates after
 * ring_init(). A full ring refuses; the pusher decides what that means.
 */
#include <stdalign.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stddef.h>

#include "err.h"

struct ring {
	unsigned char *bytes;
	size_t element, count;          /* count is a power of two */
	alignas(64) atomic_size_t head; /* next to pop */
	alignas(64) atomic_size_t tail; /* next to push */
};

/* count is rounded up to a power of two. Errors: ERR_NOMEM. */
int ring_init(struct ring *ring, size_t element, size_t count, struct err *reterr);
void ring_release(struct ring *ring);
/* The pusher's thread: copies `size` (<= element) bytes; false where the ring is full. */
bool ring_push(struct ring *ring, const void *data, size_t size);
/* The popper's thread: the oldest element, or NULL; valid until ring_pop(). */
const void *ring_front(struct ring *ring);
void ring_pop(struct ring *ring);

#endif
