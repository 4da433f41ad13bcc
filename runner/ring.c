/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Head and tail only grow; their difference is the filling. Release on the
 * own index and acquire on the other's is all the order that is needed. A
 * mutex was rejected: main holds files open for milliseconds, and a worker
 * must never wait for it.
 */
#include "ring.h"

#include <stdlib.h>
#include <string.h>

int ring_init(struct ring *ring, size_t element, size_t count, struct err *reterr)
{
	size_t rounded = 16;
	while (rounded < count)
		rounded *= 2;
	ring->element = (element + 15) / 16 * 16;
	ring->count = rounded;
	atomic_init(&ring->head, 0);
	atomic_init(&ring->tail, 0);
	ring->bytes = calloc(rounded, ring->element);
	if (!ring->bytes)
		return err_set(reterr, ERR_NOMEM, "no memory for a queue of %zu entries", rounded);
	return 0;
}

void ring_release(struct ring *ring)
{
	if (!ring)
		return;
	free(ring->bytes);
	ring->bytes = NULL;
}

bool ring_push(struct ring *ring, const void *data, size_t size)
{
	size_t tail = atomic_load_explicit(&ring->tail, memory_order_relaxed);
	size_t head = atomic_load_explicit(&ring->head, memory_order_acquire);
	if (tail - head == ring->count || size > ring->element)
		return false;
	memcpy(ring->bytes + (tail & (ring->count - 1)) * ring->element, data, size);
	atomic_store_explicit(&ring->tail, tail + 1, memory_order_release);
	return true;
}

const void *ring_front(struct ring *ring)
{
	size_t head = atomic_load_explicit(&ring->head, memory_order_relaxed);
	if (head == atomic_load_explicit(&ring->tail, memory_order_acquire))
		return NULL;
	return ring->bytes + (head & (ring->count - 1)) * ring->element;
}

void ring_pop(struct ring *ring)
{
	size_t head = atomic_load_explicit(&ring->head, memory_order_relaxed);
	atomic_store_explicit(&ring->head, head + 1, memory_order_release);
}
