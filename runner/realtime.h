/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_REALTIME_H
#define DRIVETRIAL_REALTIME_H
/*
 * What `--realtime` asks of the system for the threads of a run, and what was
 * obtained of it, in words for the report. Whatever is not allowed is left out
 * and said; it never ends a run. Main's thread only.
 *
 *     realtime_begin(&realtime);                       memory is locked
 *     realtime_thread(&realtime, thread, PRIORITY, i); for each, once it runs
 *     realtime_text(&realtime, text, sizeof text);
 */
#include <pthread.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Links before the conductor: a late command is timed, a late poll is a hole in the samples. */
enum { REALTIME_LINK_PRIORITY = 50, REALTIME_CONDUCTOR_PRIORITY = 40 };

/*
 * How long a link's thread spins before a slot: longer than a timer on a quiet
 * machine is late, short beside a period of 1 ms.
 */
#define REALTIME_SPIN_NS INT64_C(80000)

struct realtime {
	int threads, fifo, pinned; /* asked for; obtained */
	int error;                 /* of the first refusal of SCHED_FIFO */
	int locked;                /* 0: no; 1: what there was; 2: what comes later too */
	int cpus[16];              /* of the pinned ones */
};

void realtime_begin(struct realtime *realtime);
/* cpu: the how manieth of the CPUs that are allowed, from the last; -1: not pinned. */
void realtime_thread(struct realtime *realtime, pthread_t thread, int priority, int cpu);
/* "SCHED_FIFO for 3 of 3 threads, memory locked, links on CPU 1 0, 80 us spin". */
void realtime_text(const struct realtime *realtime, char *text, size_t size);

#endif
