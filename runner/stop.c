/* SPDX-License-Identifier: Apache-2.0 */
/* A mutex guards the text; the atomic is what the hot paths look at. */
#include "stop.h"

#include <stdarg.h>
#include <stdio.h>

void stop_init(struct stop *stop)
{
	atomic_init(&stop->raised, false);
	(void)pthread_mutex_init(&stop->mutex, NULL);
	stop->reason[0] = '\0';
}

void stop_release(struct stop *stop)
{
	(void)pthread_mutex_destroy(&stop->mutex);
}

bool stop_raise(struct stop *stop, const char *format, ...)
{
	(void)pthread_mutex_lock(&stop->mutex);
	bool first = !atomic_load_explicit(&stop->raised, memory_order_relaxed);
	if (first) {
		va_list args;
		va_start(args, format);
		(void)vsnprintf(stop->reason, sizeof stop->reason, format, args);
		va_end(args);
		atomic_store_explicit(&stop->raised, true, memory_order_release);
	}
	(void)pthread_mutex_unlock(&stop->mutex);
	return first;
}

void stop_reason(struct stop *stop, char *buffer, size_t size)
{
	(void)pthread_mutex_lock(&stop->mutex);
	(void)snprintf(buffer, size, "%s", stop->reason);
	(void)pthread_mutex_unlock(&stop->mutex);
}
