/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See disk_need.h. The header of a file and the blocks of the file system are
 * left out: what decides are rows. Asking for the space at once (fallocate) was
 * rejected: the files of a run that was cut would then be longer than what was
 * measured, and a reader goes by their size.
 */
#include "disk_need.h"

#include <stdio.h>
#include <string.h>
#include <sys/statvfs.h>

#include "plan_timeline.h"

enum {
	ROW_HEAD = 16,           /* two int64 before the values */
	CSV_ROWS_MOST = 1000000, /* reports/samples_file.h: above that there is none */
	CSV_HEAD = 28,
	CSV_VALUE = 10, /* bytes of a value, about */
};
#define WORTH_A_WORD UINT64_C(64000000)

/* The interval at which the rows of a block are recorded. */
static int64_t interval_of(const struct plan_test *plan, const struct read_block *block)
{
	int64_t interval = plan->channel[block->channels[0]].interval_ns;
	return interval > 0 ? interval : NS_PER_MS;
}

static void add_test(const struct plan_test *plan, const struct test_plan *reads,
                     struct disk_need *need)
{
	for (size_t b = 0; b < reads->block_count; b++) {
		const struct read_block *block = &reads->blocks[b];
		uint64_t rows = (uint64_t)(plan->whole_ns / interval_of(plan, block)) + 1;
		need->rows += rows;
		need->bytes += rows * (ROW_HEAD + 8 * block->channel_count);
		if (rows <= CSV_ROWS_MOST)
			need->csv_bytes += rows * (CSV_HEAD + CSV_VALUE * block->channel_count);
	}
}

/* What is free where `path` will be: of the nearest folder above it that is there. */
static uint64_t available_at(const char *path)
{
	char folder[4096];
	struct statvfs disk;
	(void)snprintf(folder, sizeof folder, "%s", path ? path : "runs");
	for (;;) {
		if (statvfs(folder[0] ? folder : ".", &disk) == 0)
			return (uint64_t)disk.f_bavail * disk.f_frsize;
		char *slash = strrchr(folder, '/');
		if (folder[0] == '\0' || (slash == folder && folder[1] == '\0'))
			return UINT64_MAX;
		if (!slash)
			folder[0] = '\0';
		else
			slash[slash == folder ? 1 : 0] = '\0';
	}
}

int disk_need_of(const struct session *session, struct disk_need *ret_need, struct err *reterr)
{
	struct arena arena;
	struct bench_timing timing;
	int result = -1;
	*ret_need = (struct disk_need){.available = available_at(session->options->out)};
	arena_init(&arena, 0);
	unsigned char *needed = arena_alloc(&arena, session->rig->channel_count + 1);
	if (!needed) {
		(void)err_set(reterr, ERR_NOMEM, "no memory for the read plans");
		goto out;
	}
	if (bench_timing_assume(session->rig, &arena, &timing, reterr) < 0)
		goto out;
	for (size_t s = 0; s < session->suite_count; s++)
		for (size_t t = 0; t < session->suites[s]->test_count; t++) {
			const struct test *test = &session->suites[s]->tests[t];
			struct plan_test plan;
			struct test_plan reads = {0};
			if (!test->selected)
				continue;
			if (plan_test_make(&timing, session->suites[s], test, &arena, &plan, reterr) < 0 ||
			    test_plan_make(session->rig, test, needed, &arena, &reads, reterr) < 0)
				goto out;
			add_test(&plan, &reads, ret_need);
		}
	result = 0;
out:
	arena_release(&arena);
	return result;
}

static const char *bytes_text(uint64_t bytes, char *text, size_t size)
{
	static const char *const UNITS[] = {"kB", "MB", "GB", "TB", "PB"};
	double value = (double)bytes / 1000;
	size_t unit = 0;
	while (value >= 999.5 && unit + 1 < sizeof UNITS / sizeof UNITS[0]) {
		value /= 1000;
		unit++;
	}
	(void)snprintf(text, size, "%.3g %s", value, UNITS[unit]);
	return text;
}

int disk_need_check(const struct session *session, struct err *reterr)
{
	struct disk_need need;
	char whole[32], available[32];
	if (disk_need_of(session, &need, reterr) < 0)
		return -1;
	(void)bytes_text(need.bytes + need.csv_bytes, whole, sizeof whole);
	if (need.available == UINT64_MAX) {
		(void)snprintf(available, sizeof available, "it is not known how much");
	} else {
		(void)bytes_text(need.available, available, sizeof available);
		if (need.bytes > need.available)
			return err_set(reterr, ERR_OUTPUT,
			               "the samples of this run need about %s of disk, and %s are free where "
			               "the run folder would lie; sample less often, `decimate`, or choose "
			               "another --out",
			               whole, available);
	}
	if (!session->options->quiet && need.bytes + need.csv_bytes >= WORTH_A_WORD)
		(void)fprintf(stderr,
		              "drivetrial: the samples will take about %s of disk (%llu rows); %s free\n",
		              whole, (unsigned long long)need.rows, available);
	return 0;
}
