/* SPDX-License-Identifier: Apache-2.0 */
/* Comparisons of results written by hand; all numbers are invented, expected ones follow by hand.
 */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "comparison.h"
#include "near.h"
#include "scratch.h"

struct written {
	double value, half, max;
	const char *coverage, *verdict;
};

/* A run of one test with one metric; returns its folder. */
static const char *write_run(const char *name, struct written w)
{
	char file[600];
	const char *folder = scratch_path(name);
	assert_int_equal(mkdir(folder, 0700), 0);
	(void)snprintf(file, sizeof file, "%s/results.json", folder);
	FILE *out = fopen(file, "w");
	assert_non_null(out);
	(void)fprintf(
	    out,
	    "{\"format\":1,\"verdict\":\"%s\",\"partial\":false,\"facts\":{\"rig\":\"r\","
	    "\"started\":\"2026-12-01T00:00:00\",\"identities\":[]},\"suites\":[{\"name\":\"s\","
	    "\"tests\":[{\"name\":\"SPD-01\",\"verdict\":\"%s\",\"checks\":[{\"name\":\"c\","
	    "\"metrics\":[{\"name\":\"rise_time\",\"value\":%.17g,\"low\":%.17g,\"high\":%.17g,"
	    "\"coverage\":%s,\"unit\":\"s\",\"min\":null,\"max\":%.17g,\"evidence\":"
	    "\"independent\",\"verdict\":\"%s\"}]}]}]}]}",
	    w.verdict, w.verdict, w.value, w.value - w.half, w.value + w.half, w.coverage, w.max,
	    w.verdict);
	assert_int_equal(fclose(out), 0);
	return folder;
}

struct row {
	const char *what;
	struct written old, new;
	double uncertainty, lost;
	bool significant, worse;
};

static void a_change_counts_where_it_exceeds_both_uncertainties(void **state)
{
	(void)state;
	/* hypot(3, 4) = 5; guaranteed bounds add: 3 + 4 = 7. Margins: 120 - 100 = 20. */
	static const struct row rows[] = {
	    {"below",
	     {100, 3, 120, "0.95", "pass"},
	     {104.9, 4, 120, "0.95", "pass"},
	     5,
	     0.245,
	     false,
	     false},
	    {"above",
	     {100, 3, 120, "0.95", "pass"},
	     {105.1, 4, 120, "0.95", "pass"},
	     5,
	     0.255,
	     true,
	     true},
	    {"guarantee",
	     {100, 3, 120, "1", "pass"},
	     {106.9, 4, 120, "0.95", "pass"},
	     7,
	     0.345,
	     false,
	     false},
	    {"better",
	     {100, 3, 120, "0.95", "pass"},
	     {90, 4, 120, "0.95", "pass"},
	     5,
	     -0.5,
	     true,
	     false},
	    {"little",
	     {100, 0.3, 120, "0.95", "pass"},
	     {104, 0.4, 120, "0.95", "pass"},
	     0.5,
	     0.2,
	     true,
	     false},
	    {"outside",
	     {130, 0.3, 120, "0.95", "fail"},
	     {140, 0.4, 120, "0.95", "fail"},
	     0.5,
	     1,
	     true,
	     true},
	};
	for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
		char names[2][40];
		struct arena arena;
		struct comparison all;
		struct err err = {0};
		(void)snprintf(names[0], sizeof names[0], "%s-old", rows[i].what);
		(void)snprintf(names[1], sizeof names[1], "%s-new", rows[i].what);
		const char *paths[2] = {write_run(names[0], rows[i].old), write_run(names[1], rows[i].new)};
		arena_init(&arena, 0);
		assert_int_equal(comparison_make(paths, 2, 0.25, &arena, &all, &err), 0);
		assert_int_equal(all.metric_count, 1);
		assert_near(all.metrics[0].uncertainty, rows[i].uncertainty, 1e-9, "s");
		assert_near(all.metrics[0].lost, rows[i].lost, 1e-9, "");
		assert_int_equal(all.metrics[0].significant, rows[i].significant);
		assert_int_equal(all.metrics[0].worse, rows[i].worse);
		assert_int_equal(comparison_is_worse(&all), rows[i].worse);
		arena_release(&arena);
	}
}

static void a_verdict_that_fell_is_worse_whatever_the_numbers(void **state)
{
	(void)state;
	struct arena arena;
	struct comparison all;
	struct err err = {0};
	const char *paths[2] = {
	    write_run("fell-old", (struct written){119, 0.5, 120, "0.95", "pass"}),
	    write_run("fell-new", (struct written){119.2, 1, 120, "0.95", "inconclusive"})};
	arena_init(&arena, 0);
	assert_int_equal(comparison_make(paths, 2, 0.25, &arena, &all, &err), 0);
	assert_false(all.metrics[0].significant);
	assert_true(all.metrics[0].flipped);
	assert_true(all.tests[0].worse);
	assert_true(comparison_is_worse(&all));
	char *json = comparison_json(&all);
	assert_non_null(json);
	assert_non_null(strstr(json, "\"flipped\": true"));
	free(json);
	arena_release(&arena);
}

static void three_runs_have_a_trend(void **state)
{
	(void)state;
	struct arena arena;
	struct comparison all;
	struct err err = {0};
	/* Slope 2 a run; U of it sqrt(2) * 1 / 2 = 0.7071. */
	const char *paths[3] = {write_run("t1", (struct written){10, 1, 20, "0.95", "pass"}),
	                        write_run("t2", (struct written){12, 1, 20, "0.95", "pass"}),
	                        write_run("t3", (struct written){14, 1, 20, "0.95", "pass"})};
	arena_init(&arena, 0);
	assert_int_equal(comparison_make(paths, 3, 0.5, &arena, &all, &err), 0);
	assert_near(all.metrics[0].slope, 2, 1e-9, "s");
	assert_near(all.metrics[0].slope_uncertainty, 0.70710678, 1e-6, "s");
	assert_true(all.metrics[0].trend);
	assert_int_equal(all.metrics[0].values[1].there, true);
	arena_release(&arena);
}

static void foreign_results_are_refused(void **state)
{
	(void)state;
	static const char *const texts[] = {"", "[]", "{\"format\":2,\"suites\":[]}", "{\"format\":1}",
	                                    "{\"format\":1,\"suites\":[]"};
	for (size_t i = 0; i < sizeof texts / sizeof *texts; i++) {
		char name[40], file[600];
		struct arena arena;
		struct comparison all;
		struct err err = {0};
		(void)snprintf(name, sizeof name, "foreign-%zu", i);
		const char *folder = scratch_path(name), *paths[2] = {folder, folder};
		assert_int_equal(mkdir(folder, 0700), 0);
		(void)snprintf(file, sizeof file, "%s/results.json", folder);
		FILE *out = fopen(file, "w");
		assert_non_null(out);
		(void)fputs(texts[i], out);
		assert_int_equal(fclose(out), 0);
		arena_init(&arena, 0);
		assert_int_equal(comparison_make(paths, 2, 0.25, &arena, &all, &err), -1);
		assert_int_equal(err.code, ERR_FILE);
		arena_release(&arena);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_change_counts_where_it_exceeds_both_uncertainties),
	    cmocka_unit_test(a_verdict_that_fell_is_worse_whatever_the_numbers),
	    cmocka_unit_test(three_runs_have_a_trend),
	    cmocka_unit_test(foreign_results_are_refused),
	};
	return cmocka_run_group_tests(tests, scratch_make, scratch_remove) != 0;
}
