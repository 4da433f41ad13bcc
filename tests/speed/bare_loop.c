/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What one would write without drivetrial: a bare libmodbus loop, as the
 * measure that sampling is held against.
 *
 *     bare_loop tcp PORT REGISTERS SECONDS [PERIOD_US] [fifo]
 *     bare_loop rtu PATH BAUD UNIT REGISTERS SECONDS [gap]
 *
 * PERIOD_US 0: without pause, else clock_nanosleep to absolute deadlines and
 * one read at each. gap: the t3.5 that Modbus over Serial Line V1.02 (2.5.1.1)
 * demands between frames, which the library does not keep. fifo: SCHED_FIFO at
 * the priority of --realtime. Prints one line: reads, failed reads, seconds,
 * CPU seconds, and lateness in ns (median, 99 %) of the periodic loop, counted
 * from the earliest: the same measure that the samples of a run allow.
 */
#include <errno.h>
#include <modbus/modbus.h>
#include <sched.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <time.h>

enum { STAMPS_MOST = 4000000 };

static int64_t now(void)
{
	struct timespec t;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (int64_t)t.tv_sec * 1000000000 + t.tv_nsec;
}

static void sleep_until(int64_t at_ns)
{
	const struct timespec at = {.tv_sec = at_ns / 1000000000, .tv_nsec = at_ns % 1000000000};
	while (clock_nanosleep(CLOCK_MONOTONIC, TIMER_ABSTIME, &at, NULL) == EINTR)
		;
}

static double cpu_seconds(void)
{
	struct rusage usage;
	(void)getrusage(RUSAGE_SELF, &usage);
	return (double)(usage.ru_utime.tv_sec + usage.ru_stime.tv_sec) +
	       1e-6 * (double)(usage.ru_utime.tv_usec + usage.ru_stime.tv_usec);
}

struct loop {
	modbus_t *port;
	int registers;
	int64_t period_ns, gap_ns, length_ns;
	int64_t *late;
	size_t reads, failed;
};

static void run(struct loop *loop)
{
	uint16_t words[MODBUS_MAX_READ_REGISTERS];
	int64_t begin = now(), slot = begin, end = begin + loop->length_ns, t;
	while ((t = now()) < end) {
		if (loop->period_ns > 0) {
			sleep_until(slot);
			t = now();
		}
		if (modbus_read_input_registers(loop->port, 0, loop->registers, words) != loop->registers)
			loop->failed++;
		else if (loop->reads < STAMPS_MOST)
			loop->late[loop->reads++] = t - slot;
		if (loop->period_ns > 0) {
			slot += loop->period_ns;
			while (slot < now())
				slot += loop->period_ns;
		} else if (loop->gap_ns > 0) {
			sleep_until(now() + loop->gap_ns);
		}
	}
}

static int ascending(const void *a, const void *b)
{
	int64_t left = *(const int64_t *)a, right = *(const int64_t *)b;
	return (left > right) - (left < right);
}

static void report(struct loop *loop, double seconds, double cpu)
{
	long long median = 0, most = 0;
	if (loop->period_ns > 0 && loop->reads > 0) {
		qsort(loop->late, loop->reads, sizeof *loop->late, ascending);
		median = (long long)(loop->late[loop->reads / 2] - loop->late[0]);
		most = (long long)(loop->late[loop->reads * 99 / 100] - loop->late[0]);
	}
	(void)printf("%zu %zu %.6f %.6f %lld %lld\n", loop->reads, loop->failed, seconds, cpu, median,
	             most);
}

static modbus_t *open_rtu(char **argv, struct loop *loop, int argc)
{
	int baud = atoi(argv[3]);
	modbus_t *port = modbus_new_rtu(argv[2], baud, 'E', 8, 1);
	if (port)
		(void)modbus_set_slave(port, atoi(argv[4]));
	loop->registers = atoi(argv[5]);
	loop->length_ns = (int64_t)(atof(argv[6]) * 1e9);
	if (argc > 7 && strcmp(argv[7], "gap") == 0)
		loop->gap_ns = baud > 19200 ? 1750000 : INT64_C(38500000000) / baud;
	return port;
}

static modbus_t *open_tcp(char **argv, struct loop *loop, int argc)
{
	modbus_t *port = modbus_new_tcp("127.0.0.1", atoi(argv[2]));
	loop->registers = atoi(argv[3]);
	loop->length_ns = (int64_t)(atof(argv[4]) * 1e9);
	if (argc > 5)
		loop->period_ns = (int64_t)(atof(argv[5]) * 1e3);
	if (argc > 6 && strcmp(argv[6], "fifo") == 0) {
		const struct sched_param param = {.sched_priority = 50};
		(void)mlockall(MCL_CURRENT);
		if (sched_setscheduler(0, SCHED_FIFO, &param) < 0)
			(void)fprintf(stderr, "bare_loop: no SCHED_FIFO: %s\n", strerror(errno));
	}
	return port;
}

int main(int argc, char **argv)
{
	struct loop loop = {.late = malloc(STAMPS_MOST * sizeof(int64_t))};
	bool rtu = argc >= 7 && strcmp(argv[1], "rtu") == 0;
	bool tcp = argc >= 5 && strcmp(argv[1], "tcp") == 0;
	if (!loop.late || (!rtu && !tcp))
		return 64;
	(void)prctl(PR_SET_TIMERSLACK, 1UL);
	loop.port = rtu ? open_rtu(argv, &loop, argc) : open_tcp(argv, &loop, argc);
	if (!loop.port || modbus_connect(loop.port) < 0) {
		(void)fprintf(stderr, "bare_loop: %s\n", modbus_strerror(errno));
		return 1;
	}
	(void)modbus_set_response_timeout(loop.port, 2, 0);
	int64_t begin = now();
	double cpu = cpu_seconds();
	run(&loop);
	report(&loop, (double)(now() - begin) / 1e9, cpu_seconds() - cpu);
	modbus_close(loop.port);
	modbus_free(loop.port);
	free(loop.late);
	return 0;
}
