/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See realtime.h. Memory that comes later is locked only where there is no
 * bound on locked memory: with a bound the lock would make an allocation fail
 * later, perhaps on the way to rest. A thread is pinned to a CPU only once it
 * has SCHED_FIFO; without it pinning keeps it from running where there is room.
 */
#include "realtime.h"

#include <errno.h>
#include <sched.h>
#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/resource.h>

/* A process with this capability is not bound by RLIMIT_MEMLOCK (capabilities(7)). */
enum { CAPABILITY_IPC_LOCK = 14 };

static bool may_lock_without_bound(void)
{
	struct rlimit limit;
	if (getrlimit(RLIMIT_MEMLOCK, &limit) == 0 && limit.rlim_cur == RLIM_INFINITY)
		return true;
	char line[128];
	unsigned long long effective = 0;
	FILE *status = fopen("/proc/self/status", "re");
	while (status && fgets(line, sizeof line, status))
		if (sscanf(line, "CapEff: %llx", &effective) == 1)
			break;
	if (status)
		(void)fclose(status);
	return effective >> CAPABILITY_IPC_LOCK & 1;
}

void realtime_begin(struct realtime *realtime)
{
	*realtime = (struct realtime){0};
	if (may_lock_without_bound() && mlockall(MCL_CURRENT | MCL_FUTURE) == 0)
		realtime->locked = 2;
	else if (mlockall(MCL_CURRENT) == 0)
		realtime->locked = 1;
}

/* The CPU that is `back` places before the last allowed one, round and round; -1: only one. */
static int allowed_cpu(int back)
{
	cpu_set_t allowed;
	int found[CPU_SETSIZE], count = 0;
	if (sched_getaffinity(0, sizeof allowed, &allowed) < 0)
		return -1;
	for (int cpu = 0; cpu < CPU_SETSIZE; cpu++)
		if (CPU_ISSET((size_t)cpu, &allowed))
			found[count++] = cpu;
	return count < 2 ? -1 : found[count - 1 - back % count];
}

void realtime_thread(struct realtime *realtime, pthread_t thread, int priority, int cpu)
{
	const struct sched_param param = {.sched_priority = priority};
	realtime->threads++;
	int error = pthread_setschedparam(thread, SCHED_FIFO, &param);
	if (error != 0) {
		realtime->error = realtime->error ? realtime->error : error;
		return;
	}
	realtime->fifo++;
	int number = cpu < 0 ? -1 : allowed_cpu(cpu);
	if (number < 0 || realtime->pinned == sizeof realtime->cpus / sizeof realtime->cpus[0])
		return;
	cpu_set_t set;
	CPU_ZERO(&set);
	CPU_SET((size_t)number, &set);
	if (pthread_setaffinity_np(thread, sizeof set, &set) == 0)
		realtime->cpus[realtime->pinned++] = number;
}

void realtime_text(const struct realtime *realtime, char *text, size_t size)
{
	char reason[64], cpus[64] = "";
	size_t length = 0;
	for (int i = 0; i < realtime->pinned && length < sizeof cpus - 8; i++)
		length += (size_t)snprintf(cpus + length, sizeof cpus - length, "%s %d",
		                           i == 0 ? ", links on CPU" : "", realtime->cpus[i]);
	const char *locked = realtime->locked == 2   ? "memory locked"
	                     : realtime->locked == 1 ? "memory locked as far as it was there"
	                                             : "memory not locked";
	if (realtime->fifo > 0)
		(void)snprintf(text, size, "SCHED_FIFO for %d of %d threads, %s%s, %d us spin",
		               realtime->fifo, realtime->threads, locked, cpus,
		               (int)(REALTIME_SPIN_NS / 1000));
	else
		(void)snprintf(text, size, "ordinary scheduling (no SCHED_FIFO: %s), %s, %d us spin",
		               strerror_r(realtime->error ? realtime->error : EPERM, reason, sizeof reason),
		               locked, (int)(REALTIME_SPIN_NS / 1000));
}
