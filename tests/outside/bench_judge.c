/* SPDX-License-Identifier: Apache-2.0 */
/*
 * How long judging one long block takes: rise, overshoot, settling and final
 * value over rows in a mapped file of {int64 sent, int64 received, double}.
 * bench_judge.py makes the file, runs this beside NumPy and prints the ratios.
 * Prints seconds, then the anonymous memory in KiB, then the metrics.
 */
#include "recording.h"

#include <fcntl.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <time.h>

static double now(void)
{
	struct timespec t;
	(void)clock_gettime(CLOCK_MONOTONIC, &t);
	return (double)t.tv_sec + (double)t.tv_nsec / 1e9;
}

static long anonymous_kib(void)
{
	char line[200];
	long kib = -1;
	FILE *file = fopen("/proc/self/status", "r");
	while (file && fgets(line, sizeof line, file))
		if (sscanf(line, "RssAnon: %ld", &kib) == 1)
			break;
	if (file)
		(void)fclose(file);
	return kib;
}

int main(int argc, char **argv)
{
	static struct recording rec;
	static struct used_check use;
	struct stat status;
	int file = argc > 1 ? open(argv[1], O_RDONLY) : -1;
	if (file < 0 || fstat(file, &status) < 0)
		return 1;
	size_t size = (size_t)status.st_size;
	const struct recorded_row *rows = mmap(NULL, size, PROT_READ, MAP_PRIVATE, file, 0);
	if (rows == MAP_FAILED)
		return 1;
	recording_init(&rec);
	int channel = recording_channel(&rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	check_use(&use, "step_response");
	check_int(&use, "channel", channel);
	check_int(&use, "from", 0);
	check_ns(&use, "initial_for", S(10));
	recording_mark(&rec, "commanded", 0, 0);
	recording_command(&rec, channel, 1000, 0, 0);
	recording_at(&rec, channel, 0, 0);
	rec.series[channel].row0 = (const unsigned char *)rows;
	rec.series[channel].rows = size / sizeof *rows;
	rec.begin_ns = rows[0].sent;
	rec.end_ns = rows[rec.series[channel].rows - 1].received;
	rec.sample_ns = rows[1].sent - rows[0].sent;
	for (int i = 0; i < 5; i++) {
		double begin = now();
		check_run(&use, &rec);
		printf("seconds %.6f\n", now() - begin);
	}
	printf("anonymous_kib %ld\n", anonymous_kib());
	for (size_t i = 0; i < use.count; i++)
		printf("%s %.9g %.9g %.9g %s\n", use.metrics[i].kind->name, use.metrics[i].value,
		       use.metrics[i].low, use.metrics[i].high, use.metrics[i].note);
	recording_release(&rec);
	return 0;
}
