/* SPDX-License-Identifier: Apache-2.0 */
/*
 * CLOCK_MONOTONIC, since wall-clock time is stepped by its own servants in the
 * middle of a night run. It is still slewed to the true second, which
 * CLOCK_MONOTONIC_RAW (rejected) is not.
 */
#include "clock.h"

#include <time.h>

static int64_t real_now(void *context)
{
	struct timespec t;
	(void)context;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (int64_t)t.tv_sec * 1000000000 + t.tv_nsec;
}

static int64_t virtual_now(void *context)
{
	return ((const struct virtual_clock *)context)->now_ns;
}

struct clock clock_real(void)
{
	return (struct clock){.now = real_now, .context = 0};
}

struct clock clock_virtual(struct virtual_clock *clock)
{
	return (struct clock){.now = virtual_now, .context = clock};
}
