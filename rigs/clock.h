/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_CLOCK_H
#define DRIVETRIAL_CLOCK_H
/*
 * Time as it is injected everywhere above checks/. Nanoseconds, monotonic,
 * from an arbitrary origin; the run subtracts its start.
 */
#include <stdint.h>

struct clock {
	int64_t (*now)(void *context);
	void *context;
};

/* CLOCK_MONOTONIC. */
struct clock clock_real(void);

/* A number that only the loop moves on. */
struct virtual_clock {
	int64_t now_ns;
};
struct clock clock_virtual(struct virtual_clock *clock);

static inline int64_t clock_now(const struct clock *clock)
{
	return clock->now(clock->context);
}

#endif
