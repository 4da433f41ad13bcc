/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Recordings of the shipped suites that are no measurement: no rows, only NaN,
 * a register image that has frozen with its life counter, a run that ended
 * before anything was read. No test may pass on any of them, whatever stands
 * in the registers. That a sound recording can pass is shown beside it, else
 * this would prove nothing.
 */
#include "judge.h"

#include <stdlib.h>
#include <string.h>

#include "near.h"

enum { ROWS = 1500 };
#define STEP_NS (2 * NS_PER_MS)

struct bench {
	struct arena arena;
	struct faults faults;
	const struct rig *rig;
	struct suite *suite;
};

static void load(struct bench *b, const char *suite)
{
	struct err err = {0};
	memset(b, 0, sizeof *b);
	arena_init(&b->arena, 0);
	if (rig_load(SOURCE_DIR "/rigs/model-spm.yaml", &b->arena, &b->faults, &b->rig, &err) < 0 ||
	    !b->rig || suite_load(suite, b->rig, NULL, 0, &b->arena, &b->faults, &b->suite, &err) < 0 ||
	    !b->suite)
		fail_msg("%s %s", err.message, b->faults.items[0].message);
}

static bool is_life(const struct rig *rig, int channel)
{
	for (size_t d = 0; d < rig->device_count; d++)
		if (rig->devices[d].life == channel)
			return true;
	return false;
}

/* What the image of a channel says, at row number `row`. */
typedef double fill(const struct rig *rig, int channel, size_t row);

static double nan_but_alive(const struct rig *rig, int channel, size_t row)
{
	return is_life(rig, channel) ? (double)(row % 65536) : (double)NAN;
}

static double all_nan(const struct rig *rig, int channel, size_t row)
{
	(void)rig;
	(void)channel;
	(void)row;
	return (double)NAN;
}

static double frozen_at_zero(const struct rig *rig, int channel, size_t row)
{
	(void)rig;
	(void)channel;
	(void)row;
	return 0;
}

static double frozen_with_the_watchdog_tripped(const struct rig *rig, int channel, size_t row)
{
	(void)row;
	return strstr(rig->infos[channel].name, "fault") ? 9 : 0.4;
}

/* Everything moves but the counters: a gateway that repeats itself with noise. */
static double moving_without_life(const struct rig *rig, int channel, size_t row)
{
	return is_life(rig, channel) ? 7 : (double)(row % 17);
}

static double sound_with_the_watchdog_tripped(const struct rig *rig, int channel, size_t row)
{
	return is_life(rig, channel) ? (double)(row % 65536)
	                             : frozen_with_the_watchdog_tripped(rig, channel, row);
}

/* One block per device, as the links read them. */
static struct recorded_test *record(struct bench *b, const struct test *test, size_t rows,
                                    fill *value)
{
	const struct rig *rig = b->rig;
	struct recorded_test *r = arena_alloc(&b->arena, sizeof *r);
	unsigned char *set = arena_alloc(&b->arena, rig->channel_count);
	r->name = test->name;
	r->end = TEST_COMPLETED;
	r->condition.channel = -1;
	r->end_ns = ROWS * STEP_NS;
	r->blocks = arena_array(&b->arena, rig->device_count, sizeof *r->blocks);
	test_channels(rig, test, set);
	for (size_t d = 0; d < rig->device_count; d++) {
		struct recorded_block *block = &r->blocks[r->block_count];
		block->channels = arena_array(&b->arena, rig->channel_count, sizeof *block->channels);
		for (size_t c = 0; c < rig->channel_count; c++)
			if (set[c] && rig->channels[c].device == (int)d)
				block->channels[block->channel_count++] = (int)c;
		if (block->channel_count == 0)
			continue;
		r->block_count++;
		size_t stride = 16 + 8 * block->channel_count;
		unsigned char *bytes = arena_alloc(&b->arena, rows * stride + 1);
		for (size_t row = 0; row < rows; row++) {
			int64_t times[2] = {(int64_t)row * STEP_NS, (int64_t)row * STEP_NS + NS_PER_MS / 2};
			memcpy(bytes + row * stride, times, sizeof times);
			for (size_t c = 0; c < block->channel_count; c++) {
				double v = value(rig, block->channels[c], row);
				memcpy(bytes + row * stride + 16 + 8 * c, &v, sizeof v);
			}
		}
		block->rows = rows;
		block->row0 = bytes;
	}
	r->mark_count = test->marks.count;
	r->marks = arena_array(&b->arena, r->mark_count + 1, sizeof *r->marks);
	for (size_t m = 0; m < r->mark_count; m++) {
		int64_t at = (int64_t)(m + 1) * r->end_ns / (int64_t)(r->mark_count + 2);
		r->marks[m] = (struct mark){test->marks.names[m], at, at + NS_PER_MS, true};
	}
	return r;
}

static enum verdict judged(struct bench *b, const struct test *test,
                           const struct recorded_test *recorded, struct test_result *ret_result)
{
	struct err err = {0};
	if (judge_test(b->rig, b->suite, test, recorded, &b->arena, ret_result, &err) < 0)
		fail_msg("%s: %s", test->name, err.message);
	assert_string_not_equal(ret_result->reason, "");
	return ret_result->verdict;
}

static void none_passes(size_t rows, fill *value)
{
	static const char *const SUITES[] = {SOURCE_DIR "/suites/release.yaml",
	                                     SOURCE_DIR "/suites/smoke.yaml"};
	for (size_t s = 0; s < 2; s++) {
		struct bench b;
		load(&b, SUITES[s]);
		for (size_t i = 0; i < b.suite->test_count; i++) {
			struct test_result result;
			const struct test *test = &b.suite->tests[i];
			if (judged(&b, test, record(&b, test, rows, value), &result) == VERDICT_PASS)
				fail_msg("%s passes: %s", test->name, result.reason);
		}
		arena_release(&b.arena);
	}
}

static void nothing_passes_without_rows(void **state)
{
	(void)state;
	none_passes(0, frozen_at_zero);
}

static void nothing_passes_on_one_row(void **state)
{
	(void)state;
	none_passes(1, frozen_at_zero);
}

static void nothing_passes_on_nan(void **state)
{
	(void)state;
	none_passes(ROWS, all_nan);
	none_passes(ROWS, nan_but_alive);
}

static void nothing_passes_on_a_frozen_image(void **state)
{
	(void)state;
	none_passes(ROWS, frozen_at_zero);
	none_passes(ROWS, frozen_with_the_watchdog_tripped);
}

static void nothing_passes_without_life(void **state)
{
	(void)state;
	none_passes(ROWS, moving_without_life);
}

static void a_sound_recording_passes(void **state)
{
	(void)state;
	struct bench b;
	struct test_result result;
	load(&b, SOURCE_DIR "/suites/release.yaml");
	const struct test *test = &b.suite->tests[0];
	assert_string_equal(test->name, "bench/watchdog:controller");
	if (judged(&b, test, record(&b, test, ROWS, sound_with_the_watchdog_tripped), &result) !=
	    VERDICT_PASS)
		fail_msg("%s: %s", test->name, result.reason);
	arena_release(&b.arena);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(nothing_passes_without_rows),
	    cmocka_unit_test(nothing_passes_on_one_row),
	    cmocka_unit_test(nothing_passes_on_nan),
	    cmocka_unit_test(nothing_passes_on_a_frozen_image),
	    cmocka_unit_test(nothing_passes_without_life),
	    cmocka_unit_test(a_sound_recording_passes),
	};
	return RUN_GROUP(tests);
}
