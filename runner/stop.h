/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_STOP_H
#define DRIVETRIAL_STOP_H
/*
 * The one flag that ends a run early: an interlock, a lost link, a signal, a
 * fault of the program. The first reason wins; any thread may raise it.
 */
#include <pthread.h>
#include <stdatomic.h>
#include <stdbool.h>

struct stop {
	atomic_bool raised;
	pthread_mutex_t mutex;
	char reason[256];
};

void stop_init(struct stop *stop);
void stop_release(struct stop *stop);
/* True where this call was the first. */
bool stop_raise(struct stop *stop, const char *format, ...) __attribute__((format(printf, 2, 3)));
static inline bool stop_raised(struct stop *stop)
{
	return atomic_load_explicit(&stop->raised, memory_order_acquire);
}
/* A copy of the reason; "" where it was not raised. */
void stop_reason(struct stop *stop, char *buffer, size_t size);

#endif
